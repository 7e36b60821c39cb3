"""Finished studies made up for tests: invented sites and numbers of a plausible size, no engine behind them."""

from __future__ import annotations

from collections.abc import Sequence
from itertools import product
from typing import Any

import numpy as np
import pandas as pd
import xarray as xr

from yieldsim import spectrum
from yieldsim.constants import PHOTON_EV_NM
from yieldsim.study.result import STANDARD_SITE, StudyResult

SITES = ("Amber Mesa", "Mangrove Reach", "Saltmarsh Point", "Birchholm", "Highmoor")
GAPS = {
    "silicon": 1.12, "cadmium telluride": 1.48, "copper indium gallium": 1.15, "gallium arsenide": 1.42,
    "amorphous silicon": 1.72, "perovskite 1.55": 1.55, "perovskite 1.68": 1.68, "ideal 1.34": 1.34,
}  # fmt: skip
#: Fates and share of what is not delivered, as a ledger has them.
LOST = {
    "reflected": 0.04, "below_gap": 0.25, "uncollected": 0.06, "thermalised": 0.35, "radiative_voltage": 0.12,
    "nonradiative_voltage": 0.08, "fill_factor": 0.04, "resistance": 0.005, "mismatch": -0.001, "snow": 0.0,
    "soiling": 0.03, "wiring": 0.026,
}  # fmt: skip
FATES = (*LOST, "delivered")
KINDS = (("ideal", 2), ("ideal", 4), ("like perovskite-1.68", 2))


def make(
    sites: Sequence[str] = SITES,
    absorbers: dict[str, float] | None = None,
    mountings: Sequence[str] = ("fixed",),
    *,
    full: bool = False,
    seed: int = 1,
) -> StudyResult:
    """Return a made-up result; ``full`` adds the parts that few studies have."""
    gaps = GAPS if absorbers is None else absorbers
    chance = np.random.default_rng(seed)
    monthly = _monthly(sites, mountings, gaps, chance)
    annual = _annual(monthly, gaps)
    more: dict[str, Any] = _rest(annual, gaps) if full else {}
    return StudyResult(
        study="made-up",
        resolved={"study": "made-up", "reference": next(iter(gaps)), "sites": [{"name": site} for site in sites]},
        annual=annual,
        monthly=monthly,
        weather_quality=_quality(sites),
        standard=_standard(gaps),
        gap_sweep=_sweep(sites, mountings),
        spectra={site: _spectra(mountings, i) for i, site in enumerate(sites)},
        responses=_responses(gaps),
        by_hour=_by_hour(annual, gaps),
        run={
            "study": "made-up",
            "yieldsim": "0.0",
            "inputs": {f"{site}.csv": "0" * 64 for site in sites},
            "config": {},
        },
        **more,
    )


def _efficiency(gap: float) -> float:
    return 0.25 - 0.12 * (gap - 1.34) ** 2


def _monthly(sites: Sequence[str], mountings: Sequence[str], gaps: dict[str, float], chance: Any) -> pd.DataFrame:
    rows = []
    for (i, site), mounting, (name, gap) in product(enumerate(sites), mountings, gaps.items()):
        for month in range(1, 13):
            season = np.cos(2 * np.pi * (month - 6.5) / 12)
            light = (130 - 8 * i) * (1 + 0.5 * season)
            factors = {
                "optical_factor": 0.965,
                "spectral_factor": 1 + (gap - 1.2) * (0.06 * season + 0.02 * (i - 2)) + chance.normal(0, 0.002),
                "low_light_factor": 0.985 - 0.02 * (1 - season),
                "temperature_factor": 0.96 - 0.03 * season * (1.9 - gap) - 0.01 * (4 - i),
                "mismatch_factor": 1.0,
                "system_factor": 0.955,
            }
            ratio = float(np.prod(list(factors.values())))
            rows.append(
                {
                    "site": site,
                    "mounting": mounting,
                    "absorber": name,
                    "month": month,
                    "hours": 730.0,
                    "poa_kwh_m2": light,
                }
                | factors
                | {"performance_ratio": ratio, "specific_yield_kwh_kwp": ratio * light}
                | {"energy_kwh_m2": ratio * light * _efficiency(gap)}
            )
    return pd.DataFrame(rows)


def _rank(values: pd.Series) -> pd.Series:
    return values.rank(ascending=False, method="min").astype(int)


