"""What was found in the weather of a study, as a table of its own: for a look before anything is computed."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

import pandas as pd

from yieldsim.report.tables import to_csv
from yieldsim.study import store

FILE = "weather_quality.csv"


def write_quality(rows: Sequence[Mapping[str, Any]], folder: str | Path) -> Path:
    """Write the rows of ``weather_quality.csv`` into a folder and return the file.

    Raises
    ------
    PlaceError
        Where the folder cannot be written.
    """
    file = Path(folder) / FILE
    store.write_text(file, to_csv(pd.DataFrame([dict(row) for row in rows])))
    return file
