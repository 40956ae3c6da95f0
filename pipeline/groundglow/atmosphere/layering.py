"""The levels on which a column of air is solved: those of the profile, and more near the observer.

What a thermal sensor or the ground sees of the air is dominated by the air next to it, so the steps
begin at 20 m and grow by 15 % from one to the next; all levels of the profile are kept.
"""

from __future__ import annotations

from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

Float = NDArray[np.float64]

FIRST_STEP = 20.0  # m
GROWTH = 1.15
# A step's own level is left out where one of the profile lies within this share of the step.
_NEAR = 0.3


def steps_upward(extent: float, first: float = FIRST_STEP, growth: float = GROWTH) -> Float:
    """Offsets 0, 20, 43, ... up to ``extent``. [m]."""
    count = int(np.ceil(np.log1p(extent * (growth - 1.0) / first) / np.log(growth)))
    offsets = first * np.expm1(np.arange(count + 1) * np.log(growth)) / (growth - 1.0)
    return np.asarray(offsets[offsets < extent])


def solution_levels(
    levels: Float, ground: float, sensor: float | None = None, *, refinement: int = 1
) -> Float:
    """Heights of the levels of one column.

    Parameters
    ----------
    levels : array (n,)
        Of the profile, increasing. [m]
    ground : float
        Height of the ground: the first level. [m]
    sensor : float, optional
        Height of a sensor within the air: a level too, with fine steps below it. [m]
    refinement : int
        Every step is cut into this many, for tests of convergence.

    Returns
    -------
    array
        Increasing, from the ground to the top of the profile; not to be written to. [m]
    """
    return _solution_levels(levels.tobytes(), ground, sensor, refinement)


# Neighbouring places and perturbed profiles share their levels.
@lru_cache(maxsize=1024)
def _solution_levels(packed: bytes, ground: float, sensor: float | None, refinement: int) -> Float:
    levels = np.frombuffer(packed, dtype=np.float64)
    top = float(levels[-1])
    wanted = ground + steps_upward(top - ground)
    steps = np.append(np.diff(wanted), top - wanted[-1])
    if sensor is not None and sensor < top:
        down = sensor - steps_upward(sensor - ground)
        kept = down > 0.5 * (ground + sensor)
        wanted = np.concatenate([wanted, down[kept]])
        steps = np.concatenate([steps, np.append(FIRST_STEP, -np.diff(down))[kept]])
    fixed = levels[(levels > ground + 1.0) & (levels < top)]
    if sensor is not None and sensor < top:
        fixed = np.append(fixed[np.abs(fixed - sensor) > 1.0], sensor)
    fixed = np.unique(np.concatenate([[ground], fixed, [top]]))
    nearest = _distance(fixed, wanted)
    wanted = wanted[nearest > _NEAR * steps]
    heights = np.unique(np.concatenate([fixed, wanted]))
    if refinement > 1:
        inside = np.arange(refinement) / refinement
        finer = heights[:-1, np.newaxis] + np.diff(heights)[:, np.newaxis] * inside
        heights = np.append(finer.ravel(), heights[-1])
    heights.flags.writeable = False
    return heights


def _distance(places: Float, points: Float) -> Float:
    """Distance of each point from the nearest of the increasing places."""
    right = np.clip(np.searchsorted(places, points), 1, places.size - 1)
    return np.minimum(np.abs(points - places[right - 1]), np.abs(points - places[right]))
