"""How long the air takes: one profile, a whole scene's nodes, and the interpolation at each pixel.

Run it on a quiet machine::

    python benchmarks/atmosphere_speed.py

Every figure is the best of several repeats on one core, beside its limit. The copy of an array of the
size of the interpolation's output is the baseline that the machine sets.
"""

from __future__ import annotations

import time
from collections.abc import Callable

import numpy as np

from groundglow.atmosphere.interpolate import interpolate, pack
from groundglow.atmosphere.model_atmospheres import model_atmosphere
from groundglow.atmosphere.perturbation import scaled_to_column
from groundglow.atmosphere.solve import AirSettings, PlacedProfile, View, solve_atmosphere
from groundglow.atmosphere.source_uncertainty import source_uncertainty
from groundglow.atmosphere.view import secant
from groundglow.physics.spectral_response import top_hat

TWO_BANDS = {"10": top_hat(10.60, 11.19), "11": top_hat(11.50, 12.51)}
SUMMER = model_atmosphere("midlatitude_summer")
# Rows and columns that walk the chain together in a run.
ROWS, COLUMNS = 64, 512


def best(work: Callable[[], object], repeats: int = 60) -> float:
    """Shortest of several runs. [s]."""
    work()
    found = []
    for _ in range(repeats):
        start = time.perf_counter()
        work()
        found.append(time.perf_counter() - start)
    return min(found)


def report(what: str, value: float, unit: str, limit: float | None = None) -> None:
    bound = "" if limit is None else f"  (limit {limit:g})"
    print(f"{what:<68} {value:8.2f} {unit}{bound}")


def profiles() -> None:
    flat = View((0.0, 0.0), (0.0, 0.0))
    one = [PlacedProfile(SUMMER)]
    for what, settings, limit in (
        ("one profile, two bands", AirSettings(sky_flux=False), 10.0),
        ("one profile, two bands, broadband flux", AirSettings(), 30.0),
        (
            "the same with all causes of uncertainty",
            AirSettings(uncertainty=source_uncertainty("analysis")),
            None,
        ),
    ):
        seconds = best(lambda settings=settings: solve_atmosphere(one, TWO_BANDS, flat, settings))
        report(what, 1e3 * seconds, "ms", limit)


def scene() -> None:
    places = [
        PlacedProfile(scaled_to_column(SUMMER, 22.0 + x + 2.0 * y), 30e3 * x, 30e3 * y)
        for x in range(3)
        for y in range(3)
    ]
    view = View((100.0, 900.0), (0.0, 7.5))
    settings = AirSettings(uncertainty=source_uncertainty("analysis"))
    nodes = solve_atmosphere(places, TWO_BANDS, view, settings)["10"].terms.sky_radiance.size
    seconds = best(lambda: solve_atmosphere(places, TWO_BANDS, view, settings), 5)
    report(f"a scene of {nodes} nodes of place and height, flux and causes", seconds, "s", 0.5)


def pixels() -> None:
    random = np.random.default_rng(1)
    rough = random.uniform(100.0, 900.0, (ROWS, COLUMNS)).astype(np.float32)
    angle = random.uniform(0.0, 7.5, (ROWS, COLUMNS)).astype(np.float32)
    view = View((100.0, 900.0), (0.0, 7.5))
    settings = AirSettings(uncertainty=source_uncertainty("analysis"))
    stack = pack(solve_atmosphere([PlacedProfile(SUMMER)], TWO_BANDS, view, settings)["10"])
    x, y = np.zeros(COLUMNS), np.zeros(ROWS)
    slant = secant(angle)
    out = interpolate(stack, x, y, rough, slant)
    other = out.copy()
    each = 1e9 / (ROWS * COLUMNS)
    report(
        f"copying {stack.fields} fields of a strip", each * best(lambda: np.copyto(other, out)), "ns/pixel"
    )
    report("secants of a raster of angles", each * best(lambda: secant(angle, out=slant)), "ns/pixel")
    for what, height, view_secant in (
        ("interpolating them: rasters of height and angle", rough, slant),
        ("interpolating them: raster of height, one angle", rough, 1.004),
    ):
        seconds = best(lambda h=height, s=view_secant: interpolate(stack, x, y, h, s, out), 40)
        report(what, each * seconds, "ns/pixel", 10.0)


def main() -> None:
    profiles()
    scene()
    pixels()


if __name__ == "__main__":
    main()