def _annual(monthly: pd.DataFrame, gaps: dict[str, float]) -> pd.DataFrame:
    key = ["site", "mounting", "absorber"]
    summed = monthly.groupby(key, sort=False)[["hours", "poa_kwh_m2", "specific_yield_kwh_kwp", "energy_kwh_m2"]].sum()
    means = monthly.groupby(key, sort=False)[[name for name in monthly.columns if name.endswith("_factor")]].mean()
    table = summed.join(means).reset_index()
    table["performance_ratio"] = table["specific_yield_kwh_kwp"] / table["poa_kwh_m2"]
    table["terminals"] = 2
    table["gap_ev"] = [f"{gaps[name]:g}" for name in table["absorber"]]
    table["stc_efficiency"] = [_efficiency(gaps[name]) for name in table["absorber"]]
    group = table.groupby(["site", "mounting"], sort=False)
    table["rank_by_yield"] = group["specific_yield_kwh_kwp"].transform(_rank)
    table["rank_by_energy"] = group["energy_kwh_m2"].transform(_rank)
    table["rank_at_stc"] = group["stc_efficiency"].transform(_rank)
    return table


def _standard(gaps: dict[str, float]) -> pd.DataFrame:
    efficiency = [_efficiency(gap) for gap in gaps.values()]
    return pd.DataFrame(
        {
            "absorber": list(gaps),
            "terminals": 2,
            "gap_ev": [f"{gap:g}" for gap in gaps.values()],
            "stc_efficiency": efficiency,
            "jsc_a_m2": [1000 * e for e in efficiency],
            "voc_v": [gap - 0.4 for gap in gaps.values()],
            "ff": 0.8,
            "power_temperature_coefficient_per_k": [-0.0045 + 0.0015 * (gap - 1) for gap in gaps.values()],
            "rank_at_stc": _rank(pd.Series(efficiency)),
        }
    )


def _quality(sites: Sequence[str]) -> pd.DataFrame:
    rows = []
    for site in sites:
        rows.append((site, "night_light", 3, "2023-01-04T06:00:00Z", "2023-11-20T17:00:00Z", "light at night",
                     "set to zero"))  # fmt: skip
        rows.append((site, "source:aod500", 4300, "", "", "study: 12 monthly values", "used"))
        rows.append((site, "source:water", 4300, "", "", "from temperature and humidity", "used"))
    return pd.DataFrame(rows, columns=["site", "kind", "rows", "first", "last", "found", "done"])


def _sweep(sites: Sequence[str], mountings: Sequence[str]) -> pd.DataFrame:
    rows = []
    places = [*product(sites, mountings), (STANDARD_SITE, "")]
    for (i, (site, mounting)), (quality, top) in product(enumerate(places), (("ideal", 0.337), ("like c-si", 0.26))):
        for gap in np.round(np.arange(0.9, 2.001, 0.02), 2):
            light = 1000.0 if site == STANDARD_SITE else 2100.0 - 130 * i
            efficiency = top - 0.25 * (gap - 1.34) ** 2 + 0.004 * np.cos(40 * gap)
            shifted = top - 0.25 * (gap - 1.34 - 0.02 * (2 - i)) ** 2 + 0.004 * np.cos(40 * gap)
            energy = light * (efficiency if site == STANDARD_SITE else 0.9 * shifted)
            rows.append((site, mounting, quality, float(gap), light, float(energy), float(efficiency)))
    columns = ["site", "mounting", "quality", "gap_ev", "poa_kwh_m2", "energy_kwh_m2", "standard_efficiency"]
    return pd.DataFrame(rows, columns=columns)


def _responses(gaps: dict[str, float]) -> pd.DataFrame:
    wavelength = spectrum.band_wavelengths()
    return pd.concat(
        [
            pd.DataFrame(
                {
                    "absorber": name,
                    "junction": 1,
                    "wavelength_nm": wavelength,
                    "collected_share": 0.93 / (1 + np.exp((wavelength - PHOTON_EV_NM / gap) / 15)),
                }
            )
            for name, gap in gaps.items()
        ],
        ignore_index=True,
    )


