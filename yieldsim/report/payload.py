"""The numbers behind the page's charts as one JSON-able tree, in places and absorbers counted from 0."""

from __future__ import annotations

import base64
import math
from collections.abc import Callable, Mapping, Sequence
from typing import Any

import numpy as np
import pandas as pd
import xarray as xr

from yieldsim.report.answer import Place, duels, places
from yieldsim.report.marks import called
from yieldsim.study import store
from yieldsim.study.result import STANDARD_SITE, StudyResult, edges_nm, records

Tree = dict[str, Any]

KEYS = ("site", "mounting", "absorber")
#: Measure -> (what people call it, unit, digits after the point).
MEASURES: Mapping[str, tuple[str, str, int]] = {
    "energy_kwh_m2": ("energy per module area", "kWh/m²", 2),
    "specific_yield_kwh_kwp": ("yield per rated power", "kWh/kWp", 1),
    "performance_ratio": ("performance ratio", "1", 4),
    "spectral_factor": ("spectral factor", "1", 4),
    "temperature_factor": ("temperature factor", "1", 4),
    "low_light_factor": ("low-light factor", "1", 4),
    "optical_factor": ("optical factor", "1", 4),
    "mismatch_factor": ("mismatch factor", "1", 4),
    "system_factor": ("system factor", "1", 4),
}
#: Spectra a page may hold: 24 days of 14 hours on one mounting are 336. Beyond it the first sites keep theirs, so that
#: a page stays well below 6 MB; the files hold all.
MOST_SPECTRA = 6000
#: Places a page shows; the answer and the files hold all. 60 with 12 absorbers stay below 5 MB.
MOST_PLACES = 60
MOST_IN_DUELS = 8  # absorbers of which every pair is shown


def payload(result: StudyResult) -> Tree:
    """Return what the page's charts draw; a part the result lacks is left out."""
    found = places(result.annual)[:MOST_PLACES]
    absorbers = [str(name) for name in result.standard["absorber"]]
    tree: Tree = {
        "study": result.study,
        "reference": absorbers.index(result.reference),
        "places": [{"name": place.name, "site": place.site, "mounting": place.mounting} for place in found],
        "absorbers": _absorbers(result.standard),
        "measures": {key: {"name": name, "unit": unit, "digits": d} for key, (name, unit, d) in MEASURES.items()},
        "annual": {key: _cube(result.annual, found, absorbers, key) for key in (*MEASURES, "poa_kwh_m2")},
        "rank_by_energy": _cube(result.annual, found, absorbers, "rank_by_energy"),
    }
    parts: list[tuple[str, pd.DataFrame | None, Callable[[pd.DataFrame], Any]]] = [
        ("monthly", result.monthly, lambda table: _monthly(table, found, absorbers)),
        ("by_hour", result.by_hour, lambda table: _by_hour(table, found, absorbers)),
        ("ledger", result.ledger, lambda table: _ledger(table, found, absorbers)),
        ("gap_sweep", result.gap_sweep, lambda table: _sweep(table, found)),
        ("gap_pairs", result.gap_pairs, lambda table: _pairs(table, result.gap_pair_materials, found)),
        ("generation", result.generation, lambda table: _films(table, absorbers)),
        ("chance", result.chance, lambda table: _listed(table, found, absorbers)),
        ("head_to_head", duels(result), lambda table: _listed(_of_few(table, result), found, absorbers)),
        ("rank_chance", result.rank_chance, lambda table: _listed(_by_energy(table), found, absorbers)),
        ("causes", result.causes, lambda table: _listed(_of_margins(table), found, absorbers)),
        (
            "regret",
            result.regret if len(found) > 1 else None,
            lambda table: _listed(_by_energy(table), found, absorbers),
        ),
        ("worth", result.worth, lambda table: _listed(_shown(table), found, absorbers)),
    ]
    tree |= {name: shape(table) for name, table, shape in parts if table is not None and not table.empty}
    spectra = _spectra(result.spectra, found)
    if spectra:
        tree["spectra"] = spectra
        tree["band_edges_nm"] = _rounded(_edges(next(iter(result.spectra.values()))), 6)
        if result.responses is not None:
            tree["responses"] = _responses(result.responses, absorbers)
    return tree


def _absorbers(standard: pd.DataFrame) -> list[Tree]:
    return [
        {
            "name": str(row["absorber"]),
            "gap": str(row["gap_ev"]),
            "edges_nm": _rounded(edges_nm(row["gap_ev"]), 6),
            "stc_efficiency": _number(row["stc_efficiency"]),
            "rank_at_stc": int(row["rank_at_stc"]),
        }
        for row in records(standard)
    ]


def _number(value: Any, digits: int = 7) -> float | int | None:
    """Return a number with some significant digits, None for NaN, whole numbers without a point."""
    number = float(value)
    if not math.isfinite(number):
        return None
    short = float(f"{number + 0.0:.{digits}g}")
    return int(short) if short == int(short) and abs(short) < 1e9 else short


