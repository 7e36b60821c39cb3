"""``yieldsim verify``: hold this installation against published references."""

from __future__ import annotations

import argparse
import json
import textwrap
from typing import TYPE_CHECKING

from yieldsim.commands._terminal import bold

if TYPE_CHECKING:
    from yieldsim.checks import Outcome

EXAMPLE = """example:
  yieldsim verify
        prints, for each check, what it is held against, the value found, how
        far it lies off and how far it may; exit code 2 if one lies beyond
"""
BEYOND = 2


def arguments(parser: argparse.ArgumentParser) -> None:
    """Declare the options of the command."""
    parser.add_argument("--json", action="store_true", help="print the outcomes as JSON")


def run(options: argparse.Namespace) -> int:
    """Do every check and print it; return 2 when one lies beyond its limit."""
    from yieldsim import api

    done: list[Outcome] = []
    for outcome in api.verify():
        if not options.json:
            if not done or done[-1].group != outcome.group:
                print(("\n" if done else "") + bold(outcome.group))
            print(lines(outcome))
        done.append(outcome)
    beyond = [outcome for outcome in done if not outcome.passed]
    if options.json:
        fields = ("group", "name", "source", "value", "unit", "deviation", "deviation_unit", "limit", "passed")
        print(json.dumps([{field: getattr(outcome, field) for field in fields} for outcome in done], indent=1))
    else:
        held = sum(outcome.limit is not None for outcome in done)
        print(f"\n{len(done)} checks, {held} with a limit, {len(beyond)} beyond it")
    return BEYOND if beyond else 0


def lines(outcome: Outcome) -> str:
    """Return one check as text: what, against what, value, deviation and limit."""
    limit = "reported only" if outcome.limit is None else f"limit {outcome.limit:.3g} {outcome.deviation_unit}"
    mark = "  " if outcome.passed else "! "
    value = (
        f"value {outcome.value:.5g} {outcome.unit}, deviation {outcome.deviation:.3g} {outcome.deviation_unit}, {limit}"
    )
    return "\n".join(
        [
            *textwrap.wrap(outcome.name, 110, initial_indent=mark, subsequent_indent="    "),
            *textwrap.wrap(outcome.source, 110, initial_indent="      against ", subsequent_indent="      "),
            f"      {value}",
        ]
    )
