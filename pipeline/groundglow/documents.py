"""Documents that people write (jobs, scenes, sensors): TOML in, checked models out, errors that teach."""

from __future__ import annotations

import difflib
import tomllib
import types
from collections.abc import Iterator, Mapping, Sequence
from pathlib import Path
from typing import Any, TypeVar, Union, get_args, get_origin

from pydantic import BaseModel, ConfigDict, ValidationError

from groundglow.errors import ConfigError, GroundglowError


class Document(BaseModel):
    """A part of a document: unknown keys are refused, values do not change once read."""

    model_config = ConfigDict(extra="forbid", frozen=True, allow_inf_nan=False)


Model = TypeVar("Model", bound=Document)


def read_toml(path: Path) -> dict[str, Any]:
    """The content of a TOML file.

    Raises
    ------
    ConfigError
        If the file is missing, cannot be read, is not UTF-8 text or not TOML; the message says where.
    """
    try:
        return tomllib.loads(path.read_text(encoding="utf-8"))
    except FileNotFoundError:
        raise ConfigError("there is no such file", where=str(path)) from None
    except IsADirectoryError:
        raise ConfigError("this is a folder, and a TOML file is needed", where=str(path)) from None
    except OSError as error:
        raise ConfigError(f"the file cannot be read ({error.strerror})", where=str(path)) from error
    except UnicodeDecodeError as error:
        raise ConfigError("this is not a text file in UTF-8", where=str(path)) from error
    except tomllib.TOMLDecodeError as error:
        raise ConfigError(f"this is not valid TOML: {error}", where=str(path)) from error


def checked(model: type[Model], content: Mapping[str, Any], *, where: str) -> Model:
    """A document checked against its model.

    Parameters
    ----------
    model : type
        What the document should be.
    content : mapping
        What it holds.
    where : str
        The document's name for messages.

    Raises
    ------
    ConfigError
        Naming every key at fault, what was found and what is needed.
    """
    try:
        return model.model_validate(content)
    except ValidationError as error:
        faults = error.errors(include_url=False)
        told = [_explain(model, fault) for fault in faults if not _told_by_another(fault, faults)]
        lines = list(dict.fromkeys(told))
        raise ConfigError("; ".join(lines), where=where) from error


def _explain(model: type[BaseModel], fault: Any) -> str:
    place = _without_tags(model, fault["loc"])
    key = _path(place)
    kind = fault["type"]
    cause = fault.get("ctx", {}).get("error")
    if isinstance(cause, GroundglowError):
        return f"{key}: {cause}" if key else str(cause)
    if kind == "extra_forbidden":
        known = sorted(_keys_at(model, fault["loc"][:-1]))
        near = difflib.get_close_matches(str(place[-1]), known, n=1)
        hint = f"did you mean {near[0]!r}?" if near else f"known keys: {', '.join(known)}"
        return f"unknown key {key!r} ({hint})"
    if kind == "missing":
        return f"key {key!r} is missing"
    text = fault["msg"].removeprefix("Value error, ")
    text = text[:1].lower() + text[1:]
    found = fault.get("input")
    shown = "" if isinstance(found, Mapping) or kind == "value_error" else f", found {found!r}"
    return f"{key}: {text}{shown}" if key else text


def _told_by_another(fault: Any, faults: Sequence[Any]) -> bool:
    """A list that is "too short" only because its items are at fault is no fault of its own."""
    place = fault["loc"]
    return fault["type"] == "too_short" and any(
        len(other["loc"]) > len(place) and other["loc"][: len(place)] == place for other in faults
    )


def _path(place: Sequence[str | int]) -> str:
    """Keys and list positions as a reader would write them."""
    text = ""
    for part in place:
        if isinstance(part, int):
            text += f"[{part + 1}]"
        else:
            text += f".{part}" if text else part
    return text


def _without_tags(model: type[BaseModel], place: Sequence[str | int]) -> list[str | int]:
    """The place without the marks by which the checker names the branch of a union."""
    models: set[type[BaseModel]] = {model}
    kept: list[str | int] = []
    for position, part in enumerate(place):
        if isinstance(part, int):
            kept.append(part)
            continue
        if position < len(place) - 1 and not any(part in m.model_fields for m in models):
            models = {m for m in models if part in _tags(m)} or models
            continue
        kept.append(part)
        found = {
            inner
            for m in models
            if part in m.model_fields
            for inner in _models_in(m.model_fields[part].annotation)
        }
        models = found or models
    return kept


def _keys_at(model: type[BaseModel], place: Sequence[str | int]) -> set[str]:
    """Keys known at a place within a model, over all branches of unions (narrowed by tags)."""
    models: set[type[BaseModel]] = {model}
    for part in place:
        found: set[type[BaseModel]] = set()
        for current in models:
            if isinstance(part, str) and part in current.model_fields:
                found.update(_models_in(current.model_fields[part].annotation))
        tagged = {m for m in models if isinstance(part, str) and part in _tags(m)}
        models = found or tagged or models
    return {field.alias or name for m in models for name, field in m.model_fields.items()}


def _tags(model: type[BaseModel]) -> set[str]:
    """Values of the single-choice fields of a model, by which unions are told apart."""
    return {
        str(value)
        for field in model.model_fields.values()
        for value in get_args(field.annotation)
        if isinstance(value, str)
    }


def _models_in(annotation: Any) -> Iterator[type[BaseModel]]:
    if isinstance(annotation, type) and issubclass(annotation, BaseModel):
        yield annotation
    elif get_origin(annotation) in (Union, types.UnionType) or get_args(annotation):
        for part in get_args(annotation):
            yield from _models_in(part)
