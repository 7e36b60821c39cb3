"""The argument parsers of all commands, each filled in only when it is needed."""

from __future__ import annotations

import argparse
import importlib
from collections.abc import Iterable
from types import ModuleType
from typing import NoReturn

from yieldsim import __version__
from yieldsim.commands import COMMANDS
from yieldsim.errors import InputError, Problem

_ABOUT = "Which light absorber wins at which site, by how much, how surely: energy yield from hourly band spectra."
_EXAMPLE = """example:
  yieldsim new mine.yaml      write a study to start from
  yieldsim run mine.yaml      compute it; results appear in outputs/

`yieldsim COMMAND --help` tells more about one command.
"""


class Parser(argparse.ArgumentParser):
    """An argument parser that raises InputError, so that a wrong command line ends like any wrong input."""

    def error(self, message: str) -> NoReturn:
        """Raise what is wrong, with the usage."""
        raise InputError(Problem("", 0, "", f"{message}\n{self.format_usage().rstrip()}", ""))


def module_of(command: str) -> ModuleType:
    """Return the module of a command."""
    return importlib.import_module(f"yieldsim.commands.{command.replace('-', '_')}")


def parsers(filled: Iterable[str]) -> tuple[Parser, dict[str, argparse.ArgumentParser]]:
    """Return the parser of the program and those of its commands.

    Parameters
    ----------
    filled : the commands whose options are wanted: their modules are imported
    """
    layout = argparse.RawDescriptionHelpFormatter
    parser = Parser(prog="yieldsim", description=_ABOUT, epilog=_EXAMPLE, formatter_class=layout, allow_abbrev=False)
    parser.add_argument("--version", action="version", version=f"yieldsim {__version__}")
    group = parser.add_subparsers(dest="command", metavar="COMMAND", title="commands", parser_class=Parser)
    commands: dict[str, argparse.ArgumentParser] = {}
    for name, summary in COMMANDS.items():
        about = f"{summary[0].upper()}{summary[1:]}."
        commands[name] = group.add_parser(
            name, help=summary, description=about, formatter_class=layout, allow_abbrev=False
        )
    for name in filled:
        module = module_of(name)
        commands[name].epilog = module.EXAMPLE
        module.arguments(commands[name])
    return parser, commands
