"""Make `closing_bands.csv`: a few bands whose weighted light stands for all of it while haze and cloud are sought.

    python tests/reference/make_closing_bands.py

Non-negative weights on 32 of the 122 bands, chosen by taking the band away that is missed least, one by one, until
32 are left. Fitted to 1500 random skies from one end to the other (sun, height, water, haze, ground, cloud) computed by
this package's column with all bands: total and diffuse light of clear air and total light under cloud, each relative to
its own sum. The way is that of optimal spectral sampling (Moncet et al. 2008, J. Atmos. Sci. 65,
3917; from memory), there for absorption lines.
"""

from __future__ import annotations

from pathlib import Path

import numpy as np
from scipy.optimize import nnls

from yieldsim import reference, spectrum
from yieldsim.sky import column

N_SKY, N_BAND, SEED = 1500, 32, 1
OUT = Path(reference.__file__).parent / "closing_bands.csv"
HEADER = """\
# Bands that stand for all of them while haze and cloud are sought, and what each counts for.
# Source: computed with this package's column of air; no measured data.
# Licence: as the package.
# Units: wavelength nm; weight 1, times the band's own light.
# Obtained: tests/reference/make_closing_bands.py.
"""


def random_air(n: int, seed: int) -> tuple[column.Air, np.ndarray]:
    """Return air and cloud depths from one end to the other."""
    rng = np.random.default_rng(seed)
    grounds = np.stack([v for name, v in reference.table("ground_albedo").columns.items() if name != "wavelength_nm"])
    albedo = grounds[rng.integers(0, len(grounds), n)]
    grey = rng.random(n) < 0.5
    albedo[grey] = rng.uniform(0.05, 0.9, int(grey.sum()))[:, None] ** 1.5
    air = column.Air(
        cos_zenith=rng.uniform(0.01, 1.0, n),
        pressure=rng.uniform(55e3, 104e3, n),
        water_cm=np.exp(rng.uniform(np.log(0.08), np.log(6.0), n)),
        ozone_atm_cm=rng.uniform(0.2, 0.45, n),
        aod500=np.exp(rng.uniform(np.log(0.01), np.log(1.5), n)),
        angstrom_exponent=rng.uniform(0.0, 2.0, n),
        albedo=albedo,
    )
    return air, np.exp(rng.uniform(np.log(0.1), np.log(200.0), n))


def shares(n: int, seed: int) -> np.ndarray:
    """Return shares of each band in the light, one row a sky and kind of light."""
    air, cloud = random_air(n, seed)
    top = column.optics().extraterrestrial * column.optics().factor
    clear, cloudy = column.transmit(air, np.zeros(n)), column.transmit(air, cloud)
    rows = [0.5 * _share((clear.total - clear.beam) * top), _share(clear.total * top), 1.5 * _share(cloudy.total * top)]
    return np.concatenate(rows)


def _share(light: np.ndarray) -> np.ndarray:
    return light / light.sum(axis=1, keepdims=True)


def chosen(matrix: np.ndarray, n_band: int) -> tuple[np.ndarray, np.ndarray]:
    """Return the bands left and their weights."""
    # Least squares on the normal equations: as many rows as bands, so that a fit takes no time.
    wanted = matrix.sum(axis=1)
    triangle = np.linalg.cholesky(matrix.T @ matrix).T
    right = np.linalg.solve(triangle.T, matrix.T @ wanted)
    bands = np.arange(matrix.shape[1])
    weights = np.ones(len(bands))
    while len(bands) > n_band:
        fits = [nnls(triangle[:, np.delete(bands, j)], right) for j in range(len(bands))]
        best = int(np.argmin([miss for _, miss in fits]))
        bands, weights = np.delete(bands, best), fits[best][0]
        bands, weights = bands[weights > 0], weights[weights > 0]
    return bands, weights


def main() -> None:
    """Write the table and say how well it does on other skies."""
    bands, weights = chosen(shares(N_SKY, SEED), N_BAND)
    wavelength = spectrum.band_wavelengths()
    lines = [f"{wavelength[b]:g},{w:.6g}" for b, w in zip(bands, weights, strict=True)]
    OUT.write_text(HEADER + "wavelength_nm,weight\n" + "\n".join(lines) + "\n", encoding="utf-8")
    for name, miss in zip(("diffuse", "clear", "cloudy"), np.split(shares(2000, SEED + 1), 3), strict=True):
        found = miss[:, bands] @ weights / miss.sum(axis=1) - 1
        print(f"{name}: rms {np.sqrt(np.mean(found**2)):.5f}, worst {np.max(np.abs(found)):.5f}")


if __name__ == "__main__":
    main()
