"""Kinds of ground and their emissivity, whatever table they came from."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from groundglow.errors import ConfigError, DomainError
from groundglow.physics.spectral_response import SpectralResponse

# How far beyond its outermost interval a class's emissivity is still taken as constant. [um]
_REACH = 1.5


@dataclass(frozen=True)
class Published:
    """One emissivity with where it comes from.

    Attributes
    ----------
    value : float
        Above 0, at most 1.
    uncertainty : float
        Standard uncertainty, 0 to 0.5.
    interval : tuple of float or None
        Wavelengths it holds for; None for the broadband value. [um]
    range : tuple of float or None
        Range of the source's values.
    source : str
    """

    value: float
    uncertainty: float
    interval: tuple[float, float] | None
    range: tuple[float, float] | None
    source: str


@dataclass(frozen=True)
class SurfaceClass:
    """One kind of ground.

    Attributes
    ----------
    name, title : str
    code : int
        Value in a class raster.
    intervals : tuple of Published
        By increasing wavelength, not overlapping.
    broadband : Published or None
        Near-nadir broadband emissivity.
    broadband_correlation : float
        Correlation of the errors of a band's and the broadband emissivity, -1 to 1.
    """

    name: str
    title: str
    code: int
    intervals: tuple[Published, ...]
    broadband: Published | None
    broadband_correlation: float

    def in_band(self, response: SpectralResponse) -> tuple[float, float]:
        """Emissivity in a band and its standard uncertainty.

        Constant within the intervals, linear between them, averaged over the response; errors of
        neighbouring intervals are taken as one error.

        Parameters
        ----------
        response : SpectralResponse
            Of the band.

        Returns
        -------
        value, uncertainty : float

        Raises
        ------
        DomainError
            If the band lies more than 1.5 um beyond the class's intervals.
        """
        nodes = [edge for part in self.intervals if part.interval for edge in part.interval]
        low, high = response.limits
        if low < nodes[0] - _REACH or high > nodes[-1] + _REACH:
            raise DomainError(
                f"the class {self.name} has emissivities from {nodes[0]:g} to {nodes[-1]:g} um, "
                f"the band needs {low:g} to {high:g} um",
                remedy="Give a class table that covers the band, or another source of emissivity",
            )
        wavelength = response.quadrature_wavelength
        values = np.repeat([part.value for part in self.intervals], 2)
        uncertainties = np.repeat([part.uncertainty for part in self.intervals], 2)
        return (
            float(response.average(np.interp(wavelength, nodes, values))),
            float(response.average(np.interp(wavelength, nodes, uncertainties))),
        )


@dataclass(frozen=True)
class ClassTable:
    """Kinds of ground by name.

    Attributes
    ----------
    classes : mapping of str to SurfaceClass
        In the table's order.
    """

    classes: Mapping[str, SurfaceClass]

    def named(self, name: str) -> SurfaceClass:
        """The class of that name.

        Parameters
        ----------
        name : str
            As in the table.

        Returns
        -------
        SurfaceClass

        Raises
        ------
        ConfigError
            If there is none; the message lists all.
        """
        try:
            return self.classes[name]
        except KeyError:
            raise ConfigError(
                f"the class table has no class {name!r}", remedy=f"Choose from: {', '.join(self.classes)}"
            ) from None

    def by_code(self, codes: Mapping[int, str] | None = None) -> dict[int, SurfaceClass]:
        """Classes by the values of a class raster.

        Parameters
        ----------
        codes : mapping of int to str, optional
            A raster's own codes with the names of classes; the table's codes by default.

        Returns
        -------
        dict of int to SurfaceClass

        Raises
        ------
        ConfigError
            If a name is not in the table.
        """
        if codes is None:
            return {entry.code: entry for entry in self.classes.values()}
        return {int(code): self.named(name) for code, name in codes.items()}
