"""``yieldsim check``: validate a study and its weather, and say what would be computed from which data."""

from __future__ import annotations

import argparse
from collections.abc import Iterator, Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any

from yieldsim.commands._terminal import Progress, bold, wrapped
from yieldsim.errors import plain

if TYPE_CHECKING:
    from yieldsim.errors import InputError, Problem
    from yieldsim.study.hourly import SiteSky
    from yieldsim.study.plan import SitePlan, StudyPlan

EXAMPLE = """example:
  yieldsim check mine.yaml
        is the study right, is its weather usable, and where would each input of the air come from?
"""

_LABEL = 9  # columns of the words in front of each line


def arguments(parser: argparse.ArgumentParser) -> None:
    """Declare the options of the command."""
    parser.add_argument("study", metavar="STUDY.yaml", type=Path, help="the study file")
    parser.add_argument("--out", metavar="DIR", type=Path, help="folder for what is found (default: outputs/STUDY)")


def run(options: argparse.Namespace) -> int:
    """Check the study and every weather file; print a verdict per site, write the findings and a picture per site."""
    from yieldsim import api
    from yieldsim.errors import InputError
    from yieldsim.report.quality import write_quality
    from yieldsim.study.piece import sky_quality_rows
    from yieldsim.study.store import file_stem

    plan = api.load_study(options.study)
    out = options.out if options.out is not None else Path("outputs", file_stem(plan.name))
    print(intent(plan))
    problems: list[Problem] = []
    rows: list[dict[str, Any]] = []
    for site, found in _looked_at(plan):
        if isinstance(found, InputError):
            problems.extend(found.problems)
            print(f"\n{bold(plain(site.name))}: not usable")
            continue
        rows += [row for sky in found for row in sky_quality_rows(site.name, sky)]
        pictures = _pictures(site.name, found, out / "weather")
        print(f"\n{describe(site, found)}\n{_line('picture', ', '.join(pictures))}")
    if rows:
        print(f"\nWhat was found: {write_quality(rows, out)}")
    if problems:
        raise InputError(problems)
    return 0


def _looked_at(plan: StudyPlan) -> Iterator[tuple[SitePlan, list[SiteSky] | InputError]]:
    """Yield each site with its weather as it would be computed from, or what is wrong with it."""
    from yieldsim import api
    from yieldsim.errors import InputError
    from yieldsim.study.hourly import site_sky

    progress = Progress()
    for i, site in enumerate(plan.sites):
        progress(site.name, i, len(plan.sites))
        found: list[SiteSky] | InputError
        try:
            found = [site_sky(site, weather) for weather in api.load_weather(site)]
        except InputError as error:
            found = error
        progress.close()
        yield site, found


def _pictures(name: str, skies: Sequence[SiteSky], folder: Path) -> list[str]:
    """Draw the weather of a site, one picture a year, and return the files to look at."""
    from yieldsim.report.weather import write_weather_picture

    called = [name] if len(skies) == 1 else [f"{name} {i}" for i in range(1, len(skies) + 1)]
    return [str(write_weather_picture(each, sky.weather, folder)[-1]) for each, sky in zip(called, skies, strict=True)]


def intent(plan: StudyPlan) -> str:
    """Return in a few lines what a study would compute."""
    planes = sum(len(site.mountings) for site in plan.sites)
    lines = [
        f"{bold(plain(plan.name))}: {_count(len(plan.sites), 'site')}, {_count(planes, 'plane')} in all, "
        f"{_count(len(plan.absorbers), 'absorber')}, set against {plain(plan.reference)}"
    ]
    lines += [
        _line("absorber", f"{plain(absorber.name)}: {'/'.join(f'{gap:.4g}' for gap in absorber.gaps_ev)} eV")
        for absorber in plan.absorbers
    ]
    lines += [_line("found", f"{plain(name)}: {plain(finding)}") for name, finding in plan.findings]
    if plan.gap_sweep is not None:
        gaps, qualities = plan.gap_sweep.gaps_ev, ", ".join(plain(name) for name in plan.gap_sweep.absorbers)
        lines.append(_line("gaps", f"{len(gaps)} from {gaps[0]:g} to {gaps[-1]:g} eV; quality: {qualities}"))
    lines += [_line("loss", f"{name} {_span(monthly)} %") for name, monthly in plan.losses.monthly.items()]
    return "\n".join(lines)


def describe(site: SitePlan, skies: Sequence[SiteSky]) -> str:
    """Return what is known of a site: place, weather, air, what was found, and a verdict."""
    from yieldsim.screen import NOT_USABLE, USABLE, WITH_CARE, review

    found = [finding for sky in skies for finding in sky.weather.findings]
    reviews = [review(sky.weather) for sky in skies]
    order = (USABLE, WITH_CARE, NOT_USABLE)
    verdict = max((each.verdict for each in reviews), key=order.index)
    reasons = list(dict.fromkeys(reason for each in reviews for reason in each.reasons))
    first = skies[0].weather
    lines = [f"{bold(plain(site.name))}: {verdict}", _line("place", _place(first))]
    for sky in skies:
        weather = sky.weather
        hours = weather.interval_s / 3600
        ghi, dni = (float(weather[name].sum()) * hours / 1000 for name in ("ghi", "dni"))
        lines.append(_line("weather", f"{plain(weather.source)}: {len(weather) * hours:g} h, {plain(weather.label)}"))
        lines.append(
            _line("", f"global {ghi:.0f} and beam {dni:.0f} kWh/m2, mean {weather['temp_air'].mean():.1f} degC")
        )
    lines += [_line("why", plain(reason)) for reason in reasons]
    lines += [_line("note", plain(note)) for note in dict.fromkeys(note for sky in skies for note in sky.weather.notes)]
    lines += [_line("air", f"{name}: {plain(source)}") for name, source in skies[0].sources]
    lines += [_line("plane", f"{plain(each.name)}: {plain(each.words())}") for each in site.mountings]
    lines += [
        _line("found", f"{finding.kind}, {finding.rows} rows: {plain(finding.found)}; {plain(finding.done)}")
        for finding in found
    ]
    return "\n".join(lines)


def _place(weather: Any) -> str:
    north = f"{abs(weather.latitude_deg):.2f} {'N' if weather.latitude_deg >= 0 else 'S'}"
    east = f"{abs(weather.longitude_deg):.2f} {'E' if weather.longitude_deg >= 0 else 'W'}"
    return f"{north}, {east}, {weather.elevation_m:.0f} m, UTC{weather.utc_offset_h:+g}"


def _line(label: str, text: str) -> str:
    return wrapped(text, " " * (2 + _LABEL), f"  {label:<{_LABEL}}")


def _count(number: int, what: str) -> str:
    return f"{number} {what}{'' if number == 1 else 's'}"


def _span(monthly: Sequence[float]) -> str:
    low, high = 100 * min(monthly), 100 * max(monthly)
    return f"{low:g}" if low == high else f"{low:g} to {high:g}"
