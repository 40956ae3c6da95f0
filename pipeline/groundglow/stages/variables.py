"""What travels between stages: names, units and meanings, of the layers and of what lies between them."""

from __future__ import annotations

from types import MappingProxyType

from groundglow.errors import ConfigError
from groundglow.quantities import FLAGS, QUANTITIES, Quantity

RADIANCE_UNIT = "W m-2 sr-1 um-1"

_BETWEEN = (
    Quantity("counts", "1", "stored numbers of the sensor", None, (0.0, 4.3e9), 23),
    Quantity("elevation", "m", "ground height above sea level", "surface_altitude", (-500.0, 9000.0), 23),
    Quantity("view_zenith_angle", "degree", "zenith angle of the sensor seen from the surface",
             "sensor_zenith_angle", (0.0, 90.0), 23),
    Quantity("column_water_vapour", "kg m-2", "column water vapour of the air",
             "atmosphere_mass_content_of_water_vapor", (0.0, 100.0), 23),
    Quantity("emissivity_uncertainty", "1", "standard uncertainty of the surface emissivity in the thermal band",
             None, (0.0, 1.0), 23),
    Quantity("broadband_emissivity_shared_uncertainty", "1",
             "part of the broadband emissivity's error that moves with the thermal band's (signed, one sigma)",
             None, (-1.0, 1.0), 23),
    Quantity("broadband_emissivity_own_uncertainty", "1",
             "part of the broadband emissivity's standard uncertainty that its own rule adds", None, (0.0, 1.0), 23),
    Quantity("transmitted_sky_radiance", RADIANCE_UNIT,
             "hemispheric sky radiance seen through the air by way of a mirror on the ground", None, (0.0, 1.0e4), 23),
    Quantity("surface_temperature_emissivity_effect", "K",
             "change of the surface temperature for an emissivity too high by one standard uncertainty (signed)",
             None, (-1.0e3, 1.0e3), 23),
)  # fmt: skip

# The air's terms, each with its change for one standard uncertainty of every cause of error.
AIR_TERMS = ("transmittance", "path_radiance", "transmitted_sky_radiance", "sky_flux")
_CHANGES = tuple(
    Quantity(f"{name}_change", found.unit, f"change of the {found.long_name} for one standard uncertainty of a cause",
             None, (-1.0e3, 1.0e3), 23)
    for name in AIR_TERMS
    for found in [QUANTITIES[name] if name in QUANTITIES else next(one for one in _BETWEEN if one.name == name)]
)  # fmt: skip

VARIABLES = MappingProxyType({**QUANTITIES, **{found.name: found for found in (*_BETWEEN, *_CHANGES)}})

# Coordinates beside the pixels.
BAND = "band"
CAUSE = "cause"
WEIGHTING = "weighting_temperature"


def variable(name: str) -> Quantity:
    """What a variable of that name is.

    Raises
    ------
    ConfigError
        If there is none.
    """
    try:
        return VARIABLES[name]
    except KeyError:
        raise ConfigError(
            f"there is no variable {name!r}", remedy=f"Choose from: {', '.join(sorted(VARIABLES))}"
        ) from None


def attributes(name: str, origin: str = "") -> dict[str, object]:
    """CF attributes of a variable, and the words for where it came from."""
    described = variable(name)
    found: dict[str, object] = {"units": described.unit, "long_name": described.long_name}
    if described.standard_name:
        found["standard_name"] = described.standard_name
    if name == "quality":
        found["flag_masks"] = [flag.mask for flag in FLAGS]
        found["flag_meanings"] = " ".join(flag.name for flag in FLAGS)
    elif name not in ("elevation", "view_zenith_angle", "column_water_vapour"):
        found["ancillary_variables"] = "quality"
    if origin:
        found["origin"] = origin
    return found
