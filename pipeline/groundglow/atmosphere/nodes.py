"""Which nodes of height and angle are enough: thinning until interpolation costs a set temperature.

The per-pixel interpolation is linear between nodes, and the radiance at the sensor is linear in the
interpolated terms; so the error in surface temperature is that of the radiance over its slope.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

Float = NDArray[np.float64]
Integer = NDArray[np.int64]

# Pieces shorter than this are not divided further.
_SHORTEST_HEIGHT = 40.0  # m
_SHORTEST_SECANT = 0.004
# Thinning sees the errors at the samples only; between them they may be a little larger.
_MARGIN = 0.9

Sample = Callable[[float], tuple[Float, Float]]


def height_nodes(low: float, high: float, sample: Sample, tolerance: float) -> Float:
    """Ground heights that are enough for linear interpolation. [m].

    Parameters
    ----------
    low, high : float
        Range of the ground. [m]
    sample : function of a height
        What is interpolated there, (cases,), and the units of tolerance per unit of it, (cases,).
    tolerance : float
        Largest error allowed.

    Returns
    -------
    array
        Increasing, from ``low`` to ``high``; their mean alone where the range is a few metres.
    """
    return _chosen(low, high, sample, tolerance, _SHORTEST_HEIGHT)


def secant_nodes(low: float, high: float, sample: Sample, tolerance: float) -> Float:
    """Secants of the view zenith angle that are enough; parameters as for :func:`height_nodes`."""
    return _chosen(low, high, sample, tolerance, _SHORTEST_SECANT)


def thinned(position: Float, values: Float, scale: Float, tolerance: float) -> Integer:
    """Positions between which linear interpolation stays within a tolerance.

    From each chosen position the next is the farthest that keeps all between within the tolerance.

    Parameters
    ----------
    position : array (n,)
        Increasing.
    values : array (n, cases)
        What is interpolated.
    scale : array (n, cases)
        Units of tolerance per unit of value (kelvin per radiance).
    tolerance : float
        Largest error allowed.

    Returns
    -------
    integer array
        Chosen indices, with the first and the last.
    """
    chosen = [0]
    last = position.size - 1
    while chosen[-1] < last:
        low = chosen[-1]
        reach = low + 1
        while reach < last and _bow(position, values, scale, low, reach + 1) <= tolerance:
            reach += 1
        chosen.append(reach)
    return np.array(chosen)


def _bow(position: Float, values: Float, scale: Float, low: int, high: int) -> float:
    """Largest error between two positions."""
    inside = slice(low + 1, high)
    share = ((position[inside] - position[low]) / (position[high] - position[low]))[:, np.newaxis]
    straight = values[low] + share * (values[high] - values[low])
    return float(np.abs((straight - values[inside]) * scale[inside]).max())


def _chosen(low: float, high: float, sample: Sample, tolerance: float, shortest: float) -> Float:
    if high - low < 0.5 * shortest:
        return np.array([0.5 * (low + high)])
    known = {place: sample(place) for place in (low, high)}
    pieces = [(low, high)]
    while pieces:
        left, right = pieces.pop()
        if right - left < shortest:
            continue
        middle = 0.5 * (left + right)
        known[middle] = sample(middle)
        straight = 0.5 * (known[left][0] + known[right][0])
        error = np.abs((straight - known[middle][0]) * known[middle][1]).max()
        # A bow that is small here but has a kink aside would be missed: the widest pieces are
        # divided in any case.
        if error > tolerance or right - left > (high - low) / 3.0:
            pieces += [(left, middle), (middle, right)]
    position = np.array(sorted(known))
    values = np.array([known[place][0] for place in position])
    scale = np.array([known[place][1] for place in position])
    return position[thinned(position, values, scale, _MARGIN * tolerance)]
