"""From profiles to the atmosphere grid of every band: the whole air of a scene.

For each place and ground height the column is solved for all bands and angles at once, and again with
more water, less water and warmer air: the differences are the causes of uncertainty. The nodes of
height and angle are chosen so that interpolating between them costs less than 0.02 K.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from groundglow.atmosphere.absorption import DEFAULT_SET
from groundglow.atmosphere.causes import causes_of_uncertainty
from groundglow.atmosphere.composition import Composition, composed
from groundglow.atmosphere.condensation import condensed
from groundglow.atmosphere.grid import AtmosphereGrid
from groundglow.atmosphere.node_solver import Bands, FluxPlan, NodeSolver, Solved
from groundglow.atmosphere.nodes import height_nodes, secant_nodes
from groundglow.atmosphere.profile import Profile
from groundglow.atmosphere.sensor_height import SPACE, SensorHeight
from groundglow.atmosphere.source_uncertainty import SourceUncertainty
from groundglow.atmosphere.view import LARGEST_ZENITH_ANGLE
from groundglow.errors import DomainError
from groundglow.physics.planck import radiance_slope, spectral_radiance
from groundglow.physics.spectral_response import SpectralResponse

Float = NDArray[np.float64]

# Interpolation may cost this much along the two axes; angles are cheaper than heights.
HEIGHT_TOLERANCE = 0.014  # K
ANGLE_TOLERANCE = 0.005  # K
# Surface temperatures of wide bands, relative to the air at the ground.
_SURFACE_OFFSETS = (-25.0, 5.0, 45.0)  # K
_TEST_EMISSIVITY = 0.95


@dataclass(frozen=True)
class AirSettings:
    """How the air is solved.

    Attributes
    ----------
    absorption : str
        Absorption set, ``updated`` or ``lowtran7``.
    composition : Composition
        Amounts of the well-mixed gases; whether the minor ones take part.
    sky_flux : bool
        Whether the broadband sky flux is solved too; unknown (NaN) if not.
    uncertainty : SourceUncertainty or None
        Of the profile; None leaves all causes out, the absorption model's included.
    """

    absorption: str = DEFAULT_SET
    composition: Composition = field(default_factory=Composition)
    sky_flux: bool = True
    uncertainty: SourceUncertainty | None = None


@dataclass(frozen=True)
class View:
    """Ranges over which the scene's pixels are seen.

    Attributes
    ----------
    ground_height : tuple of float
        Lowest and highest ground, above sea level. [m]
    zenith_angle : tuple of float
        Smallest and largest view zenith angle at the surface. [deg]
    sensor : SensorHeight
        In space, above ground or above sea level.
    """

    ground_height: tuple[float, float]
    zenith_angle: tuple[float, float]
    sensor: SensorHeight = SPACE

    def __post_init__(self) -> None:
        low, high = self.ground_height
        if not (np.isfinite(low) and np.isfinite(high) and -500.0 <= low <= high <= 9000.0):
            raise DomainError(f"ground heights of {low} to {high} m are none of the Earth's, or not in order")
        small, large = self.zenith_angle
        if not 0.0 <= small <= large <= LARGEST_ZENITH_ANGLE:
            raise DomainError(
                f"view zenith angles of {small} to {large} degrees do not lie within 0 to "
                f"{LARGEST_ZENITH_ANGLE:g} in order"
            )
        self.sensor.above_sea(high)


@dataclass(frozen=True)
class PlacedProfile:
    """A profile and where on the map it holds, in the scene's coordinates."""

    profile: Profile
    x: float = 0.0
    y: float = 0.0


