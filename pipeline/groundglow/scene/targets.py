"""Correcting a band's radiance to targets of known temperature: uncooled cameras drift by degrees.

The correction is ``gain * observed + offset``. One target gives an offset; two or more give both,
unless they lie so close together that the gain would be a guess.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from groundglow.errors import DomainError
from groundglow.scene.model import RadianceAdjustment

# A gain less certain than this is not fitted; the offset alone is.
LARGEST_GAIN_UNCERTAINTY = 0.1


@dataclass(frozen=True)
class TargetRadiance:
    """One known target in one band.

    Attributes
    ----------
    name : str
        For the record: "lake", "reference panel".
    observed : float
        Radiance that the sensor reports, averaged over the target. [W m-2 sr-1 um-1]
    expected : float
        Radiance that its temperature, its emissivity and the air say must arrive. [W m-2 sr-1 um-1]
    uncertainty : float
        One standard uncertainty of expected less observed, above 0. [W m-2 sr-1 um-1]
    """

    name: str
    observed: float
    expected: float
    uncertainty: float


@dataclass(frozen=True)
class TargetFit:
    """The correction, and how well the targets agree with it.

    Attributes
    ----------
    gain, offset : float
        Corrected radiance = gain * observed + offset.
    covariance : array (2, 2)
        Of gain and offset.
    residuals : tuple of float
        Expected less corrected radiance of each target. [W m-2 sr-1 um-1]
    targets : tuple of TargetRadiance
    """

    gain: float
    offset: float
    covariance: NDArray[np.float64]
    residuals: tuple[float, ...]
    targets: tuple[TargetRadiance, ...]

    def uncertainty(self, radiance: float) -> float:
        """Standard uncertainty of the corrected radiance at an observed one. [W m-2 sr-1 um-1]"""
        direction = np.array([radiance, 1.0])
        return float(np.sqrt(direction @ self.covariance @ direction))

    def adjustment(self) -> RadianceAdjustment:
        """The correction as the scene carries it, its uncertainty taken amid the targets."""
        middle = float(np.mean([target.observed for target in self.targets]))
        names = ", ".join(
            f"{target.name} ({residual:+.4f})"
            for target, residual in zip(self.targets, self.residuals, strict=True)
        )
        return RadianceAdjustment(
            self.gain, self.offset, self.uncertainty(middle), f"fitted to known targets, residuals: {names}"
        )


def expected_radiance(
    blackbody_radiance: float,
    emissivity: float,
    *,
    transmittance: float = 1.0,
    path_radiance: float = 0.0,
    sky_radiance: float = 0.0,
) -> float:
    """Radiance that a target sends to the sensor: t (e B + (1 - e) sky) + path.

    Parameters
    ----------
    blackbody_radiance : float
        Of the target's temperature, through the band. [W m-2 sr-1 um-1]
    emissivity : float
        In (0, 1].
    transmittance, path_radiance, sky_radiance : float
        Of the air between target and sensor. [1, W m-2 sr-1 um-1]

    Returns
    -------
    float
        [W m-2 sr-1 um-1]

    Raises
    ------
    DomainError
        If emissivity or transmittance is not in (0, 1].
    """
    for name, value in (("emissivity", emissivity), ("transmittance", transmittance)):
        if not 0.0 < value <= 1.0:
            raise DomainError(f"the {name} of a target must lie in 0 to 1, found {value:g}")
    return (
        transmittance * (emissivity * blackbody_radiance + (1.0 - emissivity) * sky_radiance) + path_radiance
    )


def fit_targets(targets: Sequence[TargetRadiance]) -> TargetFit:
    """The correction that known targets ask for, by weighted least squares.

    Parameters
    ----------
    targets : sequence of TargetRadiance
        At least one, each named once.

    Returns
    -------
    TargetFit
        Where the targets scatter by more than their uncertainties say, the covariance is widened by
        that factor.

    Raises
    ------
    DomainError
        If there is no target, a number makes no sense, or the fitted gain is not positive.
    """
    _check(targets)
    observed = np.array([target.observed for target in targets])
    expected = np.array([target.expected for target in targets])
    sigma = np.array([target.uncertainty for target in targets])
    solution, covariance = _with_gain(observed, expected, sigma) if len(targets) > 1 else (None, None)
    if solution is None or covariance is None or covariance[0, 0] > LARGEST_GAIN_UNCERTAINTY**2:
        solution, covariance = _offset_alone(observed, expected, sigma)
    if not solution[0] > 0.0:
        raise DomainError(
            f"the targets ask for a gain of {solution[0]:.3g}, which cannot be",
            remedy="Check the targets' temperatures and places",
        )
    residuals = expected - (solution[0] * observed + solution[1])
    free = len(targets) - (2 if covariance[0, 0] > 0.0 else 1)
    scatter = float(np.sum((residuals / sigma) ** 2) / free) if free > 0 else 1.0
    return TargetFit(
        gain=float(solution[0]),
        offset=float(solution[1]),
        covariance=covariance * max(1.0, scatter),
        residuals=tuple(float(value) for value in residuals),
        targets=tuple(targets),
    )


def _check(targets: Sequence[TargetRadiance]) -> None:
    if not targets:
        raise DomainError("a correction to known targets needs at least one target")
    names = [target.name for target in targets]
    twice = sorted({name for name in names if names.count(name) > 1})
    if twice:
        raise DomainError(f"a target is named twice: {', '.join(twice)}")
    for target in targets:
        numbers = (target.observed, target.expected, target.uncertainty)
        if not all(np.isfinite(numbers)) or min(numbers) <= 0.0:
            raise DomainError(
                f"the target {target.name!r} needs observed and expected radiance and their uncertainty "
                f"above 0, found {numbers}"
            )


def _with_gain(
    observed: NDArray[np.float64], expected: NDArray[np.float64], sigma: NDArray[np.float64]
) -> tuple[NDArray[np.float64], NDArray[np.float64]] | tuple[None, None]:
    """Gain and offset with their covariance; None where the targets are alike."""
    if np.ptp(observed) < 1e-6 * observed.max():
        return None, None
    design = np.stack([observed / sigma, 1.0 / sigma], axis=1)
    covariance: NDArray[np.float64] = np.linalg.inv(design.T @ design).astype(np.float64)
    return covariance @ design.T @ (expected / sigma), covariance


def _offset_alone(
    observed: NDArray[np.float64], expected: NDArray[np.float64], sigma: NDArray[np.float64]
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Weighted mean difference, with a gain of exactly one."""
    weight = sigma**-2
    offset = np.sum(weight * (expected - observed)) / weight.sum()
    return np.array([1.0, offset]), np.array([[0.0, 0.0], [0.0, 1.0 / weight.sum()]])
