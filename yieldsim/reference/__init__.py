"""Published tables, each a CSV file whose header lines name source, licence and how it was obtained."""

from __future__ import annotations

import csv
from dataclasses import dataclass
from functools import cache
from importlib import resources

import numpy as np
from numpy.typing import NDArray


@dataclass(frozen=True, slots=True)
class Table:
    """A published table.

    Parameters
    ----------
    columns : mapping column name -> (n,) float64 array
    header : str, the comment lines of the file: source, licence, how obtained
    """

    columns: dict[str, NDArray[np.float64]]
    header: str

    def __getitem__(self, name: str) -> NDArray[np.float64]:
        """Return a column."""
        return self.columns[name]


@cache
def table(name: str) -> Table:
    """Return the table of a file in this folder; its arrays are read-only.

    Parameters
    ----------
    name : str, file name without ``.csv``

    Raises
    ------
    FileNotFoundError
        If no such table is shipped.
    """
    lines = (resources.files(__name__) / f"{name}.csv").read_text(encoding="utf-8").splitlines()
    header = "\n".join(line.lstrip("# ") for line in lines if line.startswith("#"))
    rows = list(csv.reader(line for line in lines if line and not line.startswith("#")))
    values = np.array([[float(cell) if cell else np.nan for cell in row] for row in rows[1:]], dtype=np.float64)
    columns = {column: np.ascontiguousarray(values[:, i]) for i, column in enumerate(rows[0])}
    for column in columns.values():
        column.flags.writeable = False
    return Table(columns, header)
