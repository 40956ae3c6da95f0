"""The command line: parse, call ``run``, print, exit code. Nothing else lives here.

Exit codes: 0 all done; 1 a defect of Groundglow; 2 the command, job or scene file cannot be followed as
written; 3 nothing could be made; 4 some scenes failed; 75 try again later; 130 interrupted.
"""

from __future__ import annotations

import sys
from pathlib import Path
from typing import Annotated

import typer

from groundglow import __version__, cli_stages
from groundglow.errors import GroundglowError

EXIT_CODES = """\
Exit codes: 0 all done (a fully clouded scene included); 2 the command, job or scene file cannot be followed as written;
3 nothing could be made; 4 some scenes failed; 75 the output folder is in use, try again later; 130 interrupted.
"""

app = typer.Typer(
    name="groundglow",
    help="Calibrated maps of surface temperature and emitted flux from thermal-infrared rasters, unattended.",
    epilog=EXIT_CODES,
    rich_markup_mode=None,
    pretty_exceptions_enable=False,
    add_completion=False,
    no_args_is_help=True,
)

JobFile = Annotated[
    Path, typer.Argument(metavar="JOB", help="Job file (TOML); configs/ holds commented examples.")
]
Output = Annotated[
    str | None,
    typer.Option(
        metavar="FOLDER", help="Write to this folder (or s3:// address) instead of the job's output."
    ),
]
Quiet = Annotated[bool, typer.Option("--quiet", "-q", help="No progress and no table; errors still show.")]
Json = Annotated[bool, typer.Option("--json", help="Print the summary as JSON on standard output.")]


def _show_version(value: bool) -> None:
    if value:
        typer.echo(__version__)
        raise typer.Exit


@app.callback()
def common(
    version: Annotated[
        bool,
        typer.Option("--version", callback=_show_version, is_eager=True, help="Show the version and leave."),
    ] = False,
) -> None:
    """Calibrated maps of surface temperature and emitted flux from thermal-infrared rasters, unattended."""


@app.command(epilog=EXIT_CODES)
def run(
    job: JobFile,
    output: Output = None,
    workers: Annotated[
        int | None, typer.Option(min=1, help="Threads; default: the job's, else all cores.")
    ] = None,
    scheduler: Annotated[
        str, typer.Option(help="'threads', 'processes[:N]', or tcp://host:port of a Dask scheduler.")
    ] = "threads",
    force: Annotated[bool, typer.Option("--force", help="Make again what is up to date.")] = False,
    quiet: Quiet = False,
    as_json: Json = False,
) -> None:
    """Run a job: read its scenes, write the layers, print what came out.

    Each scene becomes one folder of cloud-optimised GeoTIFF layers with a STAC Item, written last. A folder
    appears only when it is complete; a run that is stopped leaves no half-written layer. Scenes whose outputs
    are up to date are skipped, and one that fails does not stop the others. The report and the log of a run
    are in the folder .groundglow of the output folder.
    """
    from groundglow.run.batch.commands import run_job  # noqa: PLC0415  (help must not wait for the libraries)

    code = run_job(
        job,
        output=output,
        workers=workers,
        scheduler=scheduler,
        quiet=quiet,
        as_json=as_json,
        force=force,
    )
    raise typer.Exit(code)


@app.command(epilog=EXIT_CODES)
def plan(
    job: JobFile,
    output: Output = None,
    detailed: Annotated[
        int, typer.Option(min=0, help="Open so many of the scenes to be made; count the others.")
    ] = 100,
    as_json: Json = False,
) -> None:
    """Show what a run would do and why: scenes, grids, layers, estimated time, memory and disk space.

    Reads descriptions and headers only, and writes nothing.
    """
    from groundglow.run.batch.commands import plan_job  # noqa: PLC0415  (help must not wait for the libraries)

    raise typer.Exit(plan_job(job, output=output, as_json=as_json, detailed=detailed))


@app.command(epilog=EXIT_CODES)
def air(
    job: JobFile,
    band: Annotated[
        str | None, typer.Option(help="Number of a thermal band; default: all the scene has.")
    ] = None,
    height: Annotated[
        float | None,
        typer.Option(min=-500, max=9000, help="Ground above sea level [m]; default: the scene's middle."),
    ] = None,
    angle: Annotated[
        float | None,
        typer.Option(min=0, max=80, help="View zenith angle at the surface [deg]; default: the scene's."),
    ] = None,
    plot: Annotated[
        Path | None, typer.Option(metavar="FILE", help="Draw the profile and its spectra (.png).")
    ] = None,
    spectrum: Annotated[Path | None, typer.Option(metavar="FILE", help="Write the spectra as CSV.")] = None,
    as_json: Json = False,
) -> None:
    """Solve the air of a job's first scene at one height and angle, and show it.

    Water, transmittance and radiances of each band, what each gas takes, the sky flux beside two published
    formulas, and what the stated uncertainties change. No layer is made.
    """
    from groundglow.run.inspection.air_command import show_air  # noqa: PLC0415  (help must not wait for the libraries)

    show_air(job, band=band, height=height, angle=angle, as_json=as_json, plot=plot, spectrum=spectrum)


@app.command(epilog=EXIT_CODES)
def catalogue(
    output: Annotated[
        str, typer.Argument(metavar="OUTPUT", help="Output folder (or s3:// address) of a job.")
    ],
) -> None:
    """Make the STAC collection of an output folder anew from the scenes in it.

    Every run keeps the collection up to date; this is for folders that were moved in, out or deleted.
    """
    from groundglow.run.batch.commands import rebuild_catalogue  # noqa: PLC0415  (help must not wait for the libraries)

    raise typer.Exit(rebuild_catalogue(output))


@app.command(epilog=EXIT_CODES)
def sensors(
    name: Annotated[
        str | None, typer.Argument(metavar="SENSOR", help="A shipped sensor, or the path of a sensor file.")
    ] = None,
    plot: Annotated[
        Path | None, typer.Option(metavar="FILE", help="Draw the responses (.png, .svg).")
    ] = None,
    as_json: Json = False,
) -> None:
    """List the sensors there are, or show one in numbers.

    Effective wavelength, the two constants fitted to the spectral response and their error, and how the published
    constants differ from the integrated response.
    """
    from groundglow.run.inspection.sensor_command import list_sensors, show_sensor  # noqa: PLC0415  (see above)

    if name is None:
        list_sensors(as_json=as_json)
    else:
        show_sensor(name, as_json=as_json, plot=plot)


cli_stages.register(app)


def main() -> None:
    """Entry point: errors meant for the user become one line on standard error and an exit code."""
    try:
        app()
    except GroundglowError as error:
        typer.echo(f"groundglow: {error}", err=True)
        sys.exit(error.exit_code)
    except KeyboardInterrupt:
        typer.echo("groundglow: interrupted; nothing half-written was left", err=True)
        sys.exit(130)


if __name__ == "__main__":
    main()