def solve_atmosphere(
    profiles: Sequence[PlacedProfile],
    responses: Mapping[str, SpectralResponse],
    view: View,
    settings: AirSettings,
) -> dict[str, AtmosphereGrid]:
    """The air of a scene in each band.

    Parameters
    ----------
    profiles : sequence of PlacedProfile
        One that holds everywhere, or one for each crossing of some map x and some map y.
    responses : mapping of str to SpectralResponse
        Of the bands.
    view : View
        Heights, angles and sensor.
    settings : AirSettings
        How to solve.

    Returns
    -------
    dict of str to AtmosphereGrid
        One for each band, with the causes ``water_vapour``, ``air_temperature`` and
        ``absorption_model`` if an uncertainty is stated.

    Raises
    ------
    DomainError
        If the places do not form a grid, a profile begins too far above the ground, or a band
        reaches beyond the tables.
    """
    x, y, ordered = _placed(profiles)
    bands = Bands.of(responses, settings.absorption)
    airs = [condensed(composed(profile, settings.composition)) for profile in ordered]
    moistest = airs[int(np.argmax([air.column_water_vapour for air in airs]))]
    temperatures = _surface_temperatures(airs, view.ground_height[0])
    low, steepest = view.ground_height[0], 1.0 / np.cos(np.radians(view.zenith_angle[1]))
    bands = bands.weighted_for(moistest, low, float(steepest), view.sensor.above_sea(low), temperatures)
    height, secant = _nodes(moistest, bands, view, temperatures)
    solver = NodeSolver(bands, height, secant, view.sensor, temperatures, (y.size, x.size))
    flux = FluxPlan.scene(settings.absorption, height.size) if settings.sky_flux else None
    base = solver.solve(airs, flux)
    causes = {}
    if settings.uncertainty is not None:
        causes = causes_of_uncertainty(
            solver, airs, base, settings.uncertainty, settings.absorption, sky_flux=settings.sky_flux
        )
    angle = np.degrees(np.arccos(1.0 / secant))
    return {
        name: AtmosphereGrid(
            x=x,
            y=y,
            height=height,
            view_zenith_angle=angle,
            surface_temperature=bands.temperatures(i, temperatures),
            terms=base.terms[i],
            causes={cause: terms[i] for cause, terms in causes.items()},
        )
        for i, name in enumerate(bands.names)
    }


def _placed(profiles: Sequence[PlacedProfile]) -> tuple[Float, Float, list[Profile]]:
    """Axes of the places, and the profiles in the order of (y, x)."""
    x = np.unique([placed.x for placed in profiles])
    y = np.unique([placed.y for placed in profiles])
    found = {(placed.y, placed.x): placed.profile for placed in profiles}
    wanted = [(b, a) for b in y for a in x]
    if not profiles or len(found) != len(profiles) or any(place not in found for place in wanted):
        raise DomainError(
            f"{len(profiles)} profiles do not fill a grid of {x.size} map x by {y.size} map y",
            remedy="Give one profile, or one at each crossing of a grid.",
        )
    return x, y, [found[place] for place in wanted]


def _surface_temperatures(airs: Sequence[Profile], ground: float) -> Float:
    near = float(
        np.mean([air.at(np.array([max(ground, float(air.height[0]))])).temperature[0] for air in airs])
    )
    return np.asarray(np.round(near) + np.array(_SURFACE_OFFSETS))


def _nodes(air: Profile, bands: Bands, view: View, temperatures: Float) -> tuple[Float, Float]:
    """Heights and secants of the nodes, thinned on the moistest profile."""
    first, last = (float(1.0 / np.cos(np.radians(angle))) for angle in view.zenith_angle)
    ends = np.array([first, last] if last > first else [first])

    def at_height(height: float) -> tuple[Float, Float]:
        solver = NodeSolver(bands, np.array([height]), ends, view.sensor, temperatures, (1, 1))
        values, scale = _test_radiances(solver.solve([air], None), solver)
        return values.ravel(), scale.ravel()

    heights = height_nodes(*view.ground_height, at_height, HEIGHT_TOLERANCE)

    def at_secant(secant: float) -> tuple[Float, Float]:
        solver = NodeSolver(bands, heights[:1], np.array([secant]), view.sensor, temperatures, (1, 1))
        values, scale = _test_radiances(solver.solve([air], None), solver)
        return values[0], scale[0]

    return heights, secant_nodes(first, last, at_secant, ANGLE_TOLERANCE)


def _test_radiances(solved: Solved, solver: NodeSolver) -> tuple[Float, Float]:
    """Radiances at the sensor of test surfaces, and kelvin per radiance, both (angles, cases)."""
    values, scales = [], []
    for b, terms in enumerate(solved.terms):
        wavelength = solver.bands.weights[b].effective_wavelength
        for k, t in enumerate(terms.transmittance[:, 0, 0, 0]):
            temperature = float(solver.bands.temperatures(b, solver.temperatures)[k])
            reflected = (1.0 - _TEST_EMISSIVITY) * terms.transmitted_sky_radiance[0, 0, 0]
            emitted = _TEST_EMISSIVITY * t * spectral_radiance(wavelength, temperature)
            values.append(emitted + reflected + terms.path_radiance[0, 0, 0])
            scales.append(1.0 / (_TEST_EMISSIVITY * t * radiance_slope(wavelength, temperature)))
    return np.array(values).T, np.array(scales).T
