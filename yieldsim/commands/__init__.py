"""One file per verb of the command line.

Each module offers ``EXAMPLE`` (a worked example, shown in its help), ``arguments(parser)`` and ``run(options) -> int``.
It is imported when its command is chosen, and imports what computes only inside ``run``: help must answer at once.
"""

from __future__ import annotations

from collections.abc import Mapping
from types import MappingProxyType

#: Command -> what it does, in the order shown. A command not listed here does not exist.
COMMANDS: Mapping[str, str] = MappingProxyType(
    {
        "run": "compute a study and write its tables, pictures and report",
        "check": "validate a study and its weather; compute no yield",
        "new": "write a commented study file to start from",
        "spectra": "write the band spectra of every lit hour of one site",
        "page": "make the plots and the report of a finished study anew from its files",
        "verify": "hold this installation against published references",
        "schema": "print the JSON Schema of the study file, for editors",
        "completion": "print what a shell needs to complete commands, options and study files",
    }
)
