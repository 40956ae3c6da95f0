"""The compiled chain from stored numbers to fluxes, one small kernel a step, on one tile.

All arrays are float32 of one tile's shape unless said otherwise; NaN is the only "no value". Each
kernel has its readable statement in the module named in its docstring, and a test holds the
two equal. The arithmetic is plain IEEE float32: the same tile gives the same bytes on every machine.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from groundglow.kernels import kernel
from groundglow.physics.band_table import CELL_SHIFT
from groundglow.physics.constants import STEFAN_BOLTZMANN
from groundglow.quantities import FLAG

Pixels = NDArray[np.float32]
Flags = NDArray[np.uint16]

_NAN = np.float32(np.nan)
_ONE = np.float32(1.0)
_ZERO = np.float32(0.0)
_HALF = np.float32(0.5)
_SIGMA = np.float32(STEFAN_BOLTZMANN)
_FOUR = np.float32(4.0)
_NO_DATA = np.uint16(FLAG["no_data"].mask)
_SATURATED = np.uint16(FLAG["saturated"].mask)
_IMPOSSIBLE = np.uint16(FLAG["impossible"].mask)
_OUTSIDE_RANGE = np.uint16(FLAG["outside_calibrated_range"].mask)
_NEARLY_OPAQUE = np.uint16(FLAG["air_nearly_opaque"].mask)
_OPAQUE_BELOW = np.float32(0.4)
_SHIFT = np.int32(CELL_SHIFT)
# Fixed-point passes for a transmittance that depends on the temperature sought: each gains about
# two digits, so four reach float32 in every shipped band.
_PASSES = 4


@kernel(
    "void(float32[:, ::1], float32[::1], float32[::1], float32[::1], int32, float32, float32, float32[:, ::1])"
)
def temperature_of_radiance(
    radiance: Pixels,
    start: Pixels,
    temperature: Pixels,
    slope: Pixels,
    first_key: np.int32,
    lowest: np.float32,
    highest: np.float32,
    result: Pixels,
) -> None:
    """Band radiance to temperature through a band table; NaN outside it.

    Statement: ``physics.band_table.temperature_of_band_radiance``.
    """
    keys = radiance.view(np.int32)
    for i in range(radiance.shape[0]):
        for j in range(radiance.shape[1]):
            level = radiance[i, j]
            if level >= lowest and level <= highest:
                cell = (keys[i, j] >> _SHIFT) - first_key
                result[i, j] = temperature[cell] + slope[cell] * (level - start[cell])
            else:
                result[i, j] = _NAN


@kernel("void(float32[:, ::1], float32[:, ::1], float32, float32, float32, uint16[:, ::1])")
def flag_radiance(
    radiance: Pixels,
    brightness: Pixels,
    lowest: np.float32,
    highest: np.float32,
    saturation: np.float32,
    flags: Flags,
) -> None:
    """Flag pixels without radiance, outside the calibrated range or at the sensor's saturation.

    The limits are brightness temperatures; values stay as they are. A radiance that is no
    blackbody's (negative, or beyond the table) has no brightness temperature and is outside too.
    """
    for i in range(brightness.shape[0]):
        for j in range(brightness.shape[1]):
            if np.isnan(radiance[i, j]):
                flags[i, j] |= _NO_DATA
            elif not (brightness[i, j] >= lowest and brightness[i, j] <= highest):
                flags[i, j] |= _OUTSIDE_RANGE
            if brightness[i, j] >= saturation:
                flags[i, j] |= _SATURATED


@kernel(inline=True)
def _transmittance_at(
    air: Pixels, i: int, j: int, temperature: np.float32, nodes: Pixels
) -> tuple[np.float32, np.float32]:
    """Parabola through three reciprocal surface temperatures: the transmittance and its slope."""
    x = _ONE / temperature
    h1 = nodes[1] - nodes[0]
    h2 = nodes[2] - nodes[1]
    d1 = (air[1, i, j] - air[0, i, j]) / h1
    d2 = (air[2, i, j] - air[1, i, j]) / h2
    curve = (d2 - d1) / (h1 + h2)
    value = air[0, i, j] + (x - nodes[0]) * (d1 + curve * (x - nodes[1]))
    return value, -x * x * (d1 + curve * ((x - nodes[0]) + (x - nodes[1])))


@kernel(
    "void(float32[:, ::1], float32[:, ::1], float32[:, :, ::1], float32[::1], float32[::1], float32[::1],"
    " float32[::1], int32, float32, float32, float32[:, ::1], float32[:, ::1], float32[:, ::1], uint16[:, ::1])"
)
def surface_temperature(
    radiance: Pixels,
    emissivity: Pixels,
    air: Pixels,
    weighting: Pixels,
    start: Pixels,
    temperature: Pixels,
    slope: Pixels,
    first_key: np.int32,
    lowest: np.float32,
    highest: np.float32,
    result: Pixels,
    blackbody: Pixels,
    response: Pixels,
    flags: Flags,
) -> None:
    """Single-channel inversion of ``L = eps t(T) B(T) + (1 - eps) r + p``.

    ``air`` holds per pixel the transmittance at each temperature of ``weighting`` (one or three),
    the path radiance and the transmitted sky radiance, then fields this kernel does not read.
    ``blackbody`` receives t B (what the air lets through of the blackbody's radiance), ``response``
    dL/dT = eps d(t B)/dT. Statement: ``retrieval.single_channel.invert``.
    """
    count = weighting.shape[0]
    nodes = np.empty(count, dtype=np.float32)
    for k in range(count):
        nodes[k] = _ONE / weighting[k]
    bits = np.empty(1, dtype=np.float32)
    key = bits.view(np.int32)
    for i in range(radiance.shape[0]):
        for j in range(radiance.shape[1]):
            result[i, j] = _NAN
            blackbody[i, j] = _NAN
            response[i, j] = _NAN
            eps = emissivity[i, j]
            level = radiance[i, j]
            t = air[0, i, j]
            if t < _OPAQUE_BELOW:
                flags[i, j] |= _NEARLY_OPAQUE
            if np.isnan(level) or np.isnan(eps) or np.isnan(t):
                continue
            through = (level - air[count, i, j] - (_ONE - eps) * air[count + 1, i, j]) / eps
            inclination = _ZERO
            if count == 3:
                t = air[1, i, j]
            found = _NAN
            gradient = _ONE
            for _ in range(_PASSES if count == 3 else 1):
                source = through / t
                if not (source >= lowest and source <= highest):
                    found = _NAN
                    break
                bits[0] = source
                cell = (key[0] >> _SHIFT) - first_key
                gradient = slope[cell]
                found = temperature[cell] + gradient * (source - start[cell])
                if count == 3:
                    t, inclination = _transmittance_at(air, i, j, found, nodes)
            if np.isnan(found):
                flags[i, j] |= _IMPOSSIBLE
                continue
            result[i, j] = found
            blackbody[i, j] = through
            response[i, j] = eps * (t / gradient + inclination * through / t)


@kernel(
    "void(float32[:, ::1], float32[:, ::1], float32[:, ::1], float32[:, ::1], float32[:, ::1], float32[:, :, ::1],"
    " int32, int32, float32[:, ::1], float32, float32[:, ::1], float32[:, ::1], float32[:, ::1], float32[:, ::1])"
)
def temperature_uncertainty(
    temperature: Pixels,
    blackbody: Pixels,
    response: Pixels,
    emissivity: Pixels,
    emissivity_uncertainty: Pixels,
    air: Pixels,
    temperatures: np.int32,
    causes: np.int32,
    noise: Pixels,
    calibration: np.float32,
    pixel: Pixels,
    surface_class: Pixels,
    scene: Pixels,
    total: Pixels,
) -> None:
    """First-order standard uncertainty of the surface temperature, by what the errors share.

    ``pixel``: noise; ``surface_class``: emissivity, kept with its sign (dT/d eps times u(eps)), so
    that the flux can carry the covariance; ``scene``: calibration and the air's causes.
    Statement: ``retrieval.uncertainty.propagate``.
    """
    # Rows are walked field by field, without a branch, so that the compiler can use whole vectors;
    # where there is no temperature the slope is NaN, and so is all that follows.
    fields = temperatures + 3
    middle = temperatures // 2
    columns = temperature.shape[1]
    common = np.empty(columns, dtype=np.float32)
    for i in range(temperature.shape[0]):
        for j in range(columns):
            common[j] = (calibration / response[i, j]) * (calibration / response[i, j])
        for cause in range(causes):
            base = (cause + 1) * fields
            for j in range(columns):
                eps = emissivity[i, j]
                change = eps * (blackbody[i, j] / air[middle, i, j]) * air[base + middle, i, j]
                change += air[base + temperatures, i, j]
                change += (_ONE - eps) * air[base + temperatures + 1, i, j]
                change = change / response[i, j]
                common[j] += change * change
        for j in range(columns):
            slope = response[i, j]
            own = noise[i, j] / slope
            shared = -(blackbody[i, j] - air[temperatures + 1, i, j]) / slope * emissivity_uncertainty[i, j]
            pixel[i, j] = own
            surface_class[i, j] = shared
            scene[i, j] = np.sqrt(common[j])
            total[i, j] = np.sqrt(own * own + shared * shared + common[j])


@kernel(
    "void(float32[:, ::1], float32[:, ::1], float32[:, ::1], float32[:, ::1], float32[:, ::1], float32[:, ::1],"
    " float32[:, ::1], float32[:, ::1], float32[:, ::1])"
)
def emitted_flux(
    temperature: Pixels,
    pixel: Pixels,
    surface_class: Pixels,
    scene: Pixels,
    emissivity: Pixels,
    shared: Pixels,
    own: Pixels,
    flux: Pixels,
    uncertainty: Pixels,
) -> None:
    """Emitted flux eps sigma T^4 and its standard uncertainty.

    ``emissivity`` is broadband; ``shared`` is the part of its error that moves with the band
    emissivity's (signed, like ``surface_class``), ``own`` the rule's own part.
    Statement: ``physics.flux.emitted_flux`` and ``retrieval.uncertainty.propagate_flux``.
    """
    for i in range(temperature.shape[0]):
        for j in range(temperature.shape[1]):
            t = temperature[i, j]
            t2 = t * t
            black = _SIGMA * t2 * t2
            flux[i, j] = emissivity[i, j] * black
            per_kelvin = _FOUR * emissivity[i, j] * _SIGMA * t2 * t
            noise = per_kelvin * pixel[i, j]
            common = per_kelvin * scene[i, j]
            together = per_kelvin * surface_class[i, j] + black * shared[i, j]
            rule = black * own[i, j]
            uncertainty[i, j] = np.sqrt(noise * noise + common * common + together * together + rule * rule)


@kernel("void(float32[:, ::1], float32[:, ::1], float32[:, ::1], float32[:, ::1], float32[:, ::1])")
def surface_fluxes(emitted: Pixels, emissivity: Pixels, sky: Pixels, leaving: Pixels, net: Pixels) -> None:
    """Leaving flux (emitted and reflected) and net longwave flux, downward positive.

    Statement: ``physics.flux.leaving_flux`` and ``physics.flux.net_longwave_flux``.
    """
    for i in range(emitted.shape[0]):
        for j in range(emitted.shape[1]):
            leaving[i, j] = emitted[i, j] + (_ONE - emissivity[i, j]) * sky[i, j]
            net[i, j] = sky[i, j] - leaving[i, j]


@kernel("void(float32[:, ::1], uint16[:, ::1], uint16)")
def mask_flagged(values: Pixels, flags: Flags, mask: np.uint16) -> None:
    """Set to NaN every value whose flags meet the mask."""
    for i in range(values.shape[0]):
        for j in range(values.shape[1]):
            if flags[i, j] & mask:
                values[i, j] = _NAN
