"""Completing what a source does not give: the air above its top and the gases it does not measure.

Above the top the climatology takes over. At the joint the climatology is made to meet the profile
(temperature by an offset, pressure and water by a factor), and the offset fades with height over
5 km, so that nothing jumps.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from groundglow.atmosphere.composition import CLIMATOLOGICAL_GASES
from groundglow.atmosphere.profile import WATER, Profile, saturation_ppmv
from groundglow.errors import DomainError

Float = NDArray[np.float64]

FADING_HEIGHT = 5000.0  # m
# Levels of the climatology nearer than this to the joint are left out.
_NEAREST = 200.0  # m
_SMALLEST = 1e-30


def completed(profile: Profile, climatology: Profile) -> Profile:
    """The profile up to the top of the climatology, with all of the climatology's gases.

    Parameters
    ----------
    profile : Profile
        Measured or analysed.
    climatology : Profile
        A model atmosphere.

    Returns
    -------
    Profile
        Its own levels unchanged and those of the climatology above; its notes say what was added.

    Raises
    ------
    DomainError
        If the profile lies below the climatology altogether.
    """
    top = float(profile.height[-1])
    if profile.height[0] < climatology.height[0] - 500.0:
        raise DomainError(f"the profile begins at {profile.height[0]:.0f} m, below every climatology")
    inside = climatology.at(np.clip(profile.height, climatology.height[0], climatology.height[-1]))
    missing = [gas for gas in CLIMATOLOGICAL_GASES if gas not in profile.gases and gas in inside.gases]
    gases = {**profile.gases, **{gas: inside.gases[gas] for gas in missing}}
    full = Profile(profile.height, profile.pressure, profile.temperature, gases, profile.notes)
    name = climatology.notes[0] if climatology.notes else "a climatology"
    if missing:
        full = full.with_note(f"{_listed(missing)} from {name}")
    above = climatology.height > top + _NEAREST
    if not above.any():
        return full
    return _joined(full, climatology, above).with_note(f"completed above {top / 1000.0:.1f} km from {name}")


def _joined(profile: Profile, climatology: Profile, above: NDArray[np.bool_]) -> Profile:
    joint = climatology.at(np.array([min(float(profile.height[-1]), float(climatology.height[-1]))]))
    height = climatology.height[above]
    fade = np.clip(1.0 - (height - profile.height[-1]) / FADING_HEIGHT, 0.0, 1.0)
    offset = float(profile.temperature[-1] - joint.temperature[0])
    temperature = climatology.temperature[above] + offset * fade
    pressure = climatology.pressure[above] * float(profile.pressure[-1] / joint.pressure[0])
    gases = {}
    for gas, values in profile.gases.items():
        if gas in climatology.gases:
            ratio = max(float(values[-1]), _SMALLEST) / max(float(joint.gases[gas][0]), _SMALLEST)
            upper = climatology.gases[gas][above] * ratio**fade
        else:
            upper = np.full(height.size, values[-1])
        if gas == WATER:
            limit = np.maximum(saturation_ppmv(pressure, temperature), climatology.gases[gas][above])
            upper = np.minimum(upper, limit)
        gases[gas] = np.concatenate([values, upper])
    return Profile(
        np.concatenate([profile.height, height]),
        np.concatenate([profile.pressure, pressure]),
        np.concatenate([profile.temperature, temperature]),
        gases,
        profile.notes,
    )


def blended(profiles: Sequence[Profile], weights: Sequence[float]) -> Profile:
    """Weighted mean of profiles, for between their places or times.

    Temperature is averaged linearly and pressure and gases in their logarithm, at the levels of all
    of them from the highest start to the lowest top. Gases that one of them lacks are left out.

    Parameters
    ----------
    profiles : sequence of Profile
        At least one.
    weights : sequence of float
        Not negative, one for each; they are made to add up to one.

    Raises
    ------
    DomainError
        If the numbers differ, or the weights are negative or all zero.
    """
    share = np.asarray(weights, dtype=np.float64)
    if len(profiles) != share.size or share.size == 0:
        raise DomainError(f"{len(profiles)} profiles cannot be blended with {share.size} weights")
    if not np.isfinite(share).all() or (share < 0.0).any() or share.sum() <= 0.0:
        raise DomainError("the weights of blended profiles must not be negative, and not all zero")
    kept = [(p, w) for p, w in zip(profiles, share / share.sum(), strict=True) if w > 0.0]
    if len(kept) == 1:
        return kept[0][0]
    start = max(float(p.height[0]) for p, _ in kept)
    top = min(float(p.height[-1]) for p, _ in kept)
    levels = np.unique(np.concatenate([[start, top], *(p.height for p, _ in kept)]))
    levels = levels[(levels >= start) & (levels <= top)]
    levels = levels[np.append(True, np.diff(levels) > 1.0)]
    parts = [(p.at(levels), w) for p, w in kept]
    names = [gas for gas in parts[0][0].gases if all(gas in p.gases for p, _ in parts)]

    def geometric(values: list[Float]) -> Float:
        logs = [np.log(np.maximum(v, _SMALLEST)) * w for v, (_, w) in zip(values, parts, strict=True)]
        mean = np.exp(np.sum(logs, axis=0))
        return np.where(np.min(values, axis=0) > 0.0, mean, 0.0)

    return Profile(
        levels,
        geometric([p.pressure for p, _ in parts]),
        np.sum([w * p.temperature for p, w in parts], axis=0),
        {gas: geometric([p.gases[gas] for p, _ in parts]) for gas in names},
        (*kept[0][0].notes, f"blended from {len(kept)} profiles"),
    )


def _listed(names: list[str]) -> str:
    return ", ".join(name.replace("_", " ") for name in names)
