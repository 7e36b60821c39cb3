"""``yieldsim run``: compute a study and write its tables, pictures and report."""

from __future__ import annotations

import argparse
import os
import platform
import re
import sys
from collections.abc import Mapping, Sequence
from contextlib import nullcontext
from pathlib import Path
from typing import TYPE_CHECKING, Any, cast

from yieldsim import __version__
from yieldsim.commands._terminal import Progress, bold, cut, table, wrapped
from yieldsim.errors import InputError, Problem, plain

if TYPE_CHECKING:
    from yieldsim.study.hands import Hands
    from yieldsim.study.plan import StudyPlan

EXAMPLE = """example:
  yieldsim run mine.yaml --out results --workers 2
        computes mine.yaml with two processes into the folder results;
        after a stop, the same line picks up where it left off
"""

Row = Mapping[str, Any]
MOST_SITES = 20  # in the summary of a terminal; the tables hold all


def arguments(parser: argparse.ArgumentParser) -> None:
    """Declare the options of the command."""
    parser.add_argument("study", metavar="STUDY.yaml", type=Path, nargs="?", help="the study file")
    parser.add_argument(
        "--from",
        dest="record",
        metavar="run.json",
        type=Path,
        help="compute a finished run anew instead, and say what differs",
    )
    parser.add_argument("--out", metavar="DIR", type=Path, help="folder of the results (default: outputs/STUDY)")
    parser.add_argument(
        "--workers",
        metavar="N",
        type=workers,
        default=cores(),
        help="processes that share the work (default here: %(default)s)",
    )
    parser.add_argument(
        "--cluster", metavar="tcp://HOST:PORT", type=cluster, help="Dask scheduler whose workers share the sites"
    )
    parser.add_argument("--fresh", action="store_true", help="compute again what an earlier run finished")
    parser.add_argument("--quiet", action="store_true", help="no progress and no summary")


def cores() -> int:
    """Return how many processes share the work unless told: the cores at hand, but 4 at most."""
    allowed = len(os.sched_getaffinity(0)) if hasattr(os, "sched_getaffinity") else os.cpu_count() or 1
    return min(allowed, 4)


def workers(text: str) -> int:
    """Return a number of processes from the command line."""
    if not text.isascii() or not text.isdigit() or not 1 <= int(text) <= 1024:
        raise argparse.ArgumentTypeError(f"found {text!r}; allowed: a whole number from 1 to 1024")
    return int(text)


def cluster(text: str) -> str:
    """Return the address of a scheduler from the command line."""
    if not re.fullmatch(r"(tcp|tls)://[\w.\-\[\]:]+:\d{1,5}", text):
        raise argparse.ArgumentTypeError(f"found {text!r}; allowed: tcp://HOST:PORT or tls://HOST:PORT")
    return text


def run(options: argparse.Namespace) -> int:
    """Compute the study, show progress, print the summary."""
    if (options.study is None) == (options.record is None):
        found = "neither a study nor --from" if options.study is None else "a study and --from"
        raise InputError(Problem("", 0, "command line", found, "either STUDY.yaml or --from run.json"))
    from yieldsim.study.hands import Hands

    alone = options.workers == 1 or options.cluster is not None
    with nullcontext() if alone else Hands(options.workers) as hands:  # at work while the rest is imported
        return _run(options, hands)


def _run(options: argparse.Namespace, hands: Hands | None) -> int:
    from yieldsim import api
    from yieldsim.study.store import file_stem

    before: Row | None = None
    if options.record is None:
        plan = api.load_study(options.study)
    else:
        plan, before = _repeated(options.record)
    out = options.out if options.out is not None else Path("outputs", file_stem(plan.name))
    progress = Progress(options.quiet)
    try:
        result = api.run_study(
            plan,
            out,
            workers=hands or 1,
            cluster=options.cluster,
            fresh=options.fresh or before is not None,
            progress=progress,
        )
    finally:
        progress.close()
    if before is not None:
        _compared(dict(before.get("tables") or {}), dict(result.run["tables"]), options.quiet)
    if not options.quiet:
        from yieldsim.report.answer import answer

        few = result.annual[result.annual["site"].isin(result.annual["site"].unique()[:MOST_SITES])]
        rows = cast("list[Row]", few.to_dict("records"))
        said = answer(result)
        print(f"{wrapped(said.winner)}\n{wrapped(said.ranking)}\n\n{summary(rows, plan.reference, out)}")
        if len(plan.sites) > MOST_SITES:
            print(f"Shown above: the first {MOST_SITES} of {len(plan.sites)} sites; the tables hold all.")
    return 0


def _compared(then: Row, now: Row, quiet: bool) -> None:
    """Tell which tables are not those of the record."""
    if not then:
        print("differs: the record holds no hashes of tables to compare with", file=sys.stderr)
    for name in [*then, *(name for name in now if then and name not in then)]:
        if then.get(name) != now.get(name):
            what = "is not made any more" if name not in now else "is new" if name not in then else "has other content"
            print(f"differs: {plain(name)} {what}", file=sys.stderr)
    if then and then == now and not quiet:
        print(f"Repeated: all {len(now)} tables are those of the record, byte for byte.\n")


