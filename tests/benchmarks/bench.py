"""How fast, how lean: ratios of this package to what it is set against, side by side in one process.

    python tests/benchmarks/bench.py [--pairs 7] [--site saltmarsh_point] [--only a b draws c d e f]

Each pair runs ours, then theirs, right after each other on one core; the first two pairs warm up code and arrays and
are dropped. Printed is the median ratio of the pairs with the lowest and the highest. No test asserts any of it.
"""

from __future__ import annotations

import argparse
import resource
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from pathlib import Path

import one_core  # noqa: F401

# isort: split
import numpy as np
import straightforward

from yieldsim import api
from yieldsim.study import annual, compare, hourly, light, piece, run, sweep
from yieldsim.study.plan import SitePlan, StudyPlan
from yieldsim.weather import Weather

SAMPLES = Path(__file__).parents[2] / "weather_samples"
SITES = ("amber_mesa", "mangrove_reach", "saltmarsh_point", "birchholm", "highmoor")
WARM_UP = 2
STUDY = """
study: benchmark
mounting: {{kind: fixed, tilt_deg: 30, azimuth_deg: 180}}
sites:
{sites}
absorbers:
  - {{name: a, like: c-si}}
  - {{name: b, like: c-si-heterojunction}}
  - {{name: c, like: cdte}}
  - {{name: d, like: cigs}}
  - {{name: e, like: gaas}}
  - {{name: f, like: a-si}}
  - {{name: g, like: perovskite-1.55}}
  - {{name: h, like: perovskite-1.68}}
  - {{name: i, gap_ev: 1.12, quality: ideal}}
  - {{name: j, gap_ev: 1.34, quality: ideal}}
  - {{name: two terminals, like: perovskite-si-2t}}
  - {{name: four terminals, like: perovskite-si-4t}}
reference: a
losses: {{soiling: 0.02, wiring: 0.015}}
gap_sweep: {{from_ev: 0.9, to_ev: 2.0, step_ev: 0.02}}
"""


@dataclass(frozen=True, slots=True)
class Case:
    """A site, its screened weather and the study it is part of."""

    plan: StudyPlan
    site: SitePlan
    weather: Weather


def study(names: Sequence[str], folder: Path) -> StudyPlan:
    """Return a study of sites by the names of their samples."""
    lines = [f"  - {{name: {i} {name}, weather: {SAMPLES / name}.csv}}" for i, name in enumerate(names)]
    path = folder / "benchmark.yaml"
    path.write_text(STUDY.format(sites="\n".join(lines)))
    return api.load_study(path)


def case_of(name: str, folder: Path) -> Case:
    plan = study([name], folder)
    return Case(plan, plan.sites[0], next(iter(api.load_weather(plan.sites[0]))))


# --------------------------------------------------------------------------------------------------- what is timed