def _rounded(values: Any, digits: int = 7) -> list[float | int | None]:
    return [_number(value, digits) for value in np.ravel(values)]


def _cube(table: pd.DataFrame, found: Sequence[Place], absorbers: Sequence[str], key: str) -> list[Any]:
    """Return a measure as [place][absorber]."""
    by_key = dict(zip(zip(*(table[name] for name in KEYS), strict=True), table[key], strict=True))
    return [_rounded([by_key.get((p.site, p.mounting, name), np.nan) for name in absorbers]) for p in found]


def _monthly(table: pd.DataFrame, found: Sequence[Place], absorbers: Sequence[str]) -> Tree:
    return {key: _months(table, found, absorbers, key) for key in (*MEASURES, "poa_kwh_m2")}


def _ledger(table: pd.DataFrame, found: Sequence[Place], absorbers: Sequence[str]) -> Tree:
    fates = [str(name) for name in table.columns if name not in KEYS]
    return {"fates": fates, "values": [_cube(table, found, absorbers, fate) for fate in fates]}


def _months(table: pd.DataFrame, found: Sequence[Place], absorbers: Sequence[str], key: str) -> list[Any]:
    """Return a measure as [place][absorber][month]."""
    names = zip(*(table[name] for name in (*KEYS, "month")), strict=True)
    by_key = dict(zip(names, table[key], strict=True))
    return [
        [
            _rounded([by_key.get((p.site, p.mounting, name, month), np.nan) for month in range(1, 13)])
            for name in absorbers
        ]
        for p in found
    ]


def _by_hour(table: pd.DataFrame, found: Sequence[Place], absorbers: Sequence[str]) -> list[Any]:
    """Return specific yield as [place][absorber][12 x 24]; 0 without light."""
    out = np.zeros((len(found), len(absorbers), 288))
    at_place = {(p.site, p.mounting): i for i, p in enumerate(found)}
    at_absorber = {name: i for i, name in enumerate(absorbers)}
    index = [at_place.get(key, -1) for key in zip(table["site"], table["mounting"], strict=True)]
    place = np.array(index)
    absorber = np.array([at_absorber[name] for name in table["absorber"]])
    cell = (table["month"].to_numpy() - 1) * 24 + table["hour"].to_numpy()
    known = place >= 0
    out[place[known], absorber[known], cell[known]] = table["specific_yield_kwh_kwp"].to_numpy()[known]
    return [[_rounded(row, 5) for row in one] for one in out]


def _sweep(table: pd.DataFrame, found: Sequence[Place]) -> list[Tree]:
    at_place = {(p.site, p.mounting): i for i, p in enumerate(found)}
    curves = []
    for (quality, site, mounting), rows in table.groupby(["quality", "site", "mounting"], sort=False):
        if site != STANDARD_SITE and (str(site), str(mounting)) not in at_place:
            continue
        ordered = rows.sort_values("gap_ev")
        curves.append(
            {
                "quality": quality,
                "place": -1 if site == STANDARD_SITE else at_place[str(site), str(mounting)],
                "gap_ev": _rounded(ordered["gap_ev"]),
                "energy_kwh_m2": _rounded(ordered["energy_kwh_m2"]),
            }
        )
    return curves


def _pairs(table: pd.DataFrame, materials: pd.DataFrame | None, found: Sequence[Place]) -> list[Tree]:
    at_place = {(p.site, p.mounting): i for i, p in enumerate(found)}
    kinds = [name for name in ("quality", "terminals") if name in table]
    keys = ["site", "mounting", *kinds]
    today: dict[Any, list[Tree]] = {}
    for row in [] if materials is None else records(materials):
        point = {name: _number(row[name]) for name in ("top_gap_ev", "bottom_gap_ev", "behind_best")}
        today.setdefault(tuple(row[key] for key in keys), []).append({"name": str(row["material"]), **point})
    return [
        {
            "place": -1 if place[0] == STANDARD_SITE else at_place[str(place[0]), str(place[1])],
            "kind": ", ".join(
                f"{value} terminals" if name == "terminals" else str(value)
                for name, value in zip(kinds, place[2:], strict=True)
            ),
            "top_gap_ev": _rounded(rows["top_gap_ev"]),
            "bottom_gap_ev": _rounded(rows["bottom_gap_ev"]),
            "energy_kwh_m2": _rounded(rows["energy_kwh_m2"]),
            "materials": today.get(place, []),
        }
        for place, rows in table.groupby(keys, sort=False)
        if place[0] == STANDARD_SITE or (str(place[0]), str(place[1])) in at_place
    ]


def _films(table: pd.DataFrame, absorbers: Sequence[str]) -> list[Tree]:
    junctions = {str(name): len(set(rows["junction"])) for name, rows in table.groupby("absorber")}
    return [
        {
            "absorber": absorbers.index(str(name)),
            "junction": str(junction),
            "junctions": junctions[str(name)],
            "depth_um": _rounded(rows["depth_um"], 4),
            "generation_ma_cm2_um": _rounded(rows["generation_ma_cm2_um"], 4),
            "share_above": _rounded(rows["share_above"], 5),
        }
        for (name, junction), rows in table.groupby(["absorber", "junction"], sort=False)
    ]


