"""Fuzz the readers and the study file with atheris for a bounded time: anything but InputError is a find.

    pip install atheris
    python tests/fuzz.py readers -max_total_time=300
    python tests/fuzz.py study -max_total_time=300

Not part of the test run. What it found stands as a test beside the code it broke.
"""

import sys
import tempfile
from pathlib import Path

import atheris

with atheris.instrument_imports(include=["yieldsim"]):
    from yieldsim import readers
    from yieldsim.config import load
    from yieldsim.errors import InputError

PLACE = {"latitude_deg": 40.0, "longitude_deg": 8.0, "elevation_m": 100.0}
FOLDER = Path(tempfile.mkdtemp())
FORMATS = (None, *readers.READERS)


def one_reader(data):
    """Read bytes as any format, or as the one they look like."""
    path = FOLDER / "weather"
    path.write_bytes(data[1:])
    try:
        readers.read(str(path), FORMATS[data[0] % len(FORMATS)] if data else None, **PLACE)
    except InputError:
        return


def one_study(data):
    """Read bytes as a study file."""
    path = FOLDER / "study.yaml"
    path.write_bytes(data)
    try:
        load(path)
    except InputError:
        return


def main():
    """Choose the target, and let the fuzzer run; seeds are the cuts of real files and the shipped studies."""
    target = sys.argv.pop(1) if len(sys.argv) > 1 else "readers"
    here = Path(__file__).parent
    seeds = FOLDER / "seeds"
    seeds.mkdir()
    known = (here / "readers" / "data").iterdir() if target == "readers" else (here.parent / "configs").glob("*.yaml")
    for path in known:
        content = path.read_bytes()[:20_000]
        (seeds / path.name).write_bytes((b"\0" if target == "readers" else b"") + content)
    atheris.Setup([*sys.argv, str(seeds)], one_reader if target == "readers" else one_study)
    atheris.Fuzz()


if __name__ == "__main__":
    main()
