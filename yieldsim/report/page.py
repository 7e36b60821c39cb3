"""The page of a study: one self-contained file that opens from a disk and asks no network for anything."""

from __future__ import annotations

import json
from collections.abc import Mapping, Sequence
from importlib import resources
from pathlib import Path
from typing import Any

import jinja2
import pandas as pd
from markupsafe import Markup

from yieldsim.report import answer as answers
from yieldsim.report.marks import called, position
from yieldsim.report.payload import MOST_PLACES, payload
from yieldsim.study import store
from yieldsim.study.result import TABLES, StudyResult, records

PAGE = "report.html"
MOST_FLIPS = 40  # rows of what would turn a ranking; flips.csv holds all
MOST_COLUMNS = 12  # places side by side in the table at a glance; annual.csv holds all
_SOURCE = "source:"
_TIMES = "values are means over it."
_INPUTS_OF_AIR = {
    "aod500": "haze (aerosol optical depth at 500 nm)",
    "angstrom_exponent": "colour of the haze (Ångström exponent)",
    "precipitable_water": "water vapour (precipitable water)",
    "albedo": "reflection of the ground (albedo)",
}
#: Ours by hand; the two libraries (both under the ISC licence, its text at their head) draw the charts: they make SVG,
#: which takes the page's own colours in dark and light, prints sharply and can be read by assistive software.
_SCRIPTS = ("d3.min.js", "plot.min.js", "page.js", "charts.js", "decision.js", "gaps.js")


def write_page(result: StudyResult, folder: Path) -> Path:
    """Write ``report.html`` into a folder and return it.

    Raises
    ------
    PlaceError
        Where the folder cannot be written.
    """
    path = folder / PAGE
    store.write_text(path, render(result).encode("utf-8", "replace").decode("utf-8"))
    return path


def render(result: StudyResult) -> str:
    """Return the page as HTML text; every name in it is escaped."""
    environment = jinja2.Environment(
        autoescape=True,
        undefined=jinja2.StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
        loader=jinja2.FunctionLoader(_asset),
    )
    environment.filters |= {"figures": _figures, "percent": answers.percent, "called": called}
    found = answers.places(result.annual)
    has = {name: getattr(result, name) is not None for name in TABLES}
    return environment.get_template("page.html").render(
        study=result.study,
        version=str(result.run.get("yieldsim", "")),
        started=str(result.run.get("started", "")),
        fingerprint=str(result.run.get("fingerprint", "")),
        inputs=dict(result.run.get("inputs", {})),
        answer=answers.answer(result),
        count=len(found),
        places=found[:MOST_COLUMNS],
        glance=_glance(result, found[:MOST_COLUMNS]),
        standard=records(result.standard),
        reference=result.reference,
        has=has | {"spectra": bool(result.spectra)},
        flips=_flips(result),
        portfolio=_portfolio(result),
        files=[file for name, file in TABLES.items() if has[name]],
        sources=_by_site(result.weather_quality, sources=True),
        findings=_by_site(result.weather_quality, sources=False),
        about={site: _about(dataset.attrs) for site, dataset in result.spectra.items()},
        inputs_of_air=_INPUTS_OF_AIR,
        most_places=MOST_PLACES,
        doubt=answers.DOUBT,
        data=Markup(script_json(payload(result))),  # noqa: S704  escaped by script_json
        css=Markup(_asset("page.css")),  # noqa: S704  ours
        scripts=[Markup(_asset(name)) for name in _SCRIPTS],  # noqa: S704  ours and two libraries shipped with us
    )


def _glance(result: StudyResult, found: Sequence[answers.Place]) -> list[dict[str, Any]]:
    """Return a row per absorber: what its datasheet says, and per place energy, difference and ranks."""
    by_place = [{row["absorber"]: row for row in place.rows} for place in found]
    return [
        row | {"cells": [_cell(rows.get(row["absorber"]), rows[result.reference]) for rows in by_place]}
        for row in records(result.standard)
    ]


def _cell(row: Mapping[str, Any] | None, reference: Mapping[str, Any]) -> dict[str, Any] | None:
    if row is None:
        return None
    energy, base = float(row["energy_kwh_m2"]), float(reference["energy_kwh_m2"])
    return {
        "energy": energy,
        "difference": f"{100 * (energy / base - 1):+.1f} %".replace("-", "−")
        if row is not reference and base > 0
        else "",
        "rank": row["rank_by_energy"],
        "moved": row["rank_at_stc"] - row["rank_by_energy"],
    }


def _flips(result: StudyResult) -> list[dict[str, Any]]:
    """Return the inputs at whose value the first and the second absorber tie, nearest first in spreads, per place."""
    if result.flips is None or result.flips.empty:
        return []
    table = result.flips
    if "measure" in table:
        table = table[table["measure"] == "energy_kwh_m2"]
    rows = [row for row in records(table) if row["found"] == "tie"]
    rows.sort(key=lambda row: abs(float(row["spreads"])))
    return rows[:MOST_FLIPS]


def _portfolio(result: StudyResult) -> list[dict[str, Any]]:
    """Return what each absorber does over all sites by energy per area, the best on average first."""
    if result.portfolio is None or result.portfolio.empty:
        return []
    rows = [row for row in records(result.portfolio) if row["measure"] == "energy_kwh_m2"]
    return sorted(rows, key=lambda row: (str(row["mounting"]), -float(row["mean_value"])))


def _about(attributes: Mapping[Any, Any]) -> dict[str, str]:
    """Return where a site lies and what its weather says of itself, from the attributes of its spectra."""
    keys = ("latitude_deg", "longitude_deg", "elevation_m")
    where = position(*(float(attributes[key]) for key in keys)) if all(key in attributes for key in keys) else ""
    source = str(attributes.get("source", "")).removeprefix("yieldsim from ")
    # The comment of a dataset tells first how its times are meant, then what the weather file says of itself.
    notes = str(attributes.get("comment", "")).rpartition(_TIMES)[2].strip().rstrip(".")
    return {"where": where, "source": source, "notes": notes[:1].upper() + notes[1:]}


def script_json(content: Any) -> str:
    """Return JSON that may stand inside a script element: nothing in it can end the element or start a comment."""
    text = json.dumps(content, ensure_ascii=False, allow_nan=False, separators=(",", ":"))
    unsafe = {"<": "\\u003c", ">": "\\u003e", "&": "\\u0026", "\u2028": "\\u2028", "\u2029": "\\u2029"}
    for sign, escape in unsafe.items():
        text = text.replace(sign, escape)
    return text


def _asset(name: str) -> str:
    return (resources.files(__package__) / name).read_text(encoding="utf-8")


def _figures(value: Any, digits: int = 1) -> str:
    """Return a number with a fixed count of digits after the point, a dash where there is none."""
    if value is None or value != value:
        return "–"
    return f"{float(value) + 0.0:,.{digits}f}".replace("-", "−")


def _by_site(quality: pd.DataFrame, *, sources: bool) -> dict[str, list[dict[str, Any]]]:
    """Return rows by site: those that tell where the state of the air came from, or all others."""
    rows: dict[str, list[dict[str, Any]]] = {}
    for row in records(quality):
        of_site = rows.setdefault(str(row["site"]), [])
        if str(row["kind"]).startswith(_SOURCE) == sources:
            of_site.append(row)
    return rows
