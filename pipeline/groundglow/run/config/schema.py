"""The JSON Schema of the job file, for editors that check and complete TOML."""

from __future__ import annotations

import json
from collections.abc import Iterator
from typing import Any, get_args

from groundglow.documents import Document
from groundglow.run.config.job import Job

_DIALECT = "https://json-schema.org/draft/2020-12/schema"
# Validators of that name let a key hold one value in place of a list, which pydantic's schema cannot know.
_ONE_OR_MANY = "_one_or_many"


def job_schema() -> str:
    """The schema as JSON, with a line end."""
    schema: dict[str, Any] = {"$schema": _DIALECT, **Job.model_json_schema(), "title": "Groundglow job file"}
    for model in dict.fromkeys(models_of(Job)):
        part = schema if model is Job else schema["$defs"][model.__name__]
        for key in one_or_many(model):
            part["properties"][key] = _or_one(part["properties"][key])
    return json.dumps(schema, indent=2) + "\n"


def models_of(annotation: Any) -> Iterator[type[Document]]:
    """The tables that a type may hold, itself first, those within them after it."""
    if isinstance(annotation, type) and issubclass(annotation, Document):
        yield annotation
        for field in annotation.model_fields.values():
            yield from models_of(field.annotation)
    for part in get_args(annotation):
        yield from models_of(part)


def one_or_many(model: type[Document]) -> frozenset[str]:
    """Keys of a table that take one value as well as a list of them."""
    found = model.__pydantic_decorators__.field_validators.get(_ONE_OR_MANY)
    return frozenset(found.info.fields if found is not None else ())


def _or_one(schema: dict[str, Any]) -> dict[str, Any]:
    """A list's schema, or that of what it lists."""
    if "anyOf" in schema:
        branches = [branch for part in schema["anyOf"] for branch in _branches(part)]
        return {**schema, "anyOf": branches}
    outer = {key: value for key, value in schema.items() if key in ("title", "description", "default")}
    inner = {key: value for key, value in schema.items() if key not in outer}
    return {"anyOf": _branches(inner), **outer}


def _branches(schema: dict[str, Any]) -> list[dict[str, Any]]:
    return [schema, schema["items"]] if schema.get("type") == "array" else [schema]