def _spectra(mountings: Sequence[str], site: int) -> xr.Dataset:
    bands, centre, edges = spectrum.reference_bands(), spectrum.band_wavelengths(), spectrum.band_edges()
    times, heights, kinds, depth = [], [], [], []
    for month, (kind, cloud) in product(range(1, 13), (("clear", 0.0), ("median", 12.0))):
        long = 8 if month in (1, 2, 11, 12) else 12
        for step in range(long):
            day = 10 if kind == "clear" else 20
            times.append(np.datetime64(f"2023-{month:02d}-{day}T{12 - long // 2 + step:02d}:00:00"))
            heights.append(np.sin(np.pi * (step + 0.5) / long) * (0.9 if long == 12 else 0.5))
            kinds.append(kind)
            depth.append(cloud)
    sun = np.array(heights)
    clear = np.exp(-np.array(depth) / 2)
    redder = np.exp(-0.15 / np.maximum(sun, 0.05)[:, None] * (550 / centre) ** 2)
    beam = bands * redder * clear[:, None] * 0.9
    diffuse = bands * (450 / centre) ** 1.5 * sun[:, None] * (0.2 + 0.3 * (1 - clear[:, None]))
    front = np.array([(beam * sun[:, None] + diffuse) * (1 - 0.1 * m) for m in range(len(mountings))])
    dni, dhi = beam.sum(axis=1), diffuse.sum(axis=1)
    month = np.array(times).astype("datetime64[M]").astype(int) % 12 + 1
    return xr.Dataset(
        {
            "beam": (("time", "band"), beam),
            "diffuse": (("time", "band"), diffuse),
            "plane_of_array": (("mounting", "time", "band"), front),
            "band_edges": (("band", "edge"), np.stack([edges[:-1], edges[1:]], axis=1)),
            "zenith": ("time", np.degrees(np.arccos(sun))),
            "aod500": ("time", np.full(len(sun), 0.1)),
            "precipitable_water": ("time", np.full(len(sun), 1.5)),
            "cloud_optical_depth": ("time", np.array(depth)),
            "month": ("time", month),
            "day_kind": ("time", np.array(kinds)),
            "ghi": ("time", dni * sun + dhi),
            "dni": ("time", dni),
            "dhi": ("time", dhi),
            "temp_air": ("time", np.full(len(sun), 15.0)),
        },
        {
            "time": np.array(times, dtype="datetime64[ns]"),
            "wavelength": ("band", centre),
            "mounting": np.array(list(mountings), dtype=str),
        },
        {"utc_offset_h": float(site), "latitude_deg": 40.0, "longitude_deg": 15.0 * site, "elevation_m": 100.0}
        | {"source": "yieldsim from made_up.csv", "comment": "values are means over it. invented, for tests"},
    )


def _by_hour(annual: pd.DataFrame, gaps: dict[str, float]) -> pd.DataFrame:
    cells = [(m, h) for m in range(1, 13) for h in range(6, 19)]
    weight = np.array(
        [np.sin(np.pi * (h - 5.5) / 13) * (1 - 0.5 * np.cos(2 * np.pi * (m - 0.5) / 12)) for m, h in cells]
    )
    parts = []
    for row in annual.itertuples():
        tilt = np.array([1 + (gaps[row.absorber] - 1.2) * 0.1 * np.sin(np.pi * (h - 5.5) / 13) for _, h in cells])
        share = weight * tilt / (weight * tilt).sum()
        parts.append(
            pd.DataFrame(
                {
                    "site": row.site,
                    "mounting": row.mounting,
                    "absorber": row.absorber,
                    "month": [m for m, _ in cells],
                    "hour": [h for _, h in cells],
                    "specific_yield_kwh_kwp": share * row.specific_yield_kwh_kwp,
                }
            )
        )
    return pd.concat(parts, ignore_index=True)