def _listed(table: pd.DataFrame, found: Sequence[Place], absorbers: Sequence[str]) -> list[Tree]:
    """Return rows as trees with place and absorbers as numbers."""
    at_place = {(p.site, p.mounting): i for i, p in enumerate(found)}
    at_absorber = {name: i for i, name in enumerate(absorbers)}
    rows = []
    for record in records(table):
        place = at_place.get((record.pop("site"), record.pop("mounting")))
        if place is None:
            continue
        row: Tree = {"place": place}
        for key, value in record.items():
            if key in ("absorber", "other"):
                row[key] = at_absorber[value]
            else:
                row[key] = value if isinstance(value, str) else _number(value)
        rows.append(row)
    return rows


def _by_energy(table: pd.DataFrame) -> pd.DataFrame:
    """Return rows by energy per area, the measure the page's decision stands on."""
    return table[table["measure"] == "energy_kwh_m2"] if "measure" in table else table


def _of_margins(table: pd.DataFrame) -> pd.DataFrame:
    """Return the causes of a margin between two absorbers, not those of one absorber's yield."""
    margins = _by_energy(table)
    margins = margins[margins["other"].fillna("").astype(str) != ""]
    return margins.assign(input=margins["input"].map(called))


def _shown(table: pd.DataFrame) -> pd.DataFrame:
    """Return the columns of a plant's worth that the page draws."""
    kept = ("break_even_per_m2", "cost_of_energy_per_kwh")
    names = [name for name in table if str(name) in (*KEYS, "currency") or str(name).startswith(kept)]
    return table[names]


def _of_few(table: pd.DataFrame, result: StudyResult) -> pd.DataFrame:
    """Return the pairs a page shows: all of few absorbers, else those with the reference."""
    if len(result.standard) > MOST_IN_DUELS:
        table = table[(table["absorber"] == result.reference) | (table["other"] == result.reference)]
    return table


def _responses(table: pd.DataFrame, absorbers: Sequence[str]) -> list[list[list[float | int | None]]]:
    """Return the collected share as [absorber][junction][band]."""
    return [
        [_rounded(rows["collected_share"], 4) for _, rows in table[table["absorber"] == name].groupby("junction")]
        for name in absorbers
    ]


def _edges(dataset: xr.Dataset) -> Any:
    pairs = dataset["band_edges"].values
    return np.append(pairs[:, 0], pairs[-1, 1])


def _spectra(spectra: Mapping[str, xr.Dataset], found: Sequence[Place]) -> list[Tree]:
    """Return the days of each place; bands as 16-bit shares of the hour's brightest band, in base 64."""
    out: list[Tree] = []
    room = MOST_SPECTRA
    for number, place in enumerate(found):
        dataset = spectra.get(place.site)
        if dataset is None or place.mounting not in dataset["mounting"].values:
            continue
        room -= dataset.sizes["time"]
        if room < 0:
            break
        out.append(
            {
                "place": number,
                "file": f"spectra/{store.file_stem(place.site)}.nc",
                "days": _days(dataset, place.mounting),
            }
        )
    return out


def _days(dataset: xr.Dataset, mounting: str) -> list[Tree]:
    offset_s = round(float(dataset.attrs["utc_offset_h"]) * 3600)
    local = dataset["time"].values.astype("datetime64[s]") + np.timedelta64(offset_s, "s")
    light = dataset["plane_of_array"].sel(mounting=mounting).values
    day, kind = local.astype("datetime64[D]"), dataset["day_kind"].values
    days: dict[tuple[str, str], list[int]] = {}
    for i, (date, text) in enumerate(zip(day, kind, strict=True)):
        days.setdefault((str(date), str(text)), []).append(i)
    columns = [name for name in HOUR_COLUMNS if name in dataset]
    return [
        {
            "date": date,
            "kind": text,
            "hours": [str(local[i])[11:16] for i in at],
            "light": [_packed(light[i]) for i in at],
            **{name: _rounded(dataset[name].values[at], 4) for name in columns},
        }
        for (date, text), at in days.items()
    ]


HOUR_COLUMNS = ("zenith", "ghi", "dni", "dhi", "temp_air", "aod500", "precipitable_water", "cloud_optical_depth")


def _packed(bands: Any) -> list[Any]:
    """Return [scale, text]: a band is its 16-bit number times the scale [W m-2]."""
    top = float(np.max(bands))
    if not top > 0:
        return [0, ""]
    scale = float(f"{top / 65535:.9g}")
    whole = np.clip(np.round(np.asarray(bands) / scale), 0, 65535).astype("<u2")
    return [scale, base64.b64encode(whole.tobytes()).decode("ascii")]
