"""The command line: arguments in, exit code out, and the one place where errors become messages.

Exit codes: 0 done; 1 the user's input or command line is wrong; 2 it could not be done on this machine; 3 a bug;
130 interrupted.
"""

from __future__ import annotations

import contextlib
import os
import sys
from collections.abc import Sequence

from yieldsim import __version__
from yieldsim.commands import COMMANDS
from yieldsim.commands._parser import module_of, parsers
from yieldsim.errors import InputError, Problem, YieldsimError

DONE, WRONG_INPUT, NOT_HERE, BUG, INTERRUPTED = 0, 1, 2, 3, 130
_SHOWN_PROBLEMS = 200  # a file with more wants another look as a whole


def main(arguments: Sequence[str] | None = None) -> int:
    """Run the command line and return its exit code.

    Parameters
    ----------
    arguments : list of str; those of the process if left out
    """
    words = list(sys.argv[1:] if arguments is None else arguments)
    try:
        return _run(words)
    except KeyboardInterrupt:
        _say("interrupted; what was finished is kept")
        return INTERRUPTED
    except InputError as error:
        for problem in error.problems[:_SHOWN_PROBLEMS]:
            _say(f"error: {problem}")
        if len(error.problems) > _SHOWN_PROBLEMS:
            _say(f"error: and {len(error.problems) - _SHOWN_PROBLEMS} problems more, not shown")
        return error.exit_code
    except YieldsimError as error:
        _say(f"error: {error}")
        return error.exit_code
    except BrokenPipeError:
        # The reader of our output went away: nothing to say, and nothing more may be written at shutdown.
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return NOT_HERE
    except (OSError, MemoryError) as error:
        _say(f"error: it could not be done here: {_reason(error)}")
        return NOT_HERE
    except Exception:
        _say(f"error: this is a bug in yieldsim, not in your input. {_log_bug(words)}")
        return BUG


def _run(words: list[str]) -> int:
    chosen = next((word for word in words if not word.startswith("-")), None)
    if chosen is not None and chosen not in COMMANDS:
        raise InputError(Problem("", 0, "command line", f"`{chosen}`", f"{', '.join(COMMANDS)}{_nearest(chosen)}"))
    parser, _ = parsers([] if chosen is None else [chosen])
    options = parser.parse_args(words)
    if options.command is None:
        parser.print_help(sys.stderr)
        return WRONG_INPUT
    code: int = module_of(options.command).run(options)
    sys.stdout.flush()
    return code


def _nearest(word: str) -> str:
    import difflib

    close = difflib.get_close_matches(word, COMMANDS, n=1)
    return f" (did you mean `{close[0]}`?)" if close else ""


def _reason(error: BaseException) -> str:
    if isinstance(error, MemoryError):
        return "not enough memory"
    return str(error) or type(error).__name__


def _log_bug(words: list[str]) -> str:
    """Write what helps to find a bug to a file and return where it is; the traceback itself if that fails."""
    import platform
    import tempfile
    import traceback
    from importlib import metadata

    trace = traceback.format_exc()
    names = sorted({"numpy", "scipy", "pandas", "xarray", "pvlib", "h5py", "h5netcdf", "pydantic", "ruamel.yaml"})
    versions = []
    for name in names:
        with contextlib.suppress(metadata.PackageNotFoundError):
            versions.append(f"{name} {metadata.version(name)}")
    text = "\n".join(
        [
            f"yieldsim {__version__}, Python {platform.python_version()}, {platform.platform()}",
            ", ".join(versions),
            f"arguments: {words!r}",
            "",
            trace,
        ]
    )
    try:
        handle, path = tempfile.mkstemp(prefix="yieldsim-bug-", suffix=".log", text=True)
        with os.fdopen(handle, "w", encoding="utf-8", errors="backslashreplace") as stream:
            stream.write(text)
    except OSError:
        return f"No log could be written; here it is:\n{text}"
    return f"Please report it with this file: {path}"


def _say(message: str) -> None:
    """Write a message to stderr; a stderr that is gone is no reason to fail."""
    with contextlib.suppress(OSError):
        print(message, file=sys.stderr, flush=True)
