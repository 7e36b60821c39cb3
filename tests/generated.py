"""Thousands of generated studies in one process: each is done (0) or refused (1), and what is computed can be.

    python tests/generated.py check 10000
    python tests/generated.py run 500

Half of those for `check` are valid, with weather of three days, and three quarters of those for `run`, with a day of
each month; the others have anything wrong anywhere. A fault is kept as a folder with the study, its files and what was
said. Not part of the test run, which takes a small sample: `test_generated.py`.
"""

import argparse
import contextlib
import csv
import io
import math
import re
import shutil
import sys
import tempfile
import time
import warnings
from collections import Counter
from pathlib import Path
from unittest import mock

from hypothesis import HealthCheck, Phase, given, seed, settings
from hypothesis import strategies as st

sys.path.insert(0, str(Path(__file__).parents[1]))

from tests import studies
from yieldsim import cli
from yieldsim.report import tables, weather

DAYS = {"check": 3, "run": 12}
LARGEST = 0.999_999  # of the light, to which all fates of it add up
PICTURES = 100  # one study of so many has its weather drawn by `check`
_OF_ONE_CURVE = ("jsc_a_m2", "voc_v", "ff")  # which a stack of four terminals does not have
_RATIOS = {"monthly.csv"}  # the one table whose cells may be empty


def kits(command):
    """Return the studies a command is given."""
    valid, wrong = studies.studies(days=DAYS[command]), studies.broken()
    broken_of_four = 2 if command == "check" else 1
    return st.integers(1, 4).flatmap(lambda turn: wrong if turn <= broken_of_four else valid)


def faults(command, kit, folder, pictures=True):
    """Return (exit code, what was said, what should not be) of a command on a study written into an empty folder.

    ``pictures`` left out are those of the weather, which take nine tenths of a check's time.
    """
    path = kit.write(folder)
    words = [command, str(path), "--out", str(folder / "out")]
    said = io.StringIO()
    with warnings.catch_warnings(record=True) as warned, contextlib.ExitStack() as stack:
        warnings.simplefilter("always")
        if not pictures:
            drawn = mock.Mock(return_value=[Path("left out")])
            stack.enter_context(mock.patch.object(weather, "write_weather_picture", drawn))
        stack.enter_context(contextlib.redirect_stdout(said))
        stack.enter_context(contextlib.redirect_stderr(said))
        code = cli.main(words)
    found = [f"warned: {each.category.__name__}: {each.message}" for each in warned]
    if code not in (0, 1):
        found.append(f"exit code {code}")
    if code == 1 and "error: " not in said.getvalue():
        found.append("refused without a reason")
    if any(ord(sign) < 32 and sign != "\n" for sign in said.getvalue().replace("\r\x1b[K", "")):
        found.append("a control character on the terminal")
    if code == 0 and command == "run":
        found += impossible(folder / "out")
    return code, said.getvalue(), found


def impossible(folder):
    """Return what no study can give: cells that are no numbers, energy below zero or beyond the light."""
    found = []
    for path in sorted(folder.glob("*.csv")):
        table = tables.read_table(path)
        for name in table.columns:
            if tables.is_text(str(name), table) or path.name in _RATIOS:
                continue
            curve = path.name == "standard.csv" and name in _OF_ONE_CURVE
            if not all(
                math.isfinite(value) for value in table[name][table["terminals"] != 4 if curve else slice(None)]
            ):
                found.append(f"{path.name}: {name} holds what is no number")
            if "energy" in str(name) and (table[name] < 0).any():
                found.append(f"{path.name}: {name} below zero")
    with (folder / "ledger.csv").open(encoding="utf-8", newline="") as stream:
        ledger = list(csv.DictReader(stream))
    annual = tables.read_table(folder / "annual.csv").to_dict("records")
    for row, year in zip(ledger, annual, strict=True):
        fates = {name: float(value) for name, value in row.items() if name not in ("site", "mounting", "absorber")}
        light = math.fsum(fates.values())
        if not 0 <= fates["delivered"] <= LARGEST * light or year["energy_kwh_m2"] > LARGEST * light:
            found.append(f"{fates['delivered']} delivered, {year['energy_kwh_m2']} counted, of {light} kWh/m2 of light")
        if not 0 < year["stc_efficiency"] < 1 or not 0 <= year["poa_kwh_m2"] <= 1.5 * year["hours"]:
            found.append(f"efficiency {year['stc_efficiency']}, {year['poa_kwh_m2']} kWh/m2 in {year['hours']} h")
    return found


def main():
    """Run a command on as many studies as asked for and report."""
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("command", choices=DAYS)
    parser.add_argument("count", type=int)
    parser.add_argument("--seed", type=int, default=1)
    parser.add_argument("--keep", type=Path, default=Path(tempfile.gettempdir()) / "yieldsim-faults")
    options = parser.parse_args()
    codes, kinds, wrong, slowest = Counter(), Counter(), Counter(), (0.0, "")

    @seed(options.seed)
    @settings(
        max_examples=options.count, phases=[Phase.generate], database=None, deadline=None,
        suppress_health_check=list(HealthCheck),
    )  # fmt: skip
    @given(kits(options.command))
    def one(kit):
        nonlocal slowest
        with tempfile.TemporaryDirectory() as name:
            folder, start = Path(name), time.perf_counter()
            try:
                code, said, found = faults(options.command, kit, folder, sum(codes.values()) % PICTURES == 0)
            except Exception as error:
                code, said, found = -1, repr(error), [f"{type(error).__name__}: {error}"[:300]]
            took = time.perf_counter() - start
            codes[code] += 1
            for line in said.splitlines():
                if line.startswith("error: "):
                    kinds[_kind(line)] += 1
            number = sum(codes.values())
            if found:
                wrong.update(each[:120] for each in found)
                print(f"study {number}: {found[:3]}", flush=True)
                kept = options.keep / f"{options.command}-{options.seed}-{number}"
                shutil.rmtree(kept, ignore_errors=True)
                kept.parent.mkdir(parents=True, exist_ok=True)
                shutil.copytree(folder, kept)
                (kept / "said.txt").write_text(f"{found}\n{said}", encoding="utf-8", errors="replace")
            slowest = max(slowest, (took, str(number)))
            if number % 200 == 0:
                print(f"{number}: codes {dict(codes)}, slowest {slowest[0]:.1f} s", file=sys.stderr, flush=True)

    one()
    print(f"{sum(codes.values())} studies through {options.command}, exit codes {dict(codes)}")
    for kind, count in kinds.most_common(60):
        print(f"{count:7} {kind}")
    print(f"faults: {dict(wrong) or 'none'}")
    return bool(wrong)


def _kind(line):
    """Return a refusal without what is its own: names and numbers."""
    before, _, found = line.partition(": found ")
    where = re.sub(r"\[[^]]*\]", "", before.rpartition(": ")[2] if ": " in before else "").split(".")[0]
    text = re.sub(r"`[^`]*`|'[^']*'|\"[^\"]*\"|[\d.+-]+", "_", found.split("; allowed")[0] or line)
    return f"{where}: {text}"[:90]


if __name__ == "__main__":
    sys.exit(main())
