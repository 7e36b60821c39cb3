"""``yieldsim new``: a commented study file to start from."""

from __future__ import annotations

import argparse
import re
from pathlib import Path

EXAMPLE = """example:
  yieldsim new mine.yaml
  yieldsim run mine.yaml
        the new study runs as it stands, on weather that pvlib ships
"""

STARTER = """\
# A study for yieldsim: what stands here runs as it is; change it to your own. The names and losses are invented.
#
#   yieldsim check {file}     is it right, and what would be computed from which data?
#   yieldsim run {file}       compute it
#
# In an editor that understands JSON Schema: yieldsim schema > yieldsim.schema.json
# yaml-language-server: $schema=yieldsim.schema.json

study: {name}                    # also the name of the output folder

# How the modules stand. Several by name, each computed for every site:
#   mounting:
#     flat: {{kind: fixed, tilt_deg: 10, azimuth_deg: 180}}
#     steep: {{kind: fixed, tilt_deg: 60, azimuth_deg: 180}}
#     tracker: {{kind: tracker, row_pitch_m: 6}}
#     fence: {{kind: vertical, azimuth_deg: 90}}
mounting: {{kind: fixed, tilt_deg: 36, azimuth_deg: 180}}       # azimuth clockwise from north: 180 looks south

sites:
  - name: Greensboro
    weather: pvlib:723170TYA.CSV          # pvlib ships it; yours: a path relative to this file
    # latitude_deg: 36.1                  # over what the weather file says; also longitude_deg, elevation_m
    # atmosphere: {{water_cm: 1.4, aod500: 0.12}}    # one number or twelve; what is left out is found or derived
    # ground: grass                       # a surface of the library, or {{albedo: 0.2}}

absorbers:
  - {{name: silicon, like: c-si}}                     # an entry of the library; any field after it overrides
  - {{name: cadmium telluride, like: cdte}}
  - {{name: perovskite 1.55, like: perovskite-1.55}}
  - {{name: ideal 1.34, gap_ev: 1.34, quality: ideal}}          # a gap alone: what physics allows
  # - {{name: my film, gap_ev: 1.6, external_radiative_efficiency: 1.0e-3, series_resistance_ohm_cm2: 1.5}}
  # - {{name: tandem, stack: [{{like: perovskite-1.68}}, {{like: c-si}}], terminals: 2}}      # top first

reference: silicon                        # the others are set against this one

losses: {{soiling: 0.02, wiring: 0.015, availability: 0.01}}    # shares of energy; one number or twelve, January first

gap_sweep: {{from_ev: 0.9, to_ev: 2.0, step_ev: 0.05}}          # energy over gap: ideal, and of a realistic quality
"""


def arguments(parser: argparse.ArgumentParser) -> None:
    """Declare the options of the command."""
    parser.add_argument("file", metavar="FILE.yaml", type=Path, help="the file to write; it must not exist yet")


def run(options: argparse.Namespace) -> int:
    """Write the study, unless the file exists."""
    from yieldsim.errors import InputError, Problem

    file: Path = options.file
    name = re.sub(r"[^A-Za-z0-9\-]+", "-", file.stem).strip("-") or "study"
    text = STARTER.format(file=file.name, name=name[:60])
    try:
        with file.open("x", encoding="utf-8", newline="\n") as stream:
            stream.write(text)
    except FileExistsError:
        raise InputError(Problem(str(file), 0, "", "a file of that name", "a new file; nothing was changed")) from None
    except FileNotFoundError:
        raise InputError(Problem(str(file), 0, "", "no such folder", "a file in a folder that exists")) from None
    print(f"{file} is written. Next: yieldsim run {file}")
    return 0