def full_chain(case: Case, n_absorber: int = 12, n_gap: int = 0, ledger: bool = False) -> None:
    """All-sky spectra to the plane, currents, temperatures, power points, the account of the year."""
    absorbers = (case.plan.absorbers * (1 + n_absorber // 12))[:n_absorber]
    mounting = case.site.mountings[0]
    sky = hourly.site_sky(case.site, case.weather)
    parts = light.plane_parts(sky, mounting)
    year = hourly.plane_year(sky, mounting, parts, absorbers)
    total = annual.sums(year, sky.month, piece.monthly_hours(sky.weather), case.weather.interval_s, case.plan.losses)
    compare.annual_rows(case.site.name, mounting.name, absorbers, annual.Ratings.of(absorbers), total)
    if ledger:
        hourly.light_paid(year, absorbers, sky.month)
    if n_gap:
        swept = case.plan.gap_sweep
        assert swept is not None
        one = next(iter(swept.absorbers.items()))  # one quality: so many gaps and no more
        swept = replace(swept, gaps_ev=swept.gaps_ev[:n_gap], absorbers={one[0]: one[1][:n_gap]})
        sweep.sweep_rows(case.site.name, sky, mounting, parts, swept, case.plan.losses)


def seconds(work: Callable[[], object]) -> float:
    """Return the time a core spends on work [s]: what other programs take from the machine does not count."""
    start = time.process_time()
    work()
    return time.process_time() - start


def paired(ours: Callable[[], object], theirs: Callable[[], object], pairs: int) -> tuple[np.ndarray, np.ndarray]:
    """Return times [s] of both sides of each pair."""
    both = np.array([[seconds(ours), seconds(theirs)] for _ in range(pairs + WARM_UP)])[WARM_UP:]
    return both[:, 0], both[:, 1]


def told(what: str, ours: np.ndarray, theirs: np.ndarray) -> None:
    ratio = ours / theirs
    spread = f"{np.median(ratio):.3f} ({ratio.min():.3f} to {ratio.max():.3f}, {len(ratio)} pairs)"
    print(f"{what:<66} {spread}   {1e3 * np.median(ours):.1f} / {1e3 * np.median(theirs):.1f} ms", flush=True)


def exponent(sizes: Sequence[float], times: Sequence[float]) -> float:
    """Return the growth exponent: slope of the logarithm of time over that of size."""
    return float(np.polyfit(np.log(sizes), np.log(times), 1)[0])


def grown(what: str, sizes: Sequence[int], work: Callable[[int], Callable[[], object]], pairs: int) -> None:
    times = []
    for size in sizes:
        once = work(size)
        times.append(np.median([seconds(once) for _ in range(pairs + WARM_UP)][WARM_UP:]))
    shown = ", ".join(f"{size}: {1e3 * t:.0f} ms" for size, t in zip(sizes, times, strict=True))
    last = exponent(sizes[-2:], times[-2:])
    print(f"    {what}: exponent {exponent(sizes, times):.2f}, of the last step {last:.2f}   ({shown})", flush=True)


# ------------------------------------------------------------------------------------------------------- the parts


def part_a(folder: Path, pairs: int, _site: str) -> None:
    """The full chain over `spectrl2` alone on the same lit hours."""
    for name in SITES:
        case = case_of(name, folder)
        inputs = straightforward.inputs_of(hourly.site_sky(case.site, case.weather))
        told(
            f"(a) full chain / spectrl2, {name}",
            *paired(lambda case=case: full_chain(case), lambda inputs=inputs: straightforward.spectra(inputs), pairs),
        )


def part_b(folder: Path, pairs: int, site: str) -> None:
    """56 gaps on top, and the ledger of the light."""
    case = case_of(site, folder)
    for what, ours in (
        ("(b) full chain with 56 gaps / without", lambda: full_chain(case, n_gap=56)),
        ("    full chain with the ledger / without", lambda: full_chain(case, ledger=True)),
    ):
        told(f"{what}, {site}", *paired(ours, lambda: full_chain(case), pairs))


def part_draws(folder: Path, pairs: int, site: str) -> None:
    """A study of one site with 400 draws over the same without; both write their files."""
    case = case_of(site, folder)
    path = folder / "benchmark.yaml"
    path.write_text(path.read_text() + "chance: {draws: 400, seed: 7}\n")
    drawn = api.load_study(path)

    def whole(plan: StudyPlan) -> Callable[[], object]:
        return lambda: run.site_pieces(plan, lambda _site: [case.weather], folder / "pieces", fresh=True)

    told(f"(b) a site with 400 draws / without, {site}", *paired(whole(drawn), whole(case.plan), min(pairs, 5)))


def part_c(folder: Path, pairs: int, site: str) -> None:
    """The straightforward version for the same result."""
    case = case_of(site, folder)
    sky = hourly.site_sky(case.site, case.weather)
    inputs = straightforward.inputs_of(sky)
    work = straightforward.prepared(sky, case.site.mountings[0], case.plan.absorbers)
    told(
        f"(c) full chain / spectrl2, trapezoid, singlediode, {site}",
        *paired(lambda: full_chain(case), lambda: straightforward.year(inputs, work), pairs),
    )


def part_d(folder: Path, pairs: int, site: str) -> None:
    """Growth with hours, absorbers and sites: 1 is linear."""
    case = case_of(site, folder)

    def hours(n: int) -> Callable[[], object]:
        return lambda: full_chain(replace(case, weather=repeated(case.weather, n)))

    def years(n: int) -> Callable[[], object]:
        return lambda: [full_chain(case) for _ in range(n)]  # as a study does: one year is held at a time

    def sites(n: int) -> Callable[[], object]:
        plan = study([site] * n, folder)
        return lambda: run.site_pieces(plan, lambda _site: [case.weather], folder / "pieces", fresh=True)

    print(f"(d) growth, {site}")
    grown("hours in one piece", (2190, 4380, 8760, 17520), hours, min(pairs, 5))
    grown("years", (1, 2, 4, 8), years, min(pairs, 3))
    grown("absorbers", (12, 24, 48, 96), lambda n: lambda: full_chain(case, n), min(pairs, 3))
    grown("sites, files written", (1, 2, 4, 8), sites, min(pairs, 3))


def repeated(weather: Weather, n: int) -> Weather:
    """Return n intervals: the first of a year, or years one after the other."""
    times = -(-n // len(weather))
    columns = {name: np.tile(values, times)[:n] for name, values in weather.columns.items()}
    step = weather.interval_s
    time_ = weather.time[0] + step * np.arange(n, dtype=weather.time.dtype)
    return replace(
        weather, time=time_, columns=columns, **{k: np.tile(getattr(weather, k), times)[:n] for k in ("flags", "row")}
    )


def part_e(folder: Path, _pairs: int, site: str) -> None:
    """Peak memory of a process that computes one site-year, imports and all."""
    case = case_of(site, folder)
    full_chain(case, n_gap=56, ledger=True)
    print(f"(e) peak memory of one site-year with 56 gaps and the ledger: {peak_mb():.0f} MB", flush=True)


def peak_mb() -> float:
    """Return the most memory of this process [MB]; the resource module would count what its parent held at the fork."""
    try:
        status = Path("/proc/self/status").read_text()
    except OSError:
        return resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 2**10
    return float(status.split("VmHWM:")[1].split()[0]) / 2**10


def part_f(_folder: Path, pairs: int, _site: str) -> None:
    """Start-up of the command over that of the bare interpreter."""

    def started(*arguments: str) -> Callable[[], object]:
        return lambda: subprocess.run([sys.executable, *arguments], check=True, stdout=subprocess.DEVNULL)

    ours, theirs = started("-m", "yieldsim", "--help"), started("-c", "import sys")
    both = np.array([[elapsed(ours), elapsed(theirs)] for _ in range(pairs + WARM_UP)])[WARM_UP:]
    told("(f) start-up, yieldsim --help / import sys", both[:, 0], both[:, 1])


def elapsed(work: Callable[[], object]) -> float:
    start = time.perf_counter()
    work()
    return time.perf_counter() - start


PARTS = {"a": part_a, "b": part_b, "draws": part_draws, "c": part_c, "d": part_d, "e": part_e, "f": part_f}


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0] if __doc__ else "")
    parser.add_argument("--pairs", type=int, default=7, help="pairs that count, besides the two that warm up")
    parser.add_argument("--site", default="saltmarsh_point", choices=SITES, help="sample of parts b to e")
    parser.add_argument("--only", nargs="+", choices=PARTS, default=list(PARTS), help="parts to run")
    asked = parser.parse_args()
    with tempfile.TemporaryDirectory() as folder:
        for part in asked.only:
            if part == "e" and len(asked.only) > 1:  # a process of its own, or the other parts would count
                subprocess.run([sys.executable, __file__, "--only", "e", "--site", asked.site], check=True)
            else:
                PARTS[part](Path(folder), asked.pairs, asked.site)


if __name__ == "__main__":
    main()