def _rest(annual: pd.DataFrame, gaps: dict[str, float]) -> dict[str, Any]:
    key = annual[["site", "mounting", "absorber"]]
    energy = annual["energy_kwh_m2"]
    lost = annual["poa_kwh_m2"] - energy
    ledger = key.assign(**{name: lost * part for name, part in LOST.items()}, delivered=energy)
    chance = [
        key.assign(measure=name, base=annual[name], p90=annual[name] * 0.94, p50=annual[name], p10=annual[name] * 1.06)
        for name in ("specific_yield_kwh_kwp", "energy_kwh_m2")
    ]
    first = next(iter(gaps))
    others = key[key["absorber"] != first]
    duels, ranks, causes, flips = [], [], [], []
    for measure in ("specific_yield_kwh_kwp", "energy_kwh_m2"):
        low = 0.03 if measure == "energy_kwh_m2" else 0.01
        duel = others.assign(measure=measure, other=first, probability=np.linspace(0.05, 0.98, len(others)))
        duels.append(
            duel.assign(
                probability_error=0.02, above=0.01, probability_above=np.linspace(0.01, 0.9, len(others)),
                margin_p90=-low, margin_p50=0.01, margin_p10=0.05, verdict="likely",
            )
        )  # fmt: skip
        share = 1 / len(gaps)
        ranks += [key.assign(measure=measure, rank=rank, probability=share) for rank in range(1, len(gaps) + 1)]
        pair = others.groupby(["site", "mounting"], sort=False).head(1).assign(measure=measure, other=first)
        for i, name in enumerate(("degradation", "external_radiative_efficiency", "aod500", "model_clear")):
            total = 0.5 / (i + 1)
            causes.append(
                pair.assign(
                    input=name, first_order=total, first_order_low=total - 0.02, first_order_high=total + 0.02,
                    total=total, total_low=total - 0.02, total_high=total + 0.02,
                    note="too few draws" if i == 3 else "",
                )
            )  # fmt: skip
            found = pair.assign(input=name, of="all", unit="times", value=1.2 if i == 0 else np.nan, spreads=1.0)
            flips.append(found.assign(found="tie" if i == 0 else "none within 4 spreads"))
    worth = key.assign(currency="EUR", cost_of_energy_per_kwh=0.041, net_present_value=1e5)
    worth = worth.assign(module_price_per_m2=25.0, break_even_price_per_m2=25.0 + np.linspace(-8, 12, len(worth)))
    worth = worth.assign(break_even_per_m2=np.where(key["absorber"] == first, 0.0, np.linspace(-8, 12, len(worth))))
    for name in ("cost_of_energy_per_kwh", "net_present_value", "break_even_price_per_m2", "break_even_per_m2"):
        worth = worth.assign(
            **{f"{name}_p90": worth[name] - 3, f"{name}_p50": worth[name], f"{name}_p10": worth[name] + 3}
        )
    best = annual.groupby(["site", "mounting"])["energy_kwh_m2"].transform("max")
    regret = key.assign(measure="energy_kwh_m2", value=energy, best=best, regret=1 - energy / best, weight=0.2)
    names = list(gaps)
    portfolio = pd.DataFrame(
        {
            "mounting": annual["mounting"].iloc[0], "measure": "energy_kwh_m2", "absorber": names,
            "mean_value": np.linspace(400, 300, len(names)), "mean_regret": np.linspace(0, 0.2, len(names)),
            "worst_regret": np.linspace(0.01, 0.3, len(names)), "worst_site": annual["site"].iloc[0],
            "wins": [2, *[0] * (len(names) - 1)], "best_on_average": [1, *[0] * (len(names) - 1)],
            "smallest_worst_regret": [1, *[0] * (len(names) - 1)], "wins_nowhere": [0, *[1] * (len(names) - 1)],
        }
    )  # fmt: skip
    sites = [*dict.fromkeys(zip(annual["site"], annual["mounting"], strict=True)), (STANDARD_SITE, "")]
    pairs = [
        (site, mounting, quality, terminals, float(top), float(bottom), _pair_energy(top, bottom, terminals))
        for site, mounting in sites
        for quality, terminals in KINDS
        for top in np.round(np.arange(1.5, 2.001, 0.04), 2)
        for bottom in np.round(np.arange(0.9, 1.301, 0.04), 2)
    ]
    columns = ["site", "mounting", "quality", "terminals", "top_gap_ev", "bottom_gap_ev", "energy_kwh_m2"]
    materials = {"perovskite on silicon": (1.68, 1.12), "two perovskites of a long name": (1.78, 1.25)}
    standing = [
        (*place, *kind, name, top, bottom, _pair_energy(top, bottom, kind[1]), 1.7, 1.1,
         1 - _pair_energy(top, bottom, kind[1]) / _pair_energy(1.7, 1.1, kind[1]))
        for place in sites
        for kind in KINDS
        for name, (top, bottom) in materials.items()
    ]  # fmt: skip
    depth = np.linspace(0, 1, 40) ** 3
    films = pd.concat(
        [
            pd.DataFrame(
                {
                    "absorber": name,
                    "junction": junction,
                    "depth_um": thickness * depth,
                    "generation_ma_cm2_um": 80 / thickness * np.exp(-4 * depth),
                    "share_above": (1 - np.exp(-4 * depth)) / (1 - np.exp(-4)),
                }
            )
            for name in list(gaps)[:3]
            for junction, thickness in ((1, 0.5), (2, 160.0))
        ],
        ignore_index=True,
    )
    return {
        "ledger": ledger,
        "chance": pd.concat(chance, ignore_index=True),
        "head_to_head": pd.concat(duels, ignore_index=True),
        "rank_chance": pd.concat(ranks, ignore_index=True),
        "causes": pd.concat(causes, ignore_index=True),
        "flips": pd.concat(flips, ignore_index=True),
        "regret": regret,
        "portfolio": portfolio,
        "worth": worth,
        "gap_pairs": pd.DataFrame(pairs, columns=columns),
        "gap_pair_materials": pd.DataFrame(
            standing,
            columns=[*columns[:4], "material", *columns[4:], "best_top_gap_ev", "best_bottom_gap_ev", "behind_best"],
        ),
        "generation": films,
    }


def _pair_energy(top: float, bottom: float, terminals: int) -> float:
    apart = 900 if terminals == 2 else 200
    return float(900 - 800 * (top - 1.7) ** 2 - apart * (bottom - 1.1 - (top - 1.7)) ** 2)
