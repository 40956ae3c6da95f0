"""Compiled loops of the radiative transfer, over layers and wavenumbers.

The transmittance of stacked layers is not the product of theirs, because a band model's optical
depth grows with a power below one of the absorber amount. So each look, up or down, follows its own
path from the observer outwards and evaluates the model with the amounts gathered so far.

The exponential is our own polynomial: it vectorises, and it is the same on every machine.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from groundglow.kernels import kernel

Float = NDArray[np.float64]
Integer = NDArray[np.int64]

_LOG2_E = 1.4426950408889634
# ln 2 in two parts, the first exact in few bits.
_LN2_HIGH = 0.6931471803691238
_LN2_LOW = 1.9082149292705877e-10
# Added and taken away, it rounds to an integer, which then stands in the low bits of the sum.
_ROUNDER = 6755399441055744.0
_SHIFT = np.int64(52)
_BIAS = np.int64(1023)
_LARGEST = 700.0
# An absorber amount that grew by less than this share leaves its optical depths as they are.
_NEGLIGIBLE_GROWTH = 1e-6
# Nor does a ray that much longer or shorter than in plane air.
_NEGLIGIBLE_BEND = 1e-6
# Radiation constants per wavenumber, from the exact SI constants.
_FIRST = 1.1910429723971884e-8  # W m-2 sr-1 (cm-1)-4
_SECOND = 1.4387768775039337  # cm K


@kernel(inline=True)
def _exponentiate(values: Float, power: Float, bits: Integer) -> None:
    """exp(values) in place, within 1e-11; ``bits`` is ``power`` seen as integers, both long enough."""
    count = values.size
    for k in range(count):
        x = values[k]
        x = _LARGEST if x > _LARGEST else x
        x = -_LARGEST if x < -_LARGEST else x
        values[k] = x
        power[k] = x * _LOG2_E + _ROUNDER
    for k in range(count):
        whole = power[k] - _ROUNDER
        r = (values[k] - whole * _LN2_HIGH) - whole * _LN2_LOW
        # Taylor series to r^9 for |r| <= 0.347.
        p = 1.0 + r * (1.0 / 9.0)
        p = 1.0 + r * (1.0 / 8.0) * p
        p = 1.0 + r * (1.0 / 7.0) * p
        p = 1.0 + r * (1.0 / 6.0) * p
        p = 1.0 + r * (1.0 / 5.0) * p
        p = 1.0 + r * (1.0 / 4.0) * p
        p = 1.0 + r * (1.0 / 3.0) * p
        p = 1.0 + r * (1.0 / 2.0) * p
        values[k] = 1.0 + r * p
    for k in range(count):
        bits[k] = (bits[k] << _SHIFT) + (_BIAS << _SHIFT)
    for k in range(count):
        values[k] *= power[k]


@kernel(inline=True)
def _band_model(
    exponent: Float, log_coefficient: Float, log_amount: float, depth: Float, power: Float, bits: Integer
) -> None:
    """Optical depth (C W)^a of one run."""
    for k in range(depth.size):
        depth[k] = exponent[k] * (log_coefficient[k] + log_amount)
    _exponentiate(depth, power, bits)


@kernel(inline=True)
def _add(depth: Float, secant_power: Float, exponent: Float, excess: float, total: Float) -> None:
    """Add one run's optical depth along a slant; ``excess`` is what the Earth's curvature adds to it."""
    if abs(excess) < _NEGLIGIBLE_BEND:
        for k in range(depth.size):
            total[k] += depth[k] * secant_power[k]
    else:
        # (1 + excess)^a to second order: 1e-5 of the optical depth at 80 degrees.
        for k in range(depth.size):
            a = exponent[k]
            bend = 1.0 + a * excess * (1.0 + 0.5 * (a - 1.0) * excess)
            total[k] += depth[k] * secant_power[k] * bend


@kernel("void(float64[::1], float64[::1], float64[:, ::1])")
def planck_per_wavenumber(wavenumber: Float, temperature: Float, result: Float) -> None:
    """Blackbody radiance at each level and wavenumber. [W m-2 sr-1 (cm-1)-1].

    Statement: 2 h c^2 v^3 / (exp(h c v / k T) - 1).
    """
    count = wavenumber.size
    row = np.empty(count, dtype=np.float64)
    power = np.empty(count, dtype=np.float64)
    bits = power.view(np.int64)
    for level in range(temperature.size):
        inverse = _SECOND / temperature[level]
        for k in range(count):
            row[k] = wavenumber[k] * inverse
        _exponentiate(row, power, bits)
        for k in range(count):
            v = wavenumber[k]
            result[level, k] = _FIRST * v * v * v / (row[k] - 1.0)


@kernel(
    "void(float64[::1], float64[::1], float64[::1], float64[:, ::1], float64[:, ::1], float64[::1], boolean,"
    "float64[:, ::1])"
)
def continuum_depths(
    self_296: Float,
    self_260: Float,
    log_ratio: Float,
    coefficients: Float,
    amounts: Float,
    temperature: Float,
    exponential: bool,
    result: Float,
) -> None:
    """Optical depth of each layer, seen vertically, of everything that is linear in the path.

    Parameters
    ----------
    self_296, self_260, log_ratio : arrays (wavenumbers,)
        Self continuum with radiation term at both temperatures, and ln(self_260 / self_296).
    coefficients : array (absorbers, wavenumbers)
        Of the other continua.
    amounts : array (1 + absorbers, layers)
        First that of the self continuum.
    temperature : array (layers,)
        Mean of each layer. [K]
    exponential : bool
        Temperature law of the self continuum: exponential, or linear between 260 and 296 K.
    result : array (layers, wavenumbers)
        Filled.
    """
    count = self_296.size
    row = np.empty(count, dtype=np.float64)
    power = np.empty(count, dtype=np.float64)
    bits = power.view(np.int64)
    for layer in range(temperature.size):
        share = (296.0 - temperature[layer]) / 36.0
        if exponential:
            for k in range(count):
                row[k] = share * log_ratio[k]
            _exponentiate(row, power, bits)
            for k in range(count):
                result[layer, k] = self_296[k] * row[k] * amounts[0, layer]
        else:
            share = min(max(share, 0.0), 1.0)
            for k in range(count):
                result[layer, k] = ((1.0 - share) * self_296[k] + share * self_260[k]) * amounts[0, layer]
        for absorber in range(coefficients.shape[0]):
            amount = amounts[1 + absorber, layer]
            if amount != 0.0:
                for k in range(count):
                    result[layer, k] += coefficients[absorber, k] * amount


@kernel(
    "void(float64[::1], float64[::1], int64[::1], int64[::1], float64[:, ::1], float64[:, ::1], "
    "float64[:, ::1], float64[::1], float64[:, ::1], float64[:, ::1], float64[:, ::1])"
)
def follow_path(
    log_coefficient: Float,
    exponent: Float,
    run_first: Integer,
    run_start: Integer,
    amounts: Float,
    continuum: Float,
    source: Float,
    secant: Float,
    stretch: Float,
    transmittance: Float,
    radiance: Float,
) -> None:
    """Transmittance and emitted radiance of a path, layer by layer from the observer outwards.

    Parameters
    ----------
    log_coefficient, exponent : arrays (packed,)
        Band model of all runs, one after another.
    run_first : integer array (runs + 1,)
        Where each run begins in the packed arrays.
    run_start : integer array (runs,)
        Wavenumber at which each run begins.
    amounts : array (runs, layers)
        Scaled absorber amounts, seen vertically, layers ordered from the observer.
    continuum : array (layers, wavenumbers)
        Optical depth of everything linear in the path, seen vertically.
    source : array (layers + 1, wavenumbers)
        Blackbody radiance at the layer edges.
    secant : array (angles,)
        Of the zenith angle at the surface.
    stretch : array (angles, layers)
        Local secant over the secant at the surface: 1 in plane-parallel air, less with height above
        a curved Earth.
    transmittance, radiance : arrays (angles, wavenumbers)
        Results: of the whole path, and at the observer.
    """
    angles, count = transmittance.shape
    layers = amounts.shape[1]
    runs = run_start.size
    packed = log_coefficient.size
    gathered = np.zeros(runs, dtype=np.float64)
    evaluated = np.zeros(runs, dtype=np.float64)
    stretched = np.zeros((angles, runs), dtype=np.float64)
    straight = np.zeros((angles, count), dtype=np.float64)
    depth = np.zeros(packed, dtype=np.float64)
    size = max(packed, count)
    power = np.empty(size, dtype=np.float64)
    bits = power.view(np.int64)
    total = np.empty(count, dtype=np.float64)
    secant_power = np.empty((angles, packed), dtype=np.float64)
    for angle in range(angles):
        log_secant = np.log(secant[angle])
        row = secant_power[angle]
        for k in range(packed):
            row[k] = exponent[k] * log_secant
        _exponentiate(row, power, bits)
        for k in range(count):
            transmittance[angle, k] = 1.0
            radiance[angle, k] = 0.0
    for layer in range(layers):
        for run in range(runs):
            gathered[run] += amounts[run, layer]
            if gathered[run] > evaluated[run] * (1.0 + _NEGLIGIBLE_GROWTH):
                evaluated[run] = gathered[run]
                log_amount = np.log(gathered[run])
                part = slice(run_first[run], run_first[run + 1])
                _band_model(exponent[part], log_coefficient[part], log_amount, depth[part], power, bits)
        for angle in range(angles):
            slant = secant[angle] * stretch[angle, layer]
            for k in range(count):
                straight[angle, k] += slant * continuum[layer, k]
                total[k] = straight[angle, k]
            for run in range(runs):
                stretched[angle, run] += stretch[angle, layer] * amounts[run, layer]
                part = slice(run_first[run], run_first[run + 1])
                excess = 0.0
                if gathered[run] > 0.0:
                    excess = stretched[angle, run] / gathered[run] - 1.0
                _add(depth[part], secant_power[angle, part], exponent[part], excess, total[run_start[run] :])
            for k in range(count):
                total[k] = -total[k]
            _exponentiate(total, power, bits)
            for k in range(count):
                lost = transmittance[angle, k] - total[k]
                radiance[angle, k] += 0.5 * (source[layer, k] + source[layer + 1, k]) * lost
                transmittance[angle, k] = total[k]
