"""The study file: YAML in, validated plan out; or every problem in it at once."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

from yieldsim.config import crosscheck, tree
from yieldsim.config.build import Builder
from yieldsim.config.explain import validate
from yieldsim.config.inputs import read_text
from yieldsim.config.many import Cells, written_out
from yieldsim.config.schema import NOT_YET, Study
from yieldsim.errors import InputError, Problem
from yieldsim.study.plan import StudyPlan

MAX_RUN_BYTES = 20_000_000


def load(path: str | Path, cells: Cells | None = None) -> StudyPlan:
    """Return the plan of a study file.

    Parameters
    ----------
    path : str or Path of a YAML file; paths in it are relative to its folder
    cells : what reads the cells of a grid of weather; without it a study of a grid is refused

    Raises
    ------
    InputError
        With every problem of the file: its line, key path, what was found, what is allowed.
    """
    folder = Path(path).absolute().parent
    return plan_of(written_out(tree.read(Path(path), str(path)), folder, cells), folder)


def load_run(path: str | Path) -> tuple[StudyPlan, dict[str, Any]]:
    """Return the plan that a finished run was made from, and the record of that run.

    Parameters
    ----------
    path : str or Path of a ``run.json``

    Raises
    ------
    InputError
        If it is no such file, or if what it names is not there any more.
    """
    shown = str(path)
    try:
        record = json.loads(read_text(Path(path), shown, MAX_RUN_BYTES))
    except (ValueError, RecursionError) as error:
        line = getattr(error, "lineno", 0)
        raise InputError(Problem(shown, line, "", "text that is not JSON", "the run.json of a finished run")) from None
    study = record.get("config") if isinstance(record, dict) else None
    if not isinstance(study, dict):
        raise InputError(Problem(shown, 0, "config", "no study", "the run.json of a finished run"))
    folder = record.get("folder")
    start = Path(folder) if isinstance(folder, str) and folder else Path(path).absolute().parent
    return plan_of(tree.Document(shown, (), study, {}, {}), start), record


def plan_of(document: tree.Document, folder: Path) -> StudyPlan:
    """Return the plan of a study already read; its relative paths start from ``folder``."""
    study, problems = validate(Study, document, {"folder": folder}, NOT_YET)
    problems = [*problems, *crosscheck.problems(document)]
    if study is None or problems:
        raise InputError(sorted(problems, key=lambda problem: problem.line))
    return Builder(document, folder).plan(study)
