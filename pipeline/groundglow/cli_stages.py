"""The commands for workflow managers and for a closer look: one a stage, one pixel, the job's schema."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

if TYPE_CHECKING:
    from groundglow.run.stage.setting import StageCall

EXIT_CODES = """\
Exit codes: 0 done; 2 the command, job or scene file cannot be followed as written; 3 an input is missing or not what
it should be, or the output cannot be written; 75 the same output is being made by another process; 130 interrupted.
"""

JobFile = Annotated[
    Path, typer.Argument(metavar="JOB", help="Job file (TOML): the choices. Its scenes are not read.")
]
SceneFile = Annotated[
    str, typer.Option("--scene", metavar="SCENE", help="Scene description, with its rasters.")
]
Output = Annotated[
    Path,
    typer.Option("--output", "-o", metavar="FOLDER", help="Folder to write; replaced when it is complete."),
]
Workers = Annotated[
    int | None, typer.Option(min=1, help="Threads; default: all cores. No effect on the files.")
]
Quiet = Annotated[bool, typer.Option("--quiet", "-q", help="Say nothing; errors still show.")]
Json = Annotated[bool, typer.Option("--json", help="Print what was made as JSON on standard output.")]


def _folder(stage: str) -> typer.models.OptionInfo:
    option: typer.models.OptionInfo = typer.Option(
        f"--{stage}",
        metavar="FOLDER",
        help=f"What 'groundglow {stage}' wrote (the folder or its stage.json).",
    )
    return option


RadianceFolder = Annotated[Path, _folder("radiance")]
BrightnessFolder = Annotated[Path, _folder("brightness-temperature")]
EmissivityFolder = Annotated[Path, _folder("emissivity")]
AtmosphereFolder = Annotated[Path | None, _folder("atmosphere")]
TemperatureFolder = Annotated[Path, _folder("surface-temperature")]


def register(app: typer.Typer) -> None:
    """Add these commands to the program's."""
    for name, function in _STAGES.items():
        app.command(name, epilog=EXIT_CODES)(function)
    # Negative coordinates must not be taken for options.
    numbers = {"ignore_unknown_options": True}
    app.command("explain", epilog=EXIT_CODES, context_settings=numbers)(explain)
    app.command("job-schema")(job_schema)


def _call(job: Path, scene: str, output: Path, workers: int | None) -> StageCall:
    from groundglow.run.stage.setting import StageCall  # noqa: PLC0415  (help must not wait for the libraries)

    return StageCall(job, scene, output, workers)


def radiance(
    job: JobFile,
    scene: SceneFile,
    output: Output,
    workers: Workers = None,
    quiet: Quiet = False,
    as_json: Json = False,
) -> None:
    """Counts to spectral radiance [W m-2 sr-1 um-1]; fill, saturation and the quality raster to flags.

    Reads JOB and SCENE with its thermal and quality rasters. Writes radiance.tif, quality.tif and, last,
    stage.json. Neither the air nor the emissivity is looked at.
    """
    from groundglow.run.stage import commands as stages  # noqa: PLC0415  (help must not wait for the libraries)

    raise typer.Exit(stages.radiance(_call(job, scene, output, workers), quiet=quiet, as_json=as_json))


def brightness_temperature(
    job: JobFile,
    scene: SceneFile,
    given: RadianceFolder,
    output: Output,
    workers: Workers = None,
    quiet: Quiet = False,
    as_json: Json = False,
) -> None:
    """Radiance to brightness temperature [K] through the band's spectral response, or by two constants.

    Reads JOB, SCENE and the radiance. Writes brightness_temperature.tif, quality.tif (with the flags that
    the sensor's calibrated range and saturation set) and stage.json.
    """
    from groundglow.run.stage import commands as stages  # noqa: PLC0415  (as above)

    call = _call(job, scene, output, workers)
    raise typer.Exit(stages.brightness_temperature(call, given, quiet=quiet, as_json=as_json))


def emissivity(
    job: JobFile,
    scene: SceneFile,
    output: Output,
    workers: Workers = None,
    quiet: Quiet = False,
    as_json: Json = False,
) -> None:
    """Emissivity of the ground in the band and broadband, with its uncertainty, as the job's [emissivity] says.

    Reads JOB and SCENE with the rasters that the method needs. Writes emissivity.tif,
    emissivity_uncertainty.tif, broadband_emissivity.tif, the two parts of its uncertainty, quality.tif and
    stage.json.
    """
    from groundglow.run.stage import commands as stages  # noqa: PLC0415  (as above)

    raise typer.Exit(stages.emissivity(_call(job, scene, output, workers), quiet=quiet, as_json=as_json))


def atmosphere(
    job: JobFile,
    scene: SceneFile,
    output: Output,
    quiet: Quiet = False,
    as_json: Json = False,
) -> None:
    """The air between ground and sensor in the band, as the job's [atmosphere] says.

    Reads JOB, SCENE and the source that the job names. Writes air.json (transmittance, path and sky radiance
    at nodes of place, ground height and view zenith angle, and their change for each cause of error) and
    stage.json.
    """
    from groundglow.run.stage import commands as stages  # noqa: PLC0415  (as above)

    raise typer.Exit(stages.atmosphere(_call(job, scene, output, None), quiet=quiet, as_json=as_json))


