"""A picture of the day's air: the profile, the transmittance of each gas, and the radiances."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np

from groundglow.atmosphere.humidity import dew_point, vapour_pressure_of_ppmv
from groundglow.errors import ConfigError, OutputError
from groundglow.physics.constants import ZERO_CELSIUS
from groundglow.run.inspection.air_look import AirLook

_HIGHEST = 16.0  # km
_RESOLUTION = 130  # dots an inch


def draw_air(look: AirLook, path: Path) -> None:
    """Draw a look at the air.

    Parameters
    ----------
    look : AirLook
    path : Path
        Ending in a format that matplotlib writes, such as .png or .pdf.

    Raises
    ------
    ConfigError
        If matplotlib is not installed, or does not know the format.
    OutputError
        If the file cannot be written.
    """
    try:
        from matplotlib.backends.backend_agg import FigureCanvasAgg  # noqa: PLC0415  (an extra)
        from matplotlib.figure import Figure  # noqa: PLC0415  (as above)
    except ImportError as error:
        raise ConfigError(
            "plots need matplotlib, which is not installed", where="--plot", remedy="Install groundglow[plot]"
        ) from error
    figure = Figure(figsize=(12.0, 7.5), layout="constrained")
    known = FigureCanvasAgg(figure).get_supported_filetypes()
    if path.suffix.lower().removeprefix(".") not in known:
        raise ConfigError(
            f"{path.name!r} ends in no known picture format", where="--plot", remedy="Let it end in .png"
        )
    panels = figure.subplot_mosaic(
        [["profile", "transmittance"], ["profile", "radiance"]], width_ratios=[1, 2]
    )
    _profile(panels["profile"], look)
    _transmittance(panels["transmittance"], look)
    _radiance(panels["radiance"], look)
    figure.suptitle(
        f"{look.scene.name}: {look.placed.account['source']}, "
        f"{look.air.column_water_vapour:.1f} kg m-2 of water above {look.ground:.0f} m"
    )
    try:
        figure.savefig(path, dpi=_RESOLUTION)
    except OSError as error:
        raise OutputError(f"cannot be written ({error.strerror})", where=str(path)) from error


def _profile(panel: Any, look: AirLook) -> None:
    profile = look.profile
    shown = profile.height <= 1e3 * _HIGHEST
    height = profile.height[shown] / 1e3
    moisture = dew_point(vapour_pressure_of_ppmv(profile.water_vapour, profile.pressure))[shown]
    panel.plot(profile.temperature[shown] - ZERO_CELSIUS, height, "C3-", label="temperature")
    panel.plot(np.maximum(moisture - ZERO_CELSIUS, -100.0), height, "C0-", label="dew point")
    panel.axhline(look.ground / 1e3, color="0.4", linewidth=0.8)
    panel.set(
        xlabel="degC", ylabel="height above sea level, km", ylim=(min(0.0, look.ground / 1e3), _HIGHEST)
    )
    panel.legend(frameon=False)


def _transmittance(panel: Any, look: AirLook) -> None:
    for band in look.air.bands.values():
        wavelength = 1e4 / band.wavenumber
        for i, (gas, values) in enumerate(band.gas_transmittance.items()):
            panel.plot(wavelength, values, f"C{i}-", linewidth=0.8, label=gas.replace("_", " "))
        panel.plot(wavelength, band.transmittance, "k-", linewidth=1.6, label="all together")
    panel.set(ylabel="transmittance", ylim=(0.0, 1.02))
    _legend_once(panel)


def _radiance(panel: Any, look: AirLook) -> None:
    for band in look.air.bands.values():
        wavelength = 1e4 / band.wavenumber
        panel.plot(wavelength, band.path_radiance, "C1-", label="path radiance")
        panel.plot(wavelength, band.sky_radiance, "C4-", label="hemispheric sky radiance")
    panel.set(xlabel="wavelength, um", ylabel="W m-2 sr-1 um-1", ylim=(0.0, None))
    _legend_once(panel)


def _legend_once(panel: Any) -> None:
    """Every label once, although each band draws its lines."""
    handles, labels = panel.get_legend_handles_labels()
    first = dict(reversed(list(zip(labels, handles, strict=True))))
    panel.legend(list(first.values())[::-1], list(first)[::-1], frameon=False, fontsize="small", ncols=2)
