"""The validator's errors in the words of the study file: line, key path, what was found, what is allowed."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from typing import Any, TypeVar, get_args

from pydantic import BaseModel, ValidationError

from yieldsim.config.fields import MOST_PROBLEMS, REFUSED, nearest, quoted, show
from yieldsim.config.tree import Document, KeyPath
from yieldsim.errors import InputError, Problem

Model = TypeVar("Model", bound=BaseModel)


def validate(
    model: type[Model],
    document: Document,
    context: Mapping[str, Any] | None = None,
    not_yet: Iterable[str] = (),
) -> tuple[Model | None, list[Problem]]:
    """Return a document as a model, or what is wrong with it.

    Parameters
    ----------
    model : the pydantic model of the whole document
    document : Document
    context : handed to the validators
    not_yet : keys that are no slips but not accepted by this version

    Returns
    -------
    the model, or None if anything is wrong; and every problem
    """
    if document.data is None:
        return None, [Problem(document.file, 0, "", "nothing", f"a mapping with {_keys(_fields([model]))}")]
    try:
        return model.model_validate(document.data, context=dict(context or {})), []
    except ValidationError as error:
        found = error.errors(include_url=False)
        problems = [_problem(model, document, each, frozenset(not_yet)) for each in found[:MOST_PROBLEMS]]
        if len(found) > MOST_PROBLEMS:
            problems.append(
                Problem(document.file, 0, "", f"{len(found)} problems", f"the first {MOST_PROBLEMS} are told")
            )
        return None, problems


def demand(model: type[Model], document: Document) -> Model:
    """Return a document as a model; raises InputError with every problem."""
    value, problems = validate(model, document)
    if value is None or problems:
        raise InputError(problems)
    return value


def _problem(model: type[BaseModel], document: Document, error: Any, not_yet: frozenset[str]) -> Problem:
    path = _path(error["loc"])
    kind = error["type"]
    if kind == REFUSED:
        return document.problem(path, error["ctx"]["found"], error["ctx"]["allowed"])
    if kind == "missing":
        return document.problem(path, f"no key {quoted(path[-1])}", _meaning(model, path))
    if kind in ("extra_forbidden", "invalid_key"):
        return _unknown(document, path, _fields(_models_at(model, path[:-1])), not_yet)
    if kind in ("model_type", "model_attributes_type", "dict_type"):
        keys = _keys(_fields(_models_at(model, path)))
        return document.problem(path, show(error["input"]), f"a mapping with {keys}" if keys else "a mapping")
    if kind == "list_type":
        return document.problem(path, show(error["input"]), "a list")
    return document.problem(path, show(error["input"]), error["msg"])


def _unknown(document: Document, path: KeyPath, fields: Mapping[str, Any], not_yet: frozenset[str]) -> Problem:
    key = str(path[-1])
    path = (*path[:-1], key)  # a number as a key is spelt and found like any other
    if key in not_yet:
        found, close = f"key {quoted(key)}, which this version does not take yet", ""
    else:
        found, close = f"unknown key {quoted(key)}", nearest(key, fields)
    return document.problem(path, found, f"{_keys(fields)}{close}", of_key=True)


def _path(location: tuple[str | int, ...]) -> KeyPath:
    """Return the key path of an error's location: without the tags that tell forms of a value apart."""
    return tuple(part for part in location if isinstance(part, int) or not (part.startswith("<") or part == "[key]"))


def _models(annotation: Any) -> list[type[BaseModel]]:
    """Return the models an annotation holds, not looking into them."""
    if isinstance(annotation, type) and issubclass(annotation, BaseModel):
        return [annotation]
    return [model for part in get_args(annotation) for model in _models(part)]


def _models_at(model: type[BaseModel], path: KeyPath) -> list[type[BaseModel]]:
    """Return the models that may stand at a key path; list places and free names are walked over."""
    models = [model]
    for part in path:
        inner = [
            inside
            for each in models
            if part in each.model_fields
            for inside in _models(each.model_fields[str(part)].annotation)
        ]
        if inner or any(part in each.model_fields for each in models):
            models = inner
    return models


def _fields(models: Iterable[type[BaseModel]]) -> dict[str, Any]:
    """Return the fields of models by name, a model's own before those it has from its base."""
    fields = {}
    for model in models:
        own = [name for name in model.model_fields if name in model.__annotations__]
        fields.update({name: model.model_fields[name] for name in (*own, *model.model_fields)})
    return fields


def _keys(fields: Mapping[str, Any]) -> str:
    return ", ".join(fields)


def _meaning(model: type[BaseModel], path: KeyPath) -> str:
    """Return what a missing key should say."""
    field = _fields(_models_at(model, path[:-1])).get(str(path[-1]))
    if field is None:
        return f"a value for `{path[-1]}`"
    kinds = [kind.allowed for kind in field.metadata if hasattr(kind, "allowed")]
    return "; ".join([*([field.description] if field.description else []), *kinds]) or "this key, which has no default"
