"""Files a study names: where they are, and what they hold as a fingerprint."""

from __future__ import annotations

import hashlib
from dataclasses import dataclass
from importlib.util import find_spec
from pathlib import Path
from typing import Any

from pydantic import GetCoreSchemaHandler, ValidationInfo
from pydantic_core import CoreSchema, core_schema

from yieldsim.config.fields import Text, nearest, refusal, show
from yieldsim.errors import InputError, Problem

PVLIB = "pvlib:"
PVLIB_WEATHER = (".csv", ".tm2")
CHUNK_BYTES = 1 << 20


def pvlib_data() -> Path:
    """Return the folder of the data files that pvlib ships, without importing pvlib."""
    found = find_spec("pvlib")
    where = found.submodule_search_locations if found is not None else None
    if not where:
        raise ModuleNotFoundError("pvlib is not installed")
    return Path(where[0]) / "data"


def locate(shown: str, folder: Path) -> Path:
    """Return the path of a file as a study names it.

    Parameters
    ----------
    shown : str, a path relative to the study file, an absolute one, or ``pvlib:NAME``
    folder : Path of the folder that holds the study file
    """
    if shown.startswith(PVLIB):
        return pvlib_data() / shown.removeprefix(PVLIB)
    return folder / shown


def sha256(path: Path) -> str:
    """Return the SHA-256 of a file's content, or of all names and contents in a folder, in hexadecimal."""
    if path.is_dir():
        digest = hashlib.sha256()
        for file in sorted(each for each in path.rglob("*") if each.is_file()):
            digest.update(f"{file.relative_to(path).as_posix()} {sha256(file)};".encode())
        return digest.hexdigest()
    digest = hashlib.sha256()
    with path.open("rb") as stream:
        while chunk := stream.read(CHUNK_BYTES):
            digest.update(chunk)
    return digest.hexdigest()


def read_text(path: Path, shown: str, limit: int, lenient: bool = False) -> str:
    """Return the text of a file.

    Parameters
    ----------
    path : Path
    shown : str, what messages call it
    limit : int [bytes], most that is read
    lenient : bool, take what is not UTF-8 for Windows-1252, as tables from instruments often are

    Raises
    ------
    InputError
        For a file that is missing, not a plain file, too large, not readable or not text.
    """

    content = _read_bytes(path, shown, limit)
    wide = content.startswith((b"\xff\xfe", b"\xfe\xff"))
    if b"\0" in content and not (wide and lenient):
        raise _refuse(shown, "bytes that are not text", "a text file", _line_of(content, content.index(b"\0")))
    try:
        return content.decode("utf-16" if wide and lenient else "utf-8-sig")
    except UnicodeDecodeError as error:
        if lenient:
            return content.decode("cp1252", "replace")
        found = "bytes that are not UTF-8 text"
        raise _refuse(shown, found, "text in UTF-8", _line_of(content, error.start)) from None


def _read_bytes(path: Path, shown: str, limit: int) -> bytes:
    try:
        if not path.exists():
            raise _refuse(shown, "no such file", f"a file that exists; looked for {path.absolute()}")
        if not path.is_file():
            raise _refuse(shown, "not a file", "a text file")
        with path.open("rb") as stream:
            content = stream.read(limit + 1)
    except PermissionError:
        raise _refuse(shown, "no permission to read it", "a readable file") from None
    except (OSError, ValueError) as error:  # ValueError: a name no file system can hold
        reason = getattr(error, "strerror", None) or error
        raise _refuse(shown, f"it cannot be read ({reason})", "a readable file") from None
    if len(content) > limit:
        raise _refuse(shown, f"more than {limit / 1e6:g} MB", f"at most {limit / 1e6:g} MB")
    return content


def _refuse(shown: str, found: str, allowed: str, line: int = 0) -> InputError:
    return InputError(Problem(shown, line, "", found, allowed))


def _line_of(content: bytes, place: int) -> int:
    return content.count(b"\n", 0, place) + 1


@dataclass(frozen=True)
class InputFile(Text):
    """A file that exists: a path relative to the study file; with ``shipped``, also ``pvlib:NAME``.

    The folder of the study file comes in the validation context as ``folder``; without it only the text is checked.
    """

    longest: int = 1000
    of: str = "a path"
    shipped: bool = False

    def __get_pydantic_core_schema__(self, source: Any, handler: GetCoreSchemaHandler) -> CoreSchema:
        """Check text and existence."""
        return core_schema.with_info_plain_validator_function(self._existing)

    def _existing(self, value: Any, info: ValidationInfo) -> str:
        shown = self.take(value)
        folder = (info.context or {}).get("folder")
        if folder is None:
            return shown
        if shown.startswith(PVLIB):
            _check_shipped(shown, self.shipped)
            return shown
        path = locate(shown, folder)
        try:
            missing, regular = not path.exists(), path.is_file()
        except (OSError, ValueError):
            missing, regular = True, False
        if missing:
            raise refusal(f"no such file {show(shown)}", f"a file that exists; looked for {path.absolute()}")
        if not regular and not (self.shipped and path.is_dir() and path.suffix == ".zarr"):
            raise refusal(f"{show(shown)}, which is not a file", "a file")
        return shown


def _check_shipped(shown: str, allowed: bool) -> None:
    """Refuse a ``pvlib:NAME`` that is not one of the weather files pvlib ships."""
    if not allowed:
        raise refusal(show(shown), "a path; only weather may name a file that pvlib ships")
    names = sorted(path.name for path in pvlib_data().iterdir() if path.suffix.lower() in PVLIB_WEATHER)
    name = shown.removeprefix(PVLIB)
    if name not in names:
        raise refusal(show(shown), f"a weather file that pvlib ships{nearest(name, names)}")
