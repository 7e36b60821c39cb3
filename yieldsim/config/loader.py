"""The study file: YAML in, validated plan out; or every problem in it at once."""

from __future__ import annotations

from pathlib import Path

from yieldsim.config import crosscheck, tree
from yieldsim.config.build import Builder
from yieldsim.config.explain import validate
from yieldsim.config.schema import NOT_YET, Study
from yieldsim.errors import InputError
from yieldsim.study.plan import StudyPlan


def load(path: str | Path) -> StudyPlan:
    """Return the plan of a study file.

    Parameters
    ----------
    path : str or Path of a YAML file; paths in it are relative to its folder

    Raises
    ------
    InputError
        With every problem of the file: its line, key path, what was found, what is allowed.
    """
    return plan_of(tree.read(Path(path), str(path)), Path(path).absolute().parent)


def plan_of(document: tree.Document, folder: Path) -> StudyPlan:
    """Return the plan of a study already read; its relative paths start from ``folder``."""
    study, problems = validate(Study, document, {"folder": folder}, NOT_YET)
    problems = [*problems, *crosscheck.problems(document)]
    if study is None or problems:
        raise InputError(sorted(problems, key=lambda problem: problem.line))
    return Builder(document, folder).plan(study)
