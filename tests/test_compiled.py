"""What compiled code calls by name."""

from fractions import Fraction

import numpy as np

from yieldsim.compiled import compiled, fma


@compiled
def each(a, b, c, out):
    """Set out to a b + c, element by element."""
    for i in range(len(out)):
        out[i] = fma(a[i], b[i], c[i])


def test_fused_product_is_rounded_once():
    """Exact by rational arithmetic, where c takes nearly all of the product away."""
    a, b = np.random.default_rng(1).uniform(0.5, 2.0, (2, 101))
    out = np.empty(101)
    each(a, b, -(a * b), out)
    exact = [float(Fraction(x) * Fraction(y) - Fraction(float(x * y))) for x, y in zip(a, b, strict=True)]
    np.testing.assert_array_equal(out, exact)
    assert np.any(out != 0)
