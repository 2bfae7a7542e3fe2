"""From a TOML document to its tables, and every reason why a value in it is refused."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from pydantic import BaseModel, ValidationError

from pairmc.runfile.lines import Path
from pairmc.runfile.models import Document
from pairmc.runfile.problems import (
    Finding,
    Refusal,
    RefusedError,
    key_in_words,
    nearest,
    value_in_words,
)


def validate(document: Mapping[str, Any]) -> tuple[Document, list[Finding]]:
    """Read every value of a document on its own.

    Parameters
    ----------
    document
        What the TOML text holds.

    Returns
    -------
    Document
        The tables; what was refused is left out of them.
    list of Finding
        What was refused, and why.
    """
    try:
        return Document.model_validate(document), []
    except ValidationError as error:
        details = error.errors(include_url=False)
    findings: list[Finding] = []
    rest = dict(document)
    for detail in details:
        path: Path = tuple(detail["loc"])
        findings += _findings(path, detail["type"], detail["input"], detail.get("ctx", {}))
        rest = _without(rest, path)
    return Document.model_validate(rest), findings


def _findings(path: Path, kind: str, value: Any, context: Mapping[str, Any]) -> list[Finding]:
    """Word one complaint of the model."""
    reason = context.get("error")
    if isinstance(reason, RefusedError):
        return [Finding(path, refusal) for refusal in reason.refusals]
    if kind == "extra_forbidden":
        return [_unknown(path, value)]
    if kind == "model_type":
        name = key_in_words(path)
        advice = f"write {name} in single brackets, once" if isinstance(value, list) else ""
        refusal = Refusal(value_in_words(value), "a table of keys and values", advice)
        return [Finding(path, refusal, table=True)]
    raise AssertionError(f"no wording for a complaint of kind {kind} about {path}")


def _unknown(path: Path, value: Any) -> Finding:
    """Say that a key is unknown, which are known there, and which was probably meant."""
    name = str(path[-1])
    known = _keys(path[:-1])
    homes = [table for table in ((), *_tables(Document)) if name in _keys(table)]
    near = nearest(name, known)
    meant: Path = ()
    advice = ""
    if homes:
        meant = (*homes[0], name)
        place = f"in {key_in_words(homes[0])}" if homes[0] else "above all tables"
        advice = f"{name} belongs {place}"
    elif near:
        meant = (*path[:-1], near)
        advice = f"did you mean {near}?"
    table = isinstance(value, dict)
    got = "an unknown table" if table else "an unknown key"
    return Finding(path, Refusal(got, ", ".join(known), advice), table, meant)


def _models(model: type[BaseModel]) -> dict[str, type[BaseModel]]:
    """Return the tables directly below a model, by key."""
    found: dict[str, type[BaseModel]] = {}
    for name, field in model.model_fields.items():
        annotation = field.annotation
        choices = getattr(annotation, "__args__", (annotation,))
        for part in choices:
            if isinstance(part, type) and issubclass(part, BaseModel):
                found[name] = part
    return found


def _tables(model: type[BaseModel], above: Path = ()) -> list[Path]:
    """Return the paths of all tables below a model."""
    paths: list[Path] = []
    for name, part in _models(model).items():
        paths += [(*above, name), *_tables(part, (*above, name))]
    return paths


def _keys(path: Path) -> tuple[str, ...]:
    """Return the keys known in the table at a path, in their order."""
    model: type[BaseModel] = Document
    for part in path:
        model = _models(model)[str(part)]
    return tuple(model.model_fields)


def _without(table: Mapping[Any, Any], path: Path) -> dict[Any, Any]:
    """Return the table without the value at a path."""
    if len(path) == 1:
        return {key: value for key, value in table.items() if key != path[0]}
    return {**table, path[0]: _without(table.get(path[0], {}), path[1:])}
