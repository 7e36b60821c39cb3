"""Finished pieces of a study on disk: whole or not at all, keyed by what they were made from."""

from __future__ import annotations

import dataclasses
import hashlib
import json
import os
import re
import unicodedata
from collections.abc import Iterator, Mapping, Sequence
from contextlib import contextmanager
from pathlib import Path
from typing import Any

import numpy as np
import xarray as xr
from filelock import FileLock, Timeout

from yieldsim.errors import PlaceError

PIECES = ".pieces"
REGION = "region.nc"
_STEM_LENGTH = 80  # with a suffix and a folder well below what file systems take (255 bytes)
_UNSAFE = re.compile(r'[\x00-\x1f\x7f<>:"/\\|?*]')
_DEVICE_NAMES = re.compile(r"(con|prn|aux|nul|com\d|lpt\d)(\..*)?$", re.IGNORECASE)


def file_stem(name: str) -> str:
    """Return a file name without suffix that stands for a site on every system, the name itself where that can be.

    Two names that would give one stem, or that had to be changed, are told apart by eight digits of their hash.
    """
    stem = _UNSAFE.sub("_", unicodedata.normalize("NFC", name)).strip(" .")
    stem = "".join(character for character in stem if unicodedata.category(character) not in ("Cf", "Cs", "Co", "Cn"))
    while len(stem.encode("utf-8")) > _STEM_LENGTH:
        stem = stem[:-1]
    if stem != name or _DEVICE_NAMES.match(stem):
        stem = f"{stem.rstrip(' .')}-{hashlib.sha256(name.encode('utf-8', 'surrogatepass')).hexdigest()[:8]}"
    return stem


def fingerprint(*things: Any) -> str:
    """Return a hash of plain values, records and arrays: equal content, equal hash, on every run and machine."""
    digest = hashlib.sha256()
    for thing in things:
        _feed(digest, thing)
    return digest.hexdigest()


def _feed(digest: Any, thing: Any) -> None:
    if dataclasses.is_dataclass(thing) and not isinstance(thing, type):
        digest.update(type(thing).__name__.encode())
        for field in dataclasses.fields(thing):
            digest.update(field.name.encode())
            _feed(digest, getattr(thing, field.name))
    elif isinstance(thing, np.ndarray):
        digest.update(f"array {thing.dtype.str} {thing.shape}".encode())
        digest.update(np.ascontiguousarray(thing).tobytes())
    elif isinstance(thing, Mapping):
        digest.update(f"map {len(thing)}".encode())
        for key in sorted(thing):
            _feed(digest, key)
            _feed(digest, thing[key])
    elif isinstance(thing, (tuple, list)):
        digest.update(f"row {len(thing)}".encode())
        for part in thing:
            _feed(digest, part)
    elif isinstance(thing, (frozenset, set)):
        _feed(digest, sorted(thing))
    elif thing is None or isinstance(thing, (str, int, float, bool)):
        digest.update(f"{type(thing).__name__} {thing!r};".encode("utf-8", "surrogatepass"))
    else:
        raise TypeError(f"no fingerprint for {type(thing).__name__}")


@contextmanager
def held(folder: Path) -> Iterator[None]:
    """Hold a folder of results for one run; the system lets go of it when the process ends, however it ends.

    Raises
    ------
    PlaceError
        While another run holds it, or where it cannot be written.
    """
    lock = FileLock(folder / PIECES / "lock")
    try:
        (folder / PIECES).mkdir(parents=True, exist_ok=True)
        lock.acquire(timeout=0)
    except Timeout:
        raise PlaceError(f"{folder} is in use by another run: wait until it ends, or name another folder") from None
    except OSError as error:
        raise PlaceError(f"cannot write in the folder {folder}: {error.strerror or error}") from error
    try:
        for left_by_a_killed_run in folder.rglob(".*.part"):
            left_by_a_killed_run.unlink(missing_ok=True)
        yield
    finally:
        lock.release()


@contextmanager
def whole_file(path: Path) -> Iterator[Path]:
    """Give a temporary name beside ``path``; rename it to ``path`` when the block ends well, remove it otherwise.

    Raises
    ------
    PlaceError
        Where the folder cannot be made or written.
    """
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
    except OSError as error:
        raise PlaceError(f"cannot make the folder {path.parent}: {error.strerror}") from error
    temporary = path.with_name(f".{path.name}.{os.getpid()}.part")
    try:
        yield temporary
        temporary.replace(path)
    except OSError as error:
        what = error.strerror or error
        raise PlaceError(f"cannot write {path}: {what}; what is finished is kept: run again when it can be") from error
    finally:
        temporary.unlink(missing_ok=True)


def write_text(path: Path, text: str) -> None:
    """Write a text file whole or not at all, UTF-8, line ends as given."""
    with whole_file(path) as temporary:
        temporary.write_bytes(text.encode("utf-8"))


def write_json(path: Path, content: Any) -> None:
    """Write JSON whole or not at all; floats keep every digit."""
    write_text(path, json.dumps(content, indent=1, ensure_ascii=False, allow_nan=True) + "\n")


def write_netcdf(path: Path, dataset: xr.Dataset) -> None:
    """Write an xarray Dataset as NetCDF 4, compressed, whole or not at all.

    Made in memory first: the HDF5 library ends the process when a disk is full.
    """
    encoding = {name: {"zlib": True, "complevel": 1} for name, data in dataset.data_vars.items() if data.ndim}
    content = dataset.to_netcdf(engine="h5netcdf", encoding=encoding)
    with whole_file(path) as temporary:
        temporary.write_bytes(content)


def read_piece(folder: Path, stem: str, key: str) -> dict[str, Any] | None:
    """Return a finished piece made from the same content, or None; its files must all be there at their size."""
    path = folder / PIECES / f"{stem}.json"
    try:
        content = json.loads(path.read_text(encoding="utf-8"))
    except (OSError, ValueError):
        return None
    if not isinstance(content, dict) or content.get("key") != key:
        return None
    for name, size in content.get("files", {}).items():
        file = folder / name
        if not file.is_file() or file.stat().st_size != size:
            return None
    piece = content.get("piece")
    return piece if isinstance(piece, dict) else None


def write_piece(folder: Path, stem: str, key: str, piece: Mapping[str, Any], files: list[Path]) -> None:
    """Keep a finished piece; written last, after its files."""
    sizes = {file.relative_to(folder).as_posix(): file.stat().st_size for file in files}
    write_json(folder / PIECES / f"{stem}.json", {"key": key, "files": sizes, "piece": dict(piece)})


def open_spectra(folder: Path, sites: Sequence[str]) -> dict[str, xr.Dataset]:
    """Return the kept spectra of each site that has any, read into memory."""
    found = {}
    for site in sites:
        path = folder / "spectra" / f"{file_stem(site)}.nc"
        if path.is_file():
            with xr.open_dataset(path, engine="h5netcdf") as dataset:
                found[site] = dataset.load()
    return found


def open_region(folder: Path) -> xr.Dataset | None:
    """Return the kept results of a grid, read into memory; None where there are none."""
    path = folder / REGION
    if not path.is_file():
        return None
    with xr.open_dataset(path, engine="h5netcdf") as dataset:
        return dataset.load()
