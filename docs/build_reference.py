"""Writes the parts of the guide that the code itself knows: job file, layers and flags, sensors, JSON Schema.

Run it after a change of the job model, the quantities or the sensors: ``python docs/build_reference.py``.
A test holds the written files to what it would write.
"""

from __future__ import annotations

import types
from collections.abc import Iterator
from pathlib import Path
from typing import Annotated, Any, Literal, Union, get_args, get_origin

from pydantic.fields import FieldInfo
from pydantic_core import PydanticUndefined

from groundglow.documents import Document
from groundglow.quantities import DEFAULT_MASK, FLAGS, QUANTITIES
from groundglow.run.config.job import DEFAULT_LAYERS, LAYER_NAMES, NEEDS_SKY_FLUX, Job
from groundglow.run.config.measures import _CONVERSIONS, Unit
from groundglow.run.config.schema import job_schema, one_or_many
from groundglow.scene.sensor import load_sensor, sensor_names

HERE = Path(__file__).resolve().parent
_NOTE = "<!-- Written by docs/build_reference.py from the code: change it there. -->\n\n"
_WORDS = {str: "text", bool: "true or false", int: "whole number", float: "number"}
_LIMITS = {
    "gt": "above {}",
    "ge": "at least {}",
    "lt": "below {}",
    "le": "at most {}",
    "multiple_of": "multiple of {}",
}


def pages() -> dict[str, str]:
    """Every generated file by name."""
    return {
        "job-file.md": job_file_page(),
        "layers.md": layers_page(),
        "sensors-shipped.md": sensors_page(),
        "job.schema.json": job_schema(),
    }


def job_file_page() -> str:
    """The reference of the job file, one section a table."""
    parts = [_NOTE + _JOB_HEAD, _table(Job)]
    seen: set[type[Document]] = {Job}
    for name, field in Job.model_fields.items():
        parts += _sections(name, field.annotation, seen)
    return "\n\n".join(parts) + "\n"


def layers_page() -> str:
    """The layers and the flags of the quality layer."""
    rows = [
        "| layer | unit | CF standard name | meaning | kept bits | written |",
        "|---|---|---|---|---|---|",
    ]
    for name in LAYER_NAMES:
        found = QUANTITIES[name]
        when = "always" if name == "quality" else "by default" if name in DEFAULT_LAYERS else "on request"
        when += ", where a sky flux is known" if name in NEEDS_SKY_FLUX else ""
        standard = f"`{found.standard_name}`" if found.standard_name else "-"
        rows.append(
            f"| `{name}` | {found.unit} | {standard} | {found.long_name} | {found.kept_bits} | {when} |"
        )
    flags = ["| bit | value | flag | meaning | masked by default |", "|---|---|---|---|---|"]
    for flag in FLAGS:
        masked = "yes" if flag.name in DEFAULT_MASK else ""
        flags.append(
            f"| {flag.mask.bit_length() - 1} | {flag.mask} | `{flag.name}` | {flag.title} | {masked} |"
        )
    gravest = ", ".join(f"`{flag.name}`" for flag in sorted(FLAGS, key=lambda flag: -flag.severity))
    return _NOTE + _LAYERS_TEXT.format(layers="\n".join(rows), flags="\n".join(flags), gravest=gravest)


def sensors_page() -> str:
    """The sensors that come with the package."""
    parts = [_NOTE + "# Sensors that come with Groundglow"]
    for name in sensor_names():
        sensor = load_sensor(name)
        rows = [
            "| band | effective wavelength um | noise | calibration | saturates at K |",
            "|---|---|---|---|---|",
        ]
        for band in sensor.bands.values():
            noise = (
                f"{band.noise.temperature_difference:g} K at {band.noise.at:g} K"
                if band.noise
                else "0.1 K assumed"
            )
            known = band.calibration
            calibration = f"{known.uncertainty:g} K at {known.at:g} K" if known else "0.5 K assumed"
            top = f"{band.saturation_temperature:g}" if band.saturation_temperature else "-"
            wavelength = f"{band.response.effective_wavelength:.3f}"
            rows.append(f"| {band.number} | {wavelength} | {noise} | {calibration} | {top} |")
        origin = sensor.source.rstrip(".")
        parts.append(f"## `{name}`\n\n{sensor.title}. Source: {origin}.\n\n" + "\n".join(rows))
    return "\n\n".join(parts) + "\n"


def _sections(key: str, annotation: Any, seen: set[type[Document]]) -> Iterator[str]:
    """Sections of the tables that a key may hold, and of those within them."""
    models = [model for model in _models(annotation) if model not in seen]
    several = len(models) > 1
    for model in models:
        seen.add(model)
        source = _choice(model) if several else None
        title = f'`[{key}]` with `source = "{source}"`' if source else f"`[{key}]`"
        yield f"## {title}\n\n{_first_paragraph(model)}\n\n{_table(model)}"
        for name, field in model.model_fields.items():
            yield from _sections(f"{key}.{name}", field.annotation, seen)


