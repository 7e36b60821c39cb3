"""Opening a weather file: by path or from pvlib's data folder, gzip or not, within bounds, as lines of text."""

from __future__ import annotations

import gzip
import io
import zlib
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass, field
from pathlib import Path
from typing import BinaryIO

from yieldsim.errors import InputError, PlaceError, Problem

HEAD_BYTES = 65_536  # enough for the longest header met (PSM, 46 columns; PVGIS JSON) and a first day
WHOLE_BYTES = 256 * 2**20  # B: bound for files read in one go; one year of minute data in BSRN form is 60 MB
STREAM_BYTES = 16 * 2**30  # B: bound for files read in pieces; 20 years of minute data with ten columns are 1 GB
LINE_BYTES = 65_536  # B: no weather format has longer lines
WHOLE_LINES = 2_000_000  # bound for files read in one go: a year of minutes has 525,600
STREAM_LINES = 40_000_000  # bound for files read in pieces: 75 years of minutes
_GZIP = b"\x1f\x8b"
_BYTE_ORDER_MARK = b"\xef\xbb\xbf"


@dataclass(frozen=True, slots=True)
class Source:
    """A weather file.

    Parameters
    ----------
    path : Path
    shown : str, the file as the user named it
    head : bytes, its first bytes, unpacked
    encoding : str, ``utf-8`` where the head is that, else ``latin-1``
    """

    path: Path
    shown: str
    head: bytes
    encoding: str
    lines_of_head: tuple[str, ...] = field(default=())

    def problem(self, line: int, where: str, found: str, allowed: str) -> Problem:
        """Return a Problem of this file."""
        return Problem(self.shown, line, where, found, allowed)

    def refuse(self, line: int, where: str, found: str, allowed: str) -> InputError:
        """Return an InputError of this file with one Problem."""
        return InputError(self.problem(line, where, found, allowed))

    def lines(self, limit: int = STREAM_BYTES) -> Iterator[str]:
        """Yield the lines of the file without their ends, as text; raises InputError beyond a size [B] or count."""
        most = STREAM_LINES if limit > WHOLE_BYTES else WHOLE_LINES
        with _unpacked(self.path, self.shown) as stream:
            read = 0
            for number, line in enumerate(iter(lambda: stream.readline(LINE_BYTES + 1), b""), start=1):
                read += len(line)
                if len(line) > LINE_BYTES:
                    raise self.refuse(number, "", "a line that does not end", f"lines of at most {LINE_BYTES} bytes")
                if read > limit:
                    raise self.refuse(number, "", f"more than {limit // 2**20} MiB", "a smaller file")
                if number > most:
                    raise self.refuse(number, "", f"more than {most} lines", "a shorter file")
                if b"\x00" in line:
                    raise self.refuse(number, "", "bytes that are not text", "a text file")
                yield _text(
                    line.removeprefix(_BYTE_ORDER_MARK) if number == 1 else line, self.encoding, self.shown, number
                )

    def whole_lines(self) -> list[str]:
        """Return all lines of a file that is read in one go."""
        return list(self.lines(WHOLE_BYTES))

    def content(self, limit: int) -> bytes:
        """Return all bytes, unpacked, of a file that is read in one go; raises InputError beyond a size [B]."""
        with _unpacked(self.path, self.shown) as stream:
            content = stream.read(limit + 1)
        if len(content) > limit:
            raise self.refuse(0, "", f"more than {limit // 2**20} MiB", "a smaller file")
        return content


def locate(path: str) -> Path:
    """Return where a weather file lies: a path, or ``pvlib:NAME`` for a file that pvlib ships."""
    scheme, _, name = path.partition(":")
    if scheme != "pvlib":
        return Path(path)
    import pvlib

    folder = Path(pvlib.__file__).parent / "data"
    if Path(name).name != name or not (folder / name).is_file():
        shipped = sorted(
            p.name for p in folder.iterdir() if p.suffix.lower() in (".csv", ".tm2") and "TY" in p.name.upper()
        )
        raise InputError(Problem(path, 0, "", f"no file {name!r} in pvlib's data folder", ", ".join(shipped)))
    return folder / name


def open_source(path: str, shown: str | None = None) -> Source:
    """Return a weather file ready to be read.

    Raises
    ------
    InputError
        If there is no such file or it is empty.
    PlaceError
        If it may not be read.
    """
    shown = shown or path
    place = locate(path)
    with _unpacked(place, shown) as stream:
        head = stream.read(HEAD_BYTES)
    if not head.strip():
        raise InputError(Problem(shown, 0, "", "an empty file", "a weather file"))
    head = head.removeprefix(_BYTE_ORDER_MARK)
    encoding = "utf-8" if _is_utf8(head) else "latin-1"
    lines: tuple[str, ...] = ()
    if b"\x00" not in head:
        lines = tuple(_text(line, encoding, shown, i) for i, line in enumerate(head.split(b"\n"), start=1))
    return Source(place, shown, head, encoding, lines)


def _text(line: bytes, encoding: str, shown: str, number: int) -> str:
    """Return a line without its end; raises InputError for a carriage return within: to parsers it ends a line."""
    text = line.decode(encoding, errors="replace").rstrip("\r\n")
    if "\r" in text:
        found = "a carriage return within the line"
        raise InputError(Problem(shown, number, "", found, "lines that end in LF or CR LF"))
    return text


def _is_utf8(head: bytes) -> bool:
    try:
        head.decode("utf-8")
    except UnicodeDecodeError as error:
        return error.start > len(head) - 4  # a sign cut at the end of the head
    return True


@contextmanager
def _unpacked(path: Path, shown: str) -> Iterator[BinaryIO]:
    """Open a file, unpack gzip, and turn what may go wrong into errors for people."""
    try:
        with path.open("rb") as stream:
            packed = stream.read(2) == _GZIP
            stream.seek(0)
            if packed:
                with gzip.open(stream) as unpacked:
                    yield io.BufferedReader(unpacked)
            else:
                yield stream
    except FileNotFoundError:
        raise InputError(Problem(shown, 0, "", "no such file", "a weather file")) from None
    except (IsADirectoryError, NotADirectoryError):
        raise InputError(Problem(shown, 0, "", "not a file", "a weather file")) from None
    except (gzip.BadGzipFile, EOFError, zlib.error):
        raise InputError(Problem(shown, 0, "", "a damaged gzip file", "a whole file")) from None
    except OSError as error:
        raise PlaceError(f"{shown}: cannot be read: {error.strerror or error}") from error
