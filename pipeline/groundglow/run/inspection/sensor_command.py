"""What ``groundglow sensors`` prints: the sensors there are, or one of them in numbers."""

from __future__ import annotations

import json
from dataclasses import asdict
from pathlib import Path

from groundglow.run.batch.table import aligned, number
from groundglow.scene.sensor import load_sensor, sensor_names
from groundglow.scene.sensor_report import plot_sensor, report_of_sensor


def list_sensors(*, as_json: bool) -> None:
    """Print name, bands and title of every shipped sensor."""
    sensors = [load_sensor(name) for name in sensor_names()]
    if as_json:
        print(
            json.dumps(
                [{"name": s.name, "title": s.title, "bands": list(s.bands)} for s in sensors], indent=2
            )
        )
        return
    rows = [["sensor", "thermal bands", "title"]]
    rows += [[sensor.name, ", ".join(sensor.bands), sensor.title] for sensor in sensors]
    print(aligned(rows))
    print("\nA sensor of your own is a TOML file; name its path in the scene file.")


def show_sensor(name: str, *, as_json: bool, plot: Path | None) -> None:
    """Print one sensor in numbers, and draw its responses if wanted.

    Raises
    ------
    ConfigError
        If there is no such sensor, or the plot cannot be drawn.
    """
    sensor = load_sensor(name, folder=Path.cwd())
    bands = report_of_sensor(sensor)
    if plot is not None:
        plot_sensor(sensor, plot)
    if as_json:
        described = {"name": sensor.name, "title": sensor.title, "native_footprint": sensor.native_footprint}
        print(json.dumps(described | {"bands": [asdict(band) for band in bands]}, indent=2))
        return
    print(f"{sensor.name}: {sensor.title}")
    print(f"source: {sensor.source}")
    if sensor.native_footprint is not None:
        print(f"native footprint: {sensor.native_footprint:g} m")
    rows = [
        [
            "band", "half maximum um", "effective um", "K1 fitted", "K2 fitted", "fit error K",
            "published less integrated K", "noise W m-2 sr-1 um-1",
        ]
    ]  # fmt: skip
    for band in bands:
        low, high = band.limits
        published = band.published_difference
        shown = "-" if published is None else f"{published[0]:+.3f} to {published[1]:+.3f}"
        k1, k2 = band.fitted_constants
        rows.append(
            [
                band.number, f"{low:.2f}-{high:.2f}", f"{band.effective_wavelength:.3f}", f"{k1:.3f}", f"{k2:.3f}",
                f"{band.fit_error:.3f}", shown, number(band.noise_radiance, 4),
            ]
        )  # fmt: skip
    print(aligned(rows))
    print("Temperatures from 250 K to 340 K; K1 in W m-2 sr-1 um-1, K2 in K.")
