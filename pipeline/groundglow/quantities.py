"""Names, units and valid ranges of everything Groundglow computes or writes.

One quantity has one name: the function, the Dataset variable, the layer and the log field. CF
standard names are from the CF standard name table, version 83; a quantity without one carries a
plain ``long_name`` only.
"""

from __future__ import annotations

from dataclasses import dataclass
from types import MappingProxyType

from groundglow.errors import ConfigError


@dataclass(frozen=True)
class Quantity:
    """What one named quantity is and how its final layer is stored.

    Attributes
    ----------
    name : str
        The one name of the quantity.
    unit : str
        Unit in CF notation.
    long_name : str
        For a reader.
    standard_name : str or None
        CF standard name, where there is one.
    valid_range : tuple of float
        Values outside it are refused or flagged.
    kept_bits : int
        Mantissa bits that the final layer keeps (of 23); the rest is noise and costs space.
    """

    name: str
    unit: str
    long_name: str
    standard_name: str | None
    valid_range: tuple[float, float]
    kept_bits: int


_ALL = (
    Quantity("radiance", "W m-2 sr-1 um-1", "spectral radiance at the sensor", None, (0.0, 1.0e5), 15),
    Quantity(
        "brightness_temperature",
        "K",
        "brightness temperature at the sensor",
        "brightness_temperature",
        (150.0, 1500.0),
        15,
    ),
    Quantity("emissivity", "1", "surface emissivity in the thermal band", None, (0.0, 1.0), 12),
    Quantity(
        "broadband_emissivity",
        "1",
        "broadband longwave surface emissivity",
        "surface_longwave_emissivity",
        (0.0, 1.0),
        12,
    ),
    Quantity(
        "transmittance", "1", "atmospheric transmittance from the surface to the sensor", None, (0.0, 1.0), 12
    ),
    Quantity(
        "path_radiance",
        "W m-2 sr-1 um-1",
        "radiance emitted towards the sensor by the air",
        None,
        (0.0, 1.0e4),
        13,
    ),
    Quantity(
        "sky_radiance", "W m-2 sr-1 um-1", "hemispheric sky radiance at the surface", None, (0.0, 1.0e4), 13
    ),
    Quantity(
        "surface_temperature",
        "K",
        "radiometric surface (skin) temperature",
        "surface_temperature",
        (150.0, 1500.0),
        15,
    ),
    Quantity(
        "surface_temperature_uncertainty",
        "K",
        "standard uncertainty of the surface temperature",
        "surface_temperature standard_error",
        (0.0, 1.0e3),
        9,
    ),
    Quantity(
        "surface_temperature_uncertainty_pixel",
        "K",
        "part of the surface temperature uncertainty that differs from pixel to pixel",
        None,
        (0.0, 1.0e3),
        9,
    ),
    Quantity(
        "surface_temperature_uncertainty_class",
        "K",
        "part of the surface temperature uncertainty shared within a surface class",
        None,
        (0.0, 1.0e3),
        9,
    ),
    Quantity(
        "surface_temperature_uncertainty_scene",
        "K",
        "part of the surface temperature uncertainty shared by the whole scene",
        None,
        (0.0, 1.0e3),
        9,
    ),
    Quantity("emitted_flux", "W m-2", "longwave flux emitted by the surface", None, (0.0, 3.0e5), 13),
    Quantity(
        "emitted_flux_uncertainty", "W m-2", "standard uncertainty of the emitted flux", None, (0.0, 1.0e5), 9
    ),
    Quantity(
        "sky_flux",
        "W m-2",
        "downwelling longwave flux at the surface, clear sky",
        "surface_downwelling_longwave_flux_in_air_assuming_clear_sky",
        (0.0, 1.0e3),
        13,
    ),
    Quantity(
        "leaving_flux",
        "W m-2",
        "longwave flux leaving the surface (emitted and reflected), clear sky",
        "surface_upwelling_longwave_flux_in_air_assuming_clear_sky",
        (0.0, 3.0e5),
        13,
    ),
    Quantity(
        "net_longwave_flux",
        "W m-2",
        "net longwave flux at the surface, downward positive, clear sky",
        "surface_net_downward_longwave_flux_assuming_clear_sky",
        (-3.0e5, 1.0e3),
        13,
    ),
    Quantity("quality", "1", "quality flags", "quality_flag", (0, 65535), 23),
)

QUANTITIES = MappingProxyType({quantity.name: quantity for quantity in _ALL})


def quantity(name: str) -> Quantity:
    """The quantity of that name.

    Raises
    ------
    ConfigError
        If there is none; the message lists all names.
    """
    try:
        return QUANTITIES[name]
    except KeyError:
        raise ConfigError(
            f"there is no quantity {name!r}", remedy=f"Choose from: {', '.join(sorted(QUANTITIES))}"
        ) from None


@dataclass(frozen=True)
class Flag:
    """One bit of the quality layer.

    Attributes
    ----------
    name : str
        Word used in job files, CF ``flag_meanings`` and reports.
    mask : int
        The bit.
    title : str
        For legends.
    severity : int
        Rank; where several bits are set, the gravest names the combination.
    """

    name: str
    mask: int
    title: str
    severity: int


FLAGS = (
    Flag("no_data", 1 << 0, "no data", 16),
    Flag("saturated", 1 << 1, "sensor saturated", 15),
    Flag("cloud", 1 << 2, "cloud", 13),
    Flag("thin_cloud", 1 << 3, "thin cloud", 12),
    Flag("near_cloud", 1 << 4, "near a cloud", 10),
    Flag("shadow", 1 << 5, "cloud shadow", 9),
    Flag("water", 1 << 6, "water", 1),
    Flag("snow", 1 << 7, "snow or ice", 2),
    Flag("bare_metal", 1 << 8, "bare metal (emissivity below 0.7)", 11),
    Flag("emissivity_assumed", 1 << 9, "emissivity assumed", 4),
    Flag("broadband_emissivity_assumed", 1 << 10, "broadband emissivity assumed", 3),
    Flag("air_nearly_opaque", 1 << 11, "air nearly opaque (transmittance below 0.4)", 8),
    Flag("atmosphere_outside_validity", 1 << 12, "atmosphere outside the method's validity", 7),
    Flag("outside_calibrated_range", 1 << 13, "outside the sensor's calibrated range", 6),
    Flag("impossible", 1 << 14, "physically impossible result", 14),
    Flag("interpolated", 1 << 15, "interpolated from another grid", 5),
)

FLAG = MappingProxyType({flag.name: flag for flag in FLAGS})
DEFAULT_MASK = ("no_data", "saturated", "impossible", "cloud")


def gravest(value: int) -> Flag | None:
    """The most severe flag set in a quality value, or None where none is set."""
    found = [flag for flag in FLAGS if value & flag.mask]
    return max(found, key=lambda flag: flag.severity) if found else None
