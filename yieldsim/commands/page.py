"""``yieldsim page DIR``: plots and page of a finished study made anew from its files."""

from __future__ import annotations

import argparse
from pathlib import Path
from typing import Any

EXAMPLE = """example:
  yieldsim page outputs/mine
        draws the plots and writes report.html again, for instance after an update of yieldsim
"""


def arguments(parser: argparse.ArgumentParser) -> None:
    """Declare the options of the command."""
    parser.add_argument("folder", metavar="DIR", type=Path, help="folder of a finished study")


def run(arguments: Any) -> int:
    """Make plots and page anew and say where they are.

    Parameters
    ----------
    arguments : with ``folder``, the folder of a finished study

    Returns
    -------
    int, exit code 0

    Raises
    ------
    InputError
        With every file that is missing or is not what a study writes.
    PlaceError
        Where the folder cannot be written.
    """
    from yieldsim import report

    for path in report.rebuild(arguments.folder):
        print(path)
    return 0