def _repeated(record: Path) -> tuple[StudyPlan, Row]:
    """Return the plan of a finished run and its record; tell on stderr what is not as it was then."""
    from yieldsim import config

    plan, before = config.load_run(record)
    for line in differences(plan, before):
        print(f"differs: {line}", file=sys.stderr)
    return plan, before


def differences(plan: StudyPlan, before: Row) -> list[str]:
    """Return what is not as it was when a run was recorded: versions, weather files, the study itself.

    Parameters
    ----------
    plan : StudyPlan, as the record reads today
    before : the record, as ``run.json`` holds it
    """
    from importlib import metadata

    found = []
    now = {"yieldsim": __version__, "python": platform.python_version(), "platform": platform.platform()}
    was = {name: before.get(name) for name in now}
    for name, version in dict(before.get("versions") or {}).items():
        was[name] = version
        try:
            now[name] = metadata.version(name)
        except metadata.PackageNotFoundError:
            now[name] = "not installed"
    found += [f"{name} {now[name]}, then {plain(str(was[name]))}" for name in now if now[name] != was[name]]
    inputs = dict(before.get("inputs") or {})
    now_read = {file.shown: file.sha256 for site in plan.sites for file in site.weather} | dict(plan.inputs)
    found += [f"content of {plain(shown)}" for shown, digest in now_read.items() if inputs.get(shown) != digest]
    if dict(plan.resolved) != before.get("config"):
        found.append("the study as it resolves, for instance by another library of absorbers")
    return found


def summary(rows: Sequence[Row], reference: str, out: Path) -> str:
    """Return what a run found, in words and tables.

    Parameters
    ----------
    rows : rows of annual.csv
    reference : name of the absorber the others are set against
    out : folder of the results
    """
    planes: dict[tuple[str, str], list[Row]] = {}
    for row in rows:
        planes.setdefault((row["site"], row["mounting"]), []).append(row)
    several = len({mounting for _, mounting in planes}) > 1
    parts = [
        _plane(f"{plain(site)}, {plain(mounting)}" if several else plain(site), each, reference)
        for (site, mounting), each in planes.items()
    ]
    files = f"Report {out / 'report.html'}, tables {out / 'annual.csv'} and others in {out}{_slash(out)}"
    return "\n\n".join([*parts, files])


def _slash(folder: Path) -> str:
    return "" if str(folder).endswith("/") else "/"


def _plane(title: str, rows: Sequence[Row], reference: str) -> str:
    ranked = sorted(rows, key=lambda row: int(row["rank_by_yield"]))
    base = next((row for row in rows if row["absorber"] == reference), None)
    lines = [
        [
            f"{int(row['rank_by_yield'])}. {cut(row['absorber'], 40)}",
            f"{row['specific_yield_kwh_kwp']:.0f}",
            _against(row, base),
            f"{row['energy_kwh_m2']:.1f}",
            _place(row, rows),
        ]
        for row in ranked
    ]
    light = f"{float(rows[0]['poa_kwh_m2']):.0f} kWh/m2 on the plane in {float(rows[0]['hours']):.0f} h"
    head = ["by yield", "kWh/kWp", f"vs {cut(reference, 16)}", "kWh/m2", "rank (datasheet)"]
    return "\n".join([f"{bold(title)}: {light}", table(head, lines), wrapped(departure(rows), "  ")])


def _against(row: Row, base: Row | None) -> str:
    if base is None or row is base:
        return ""
    return f"{100 * (row['specific_yield_kwh_kwp'] / base['specific_yield_kwh_kwp'] - 1):+z.1f} %"


def _place(row: Row, rows: Sequence[Row]) -> str:
    """Return the rank by energy per area, with that of the datasheet where it differs."""
    energy, sheet = int(row["rank_by_energy"]), int(row["rank_at_stc"])
    return f"{energy} ({sheet})" if _moved(row, rows) else f"{energy}    "


def _moved(row: Row, rows: Sequence[Row]) -> bool:
    """Return whether a rank by energy departs from the datasheet's; within a tie of the latter any order is its own."""
    tied = sum(int(other["rank_at_stc"]) == int(row["rank_at_stc"]) for other in rows)
    return not int(row["rank_at_stc"]) <= int(row["rank_by_energy"]) < int(row["rank_at_stc"]) + tied


def departure(rows: Sequence[Row]) -> str:
    """Return in a sentence how far the ranking by energy per area departs from that by datasheet efficiency."""
    moved = [row for row in rows if _moved(row, rows)]
    yields = [float(row["specific_yield_kwh_kwp"]) for row in rows]
    spread = f"per kWp they lie {100 * (max(yields) / min(yields) - 1):.1f} % apart" if min(yields) > 0 else ""
    if not moved:
        text = "Per area the order is that of the datasheet efficiencies"
    else:
        moved.sort(key=lambda row: int(row["rank_by_energy"]))
        names = ", ".join(
            f"{plain(row['absorber'])} {_ordinal(row['rank_by_energy'])} instead of {_ordinal(row['rank_at_stc'])}"
            for row in moved
        )
        text = f"Per area the order departs from that of the datasheet efficiencies: {names}"
    return "; ".join(part for part in (text, spread) if part) + "."


def _ordinal(number: Any) -> str:
    n = int(number)
    ending = "th" if n % 100 in (11, 12, 13) else {1: "st", 2: "nd", 3: "rd"}.get(n % 10, "th")
    return f"{n}{ending}"
