"""What the stage commands do, once parsed: make the output, then say in a line or in JSON what it is."""

from __future__ import annotations

import json
from collections.abc import Sequence
from pathlib import Path

from groundglow.run.batch.table import outcome_table
from groundglow.run.making.outcome import describe_grid
from groundglow.run.stage.record import StageRecord
from groundglow.run.stage.setting import StageCall


def tell(record: StageRecord, call: StageCall, *, quiet: bool, as_json: bool) -> None:
    """Say what a stage made."""
    if as_json:
        print(json.dumps({"output": str(call.output), **record.model_dump(mode="json")}, indent=2))
    elif not quiet:
        made = ", ".join(record.variables)
        print(f"{call.output}: {record.stage} of {record.scene}, {describe_grid(record.grid.grid())}: {made}")


def radiance(call: StageCall, *, quiet: bool, as_json: bool) -> int:
    """See :func:`groundglow.run.stage.radiance.make_radiance`; the exit code."""
    from groundglow.run.stage.radiance import make_radiance  # noqa: PLC0415  (each command loads its own kernels)

    tell(make_radiance(call), call, quiet=quiet, as_json=as_json)
    return 0


def brightness_temperature(call: StageCall, given: Path, *, quiet: bool, as_json: bool) -> int:
    """See :func:`groundglow.run.stage.radiance.make_brightness_temperature`; the exit code."""
    from groundglow.run.stage.radiance import make_brightness_temperature  # noqa: PLC0415  (as above)

    tell(make_brightness_temperature(call, given), call, quiet=quiet, as_json=as_json)
    return 0


def emissivity(call: StageCall, *, quiet: bool, as_json: bool) -> int:
    """See :func:`groundglow.run.stage.emissivity.make_emissivity`; the exit code."""
    from groundglow.run.stage.emissivity import make_emissivity  # noqa: PLC0415  (as above)

    tell(make_emissivity(call), call, quiet=quiet, as_json=as_json)
    return 0


def atmosphere(call: StageCall, *, quiet: bool, as_json: bool) -> int:
    """See :func:`groundglow.run.stage.atmosphere.make_atmosphere`; the exit code."""
    from groundglow.run.stage.atmosphere import make_atmosphere  # noqa: PLC0415  (as above)

    tell(make_atmosphere(call), call, quiet=quiet, as_json=as_json)
    return 0


def surface_temperature(
    call: StageCall,
    *,
    given: tuple[Path, Path, Path, Path | None],
    quiet: bool,
    as_json: bool,
) -> int:
    """See :func:`groundglow.run.stage.surface.make_surface_temperature`; the exit code.

    ``given``: radiance, brightness temperature, emissivity, atmosphere.
    """
    from groundglow.run.stage.surface import SurfaceInputs, make_surface_temperature  # noqa: PLC0415  (as above)

    tell(make_surface_temperature(call, SurfaceInputs(*given)), call, quiet=quiet, as_json=as_json)
    return 0


def flux(call: StageCall, temperature: Path, ground: Path, *, quiet: bool, as_json: bool) -> int:
    """See :func:`groundglow.run.stage.surface.make_flux`; the exit code."""
    from groundglow.run.stage.surface import make_flux  # noqa: PLC0415  (as above)

    tell(make_flux(call, temperature, ground), call, quiet=quiet, as_json=as_json)
    return 0


def layers(call: StageCall, inputs: Sequence[Path], *, quiet: bool, as_json: bool) -> int:
    """See :func:`groundglow.run.stage.layers.make_layers`; the exit code."""
    from groundglow.run.stage.layers import make_layers  # noqa: PLC0415  (as above)

    outcome = make_layers(call, inputs, quiet=quiet)
    if as_json:
        print(json.dumps(outcome.as_json(), indent=2))
    elif not quiet:
        print(outcome_table([outcome], outcome.seconds))
    return 0
