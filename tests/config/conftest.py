"""Studies as text, loaded from a folder of their own."""

import json

import pytest

from yieldsim.config import load

MINIMAL = """\
study: small
mounting: {kind: fixed, tilt_deg: 30, azimuth_deg: 180}
sites:
  - {name: Greensboro, weather: "pvlib:723170TYA.CSV"}
absorbers:
  - {name: silicon, like: c-si}
"""


@pytest.fixture
def loaded(tmp_path):
    """Return what loads a study given as text or plain data."""

    def load_it(study):
        file = tmp_path / "study.yaml"
        file.write_text(study if isinstance(study, str) else json.dumps(study), encoding="utf-8")
        return load(file)

    return load_it


@pytest.fixture
def minimal():
    """Return the text of the smallest study."""
    return MINIMAL