def _table(model: type[Document]) -> str:
    rows = ["| key | value | default | meaning |", "|---|---|---|---|"]
    for name, field in model.model_fields.items():
        value = _value(field) + (" or one of them" if name in one_or_many(model) else "")
        meaning = field.description or ("Chooses this table." if name == "source" else "")
        meaning = (meaning or _first_paragraph_of(field.annotation)).replace("|", "\\|")
        rows.append(f"| `{name}` | {value} | {_default(field)} | {meaning} |")
    return "\n".join(rows)


def _value(field: FieldInfo) -> str:
    """What a key may hold, in words."""
    words = _kind(field.annotation)
    limits = [*field.metadata, *_metadata(field.annotation)]
    units = [one for one in limits if isinstance(one, Unit)]
    told = []
    for one in limits:
        told += [
            text.format(f"{getattr(one, name):g}") for name, text in _LIMITS.items() if hasattr(one, name)
        ]
    if told and ("number" in words):
        words += f", {', '.join(dict.fromkeys(told))}"
    if units:
        words += f" [{', '.join(_CONVERSIONS[units[0].name])}]"
    return words


def _kind(annotation: Any) -> str:
    origin, arguments = get_origin(annotation), get_args(annotation)
    if origin is Annotated:
        return _kind(arguments[0])
    if origin is Literal:
        return " or ".join(f"`{value}`" for value in arguments)
    if origin in (Union, types.UnionType):
        kinds = dict.fromkeys(_kind(one) for one in arguments if one is not type(None))
        return " or ".join(kinds)
    if origin is tuple:
        inner = _kind(arguments[0])
        return f"list of {inner}" if arguments[-1] is Ellipsis else f"{len(arguments)} x {inner}"
    if origin is dict:
        return f"table of {_kind(arguments[1])} by {_kind(arguments[0])}"
    if isinstance(annotation, type) and issubclass(annotation, Document):
        return "table"
    return _WORDS.get(annotation, getattr(annotation, "__name__", str(annotation)))


def _default(field: FieldInfo) -> str:
    if field.is_required():
        return "needed"
    if field.default is PydanticUndefined or field.default is None:
        return "-"
    if isinstance(field.default, tuple):
        return ", ".join(f"`{value}`" for value in field.default) or "-"
    if isinstance(field.default, bool):
        return f"`{str(field.default).lower()}`"
    return f"`{field.default:g}`" if isinstance(field.default, float) else f"`{field.default}`"


def _metadata(annotation: Any) -> Iterator[Any]:
    """What stands beside a type, however deep."""
    if get_origin(annotation) is Annotated:
        for one in get_args(annotation)[1:]:
            yield from one.metadata if isinstance(one, FieldInfo) else (one,)
    for one in get_args(annotation):
        yield from _metadata(one)


def _models(annotation: Any) -> Iterator[type[Document]]:
    if isinstance(annotation, type) and issubclass(annotation, Document):
        yield annotation
    for one in get_args(annotation):
        yield from _models(one)


def _choice(model: type[Document]) -> str | None:
    field = model.model_fields.get("source")
    return str(get_args(field.annotation)[0]) if field is not None else None


def _first_paragraph(model: type[Document]) -> str:
    return " ".join((model.__doc__ or "").strip().split("\n\n")[0].split())


def _first_paragraph_of(annotation: Any) -> str:
    models = list(_models(annotation))
    if len(models) == 1:
        return _first_paragraph(models[0])
    return "Which of the tables below, by its `source`." if models else ""


_JOB_HEAD = """\
# The job file

A job is one TOML file. Paths in it are relative to the file. A number is in the unit named first in brackets, or is a
text with one of the other units: `lowest = 250` or `lowest = "-20 degC"`. Unknown keys, wrong units and contradictions
are refused by name. For an editor that checks and completes TOML by a JSON Schema, put
`#:schema job.schema.json` in the first line, and `groundglow job-schema > job.schema.json` beside the job.

## The file itself"""

_LAYERS_TEXT = """\
# Layers and flags

Each layer is one single-band cloud-optimised GeoTIFF: float32, NaN where there is no number, unit, names and statistics
of the stored values in the file. A layer keeps so many of the 23 mantissa bits of a float32 as are more than noise:
with 15 bits a temperature of 300 K is stored to the nearest 1/128 K. Rounding is to nearest and happens once.

{layers}

Skin temperature is not air temperature. Fluxes with the sky in them hold for a clear sky, as their CF names say.

## The quality layer

`quality` is uint16; each bit is a flag, listed in the file as CF wants it (`flag_masks`, `flag_meanings`). Several
flags may be set at once. `quality.mask` in the job names the flags that take the number away from all other layers; the
number of "valid %" counts the pixels that keep one.

{flags}

Styles and reports name a combination of flags by its gravest, in this order: {gravest}.

Overviews of numbers are NaN-aware means; those of the quality layer keep the most frequent value. Hot and saturated
pixels are flagged, never extrapolated.
"""


def main() -> None:
    """Write every generated file."""
    for name, text in pages().items():
        (HERE / name).write_text(text, encoding="utf-8")


if __name__ == "__main__":
    main()