def surface_temperature(
    job: JobFile,
    scene: SceneFile,
    radiance: RadianceFolder,
    brightness: BrightnessFolder,
    emissivity: EmissivityFolder,
    output: Output,
    atmosphere: AtmosphereFolder = None,
    workers: Workers = None,
    quiet: Quiet = False,
    as_json: Json = False,
) -> None:
    """Surface temperature [K] by the job's method, and its standard uncertainty.

    Reads JOB, SCENE (with elevation and view angle, where the air depends on them) and the stages given. The
    single-channel method needs --atmosphere; the water-vapour method reads the column from the job or SCENE
    instead. Writes surface_temperature.tif, its uncertainty and the parts of it,
    transmittance.tif, path_radiance.tif, sky_flux.tif (where known), quality.tif and stage.json.
    """
    from groundglow.run.stage import commands as stages  # noqa: PLC0415  (as above)

    given = (radiance, brightness, emissivity, atmosphere)
    call = _call(job, scene, output, workers)
    raise typer.Exit(stages.surface_temperature(call, given=given, quiet=quiet, as_json=as_json))


def flux(
    job: JobFile,
    scene: SceneFile,
    temperature: TemperatureFolder,
    emissivity: EmissivityFolder,
    output: Output,
    workers: Workers = None,
    quiet: Quiet = False,
    as_json: Json = False,
) -> None:
    """Emitted longwave flux [W m-2] and its uncertainty; leaving and net flux where the sky's flux is known.

    Reads JOB, SCENE, the surface temperature and the emissivity. Writes emitted_flux.tif,
    emitted_flux_uncertainty.tif, leaving_flux.tif, net_longwave_flux.tif, quality.tif and stage.json.
    """
    from groundglow.run.stage import commands as stages  # noqa: PLC0415  (as above)

    call = _call(job, scene, output, workers)
    raise typer.Exit(stages.flux(call, temperature, emissivity, quiet=quiet, as_json=as_json))


def layers(
    job: JobFile,
    inputs: Annotated[list[Path], typer.Argument(metavar="FOLDERS...", help="Outputs of the stages before.")],
    scene: SceneFile,
    output: Output,
    workers: Workers = None,
    quiet: Quiet = False,
    as_json: Json = False,
) -> None:
    """Finished layers of one scene from what the stages left: masked, rounded once, with the STAC Item.

    Reads JOB, SCENE and the folders given; together they must hold what the job's layers.write names. Flags of
    all folders are joined. Writes the folder that 'groundglow run' would have written for this scene.
    """
    from groundglow.run.stage import commands as stages  # noqa: PLC0415  (as above)

    raise typer.Exit(stages.layers(_call(job, scene, output, workers), inputs, quiet=quiet, as_json=as_json))


def explain(
    job: Annotated[Path, typer.Argument(metavar="JOB", help="Job file (TOML).")],
    x: Annotated[float | None, typer.Argument(metavar="X", help="Map x, or longitude with --lonlat.")] = None,
    y: Annotated[float | None, typer.Argument(metavar="Y", help="Map y, or latitude with --lonlat.")] = None,
    lonlat: Annotated[
        bool, typer.Option("--lonlat", help="Coordinates are degrees of longitude and latitude.")
    ] = False,
    points: Annotated[
        Path | None,
        typer.Option(
            help="CSV with a heading row and columns x, y (or longitude, latitude) and, if wanted, name."
        ),
    ] = None,
    scene: Annotated[
        str | None, typer.Option(metavar="SCENE", help="Scene description; default: the job's scenes.")
    ] = None,
    as_json: Annotated[bool, typer.Option("--json", help="Print JSON instead of tables.")] = False,
) -> None:
    """Tell how the value of one pixel came about, step by step, as the map has it.

    Counts, radiance, brightness temperature, emissivity and where it is from, the air, surface temperature,
    fluxes, flags by name, and the 1-sigma uncertainty by cause. Nothing is written.
    """
    from groundglow.run.inspection.explain_command import explain_job  # noqa: PLC0415  (as above)

    raise typer.Exit(explain_job(job, x, y, lonlat=lonlat, points=points, scene=scene, as_json=as_json))


def job_schema() -> None:
    """Print the JSON Schema of the job file, for editors that check and complete TOML."""
    from groundglow.run.config.schema import job_schema as schema  # noqa: PLC0415  (as above)

    typer.echo(schema(), nl=False)


_STAGES: dict[str, Callable[..., None]] = {
    "radiance": radiance,
    "brightness-temperature": brightness_temperature,
    "emissivity": emissivity,
    "atmosphere": atmosphere,
    "surface-temperature": surface_temperature,
    "flux": flux,
    "layers": layers,
}
