"""Evenly spaced numbers as people mean them: 0.9 to 2.0 by 0.02 ends at 2.0 and holds 1.1, not 1.1000000000000001."""

from __future__ import annotations

from decimal import Decimal

MAX_POINTS = 500
MAX_PAIRS = 5000


def decimal_grid(first: float, last: float, step: float) -> tuple[float, ...]:
    """Return first, first + step, ... up to and including last, each the float nearest to its decimal.

    Parameters
    ----------
    first, last, step : float, step > 0; read as the shortest decimal that stands for them

    Returns
    -------
    tuple of float
    """
    start, stop, by = (Decimal(repr(float(value))) for value in (first, last, step))
    if by <= 0:
        raise ValueError(f"a step above zero is needed, not {step}")
    return tuple(float(start + i * by) for i in range(int((stop - start) // by) + 1)) if stop >= start else ()
