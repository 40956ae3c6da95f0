"""What each gas absorbs: two named sets of band-model and continuum tables, 5 to 3,000 cm-1.

``updated`` is the default: the band model of the 1980s with lines of water, carbon dioxide, ozone
and nitrous oxide, continuum factors and halocarbons brought to modern spectroscopy. ``lowtran7`` is
the model of the 1980s as published, for comparison. Where the numbers come from is told in
``data/PROVENANCE.md``.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache
from importlib import resources

import numpy as np
from numpy.typing import NDArray

from groundglow.errors import DomainError

Float = NDArray[np.float64]
Integer = NDArray[np.int64]

ABSORPTION_SETS = ("updated", "lowtran7")
DEFAULT_SET = "updated"
# Gases that the band model knows, in the order of its tables.
BAND_GASES = (
    "water_vapour", "carbon_dioxide", "ozone", "nitrous_oxide", "carbon_monoxide", "methane",
    "oxygen", "nitric_oxide", "sulphur_dioxide", "nitrogen_dioxide", "ammonia",
)  # fmt: skip
HALOCARBONS = ("cfc_11", "cfc_12", "hcfc_22")
STEP = 5.0  # cm-1


@dataclass(frozen=True)
class AbsorptionSet:
    """Absorption tables at some wavenumbers.

    Attributes
    ----------
    name : str
        ``updated`` or ``lowtran7``.
    wavenumber : array (wavenumbers,)
        Increasing, multiples of 5 cm-1. [cm-1]
    log_coefficient : array (gases, wavenumbers)
        Natural logarithm of the band coefficient; unit of the coefficient: (g cm-2)-1 for water,
        (atm cm)-1 for others. Minus infinity is not used: where a gas has no band no run covers it.
    exponent : array (gases, wavenumbers)
        Exponent a of the transmittance exp(-(C W)^a), 0.45 to 1.
    run_gas, run_start, run_stop : integer arrays (runs,)
        Stretches of wavenumbers over which a gas has a band and one pair of scaling exponents.
    run_pressure, run_temperature : arrays (runs,)
        Exponents n and m of the scaled amount, u (p/p0)^n (T0/T)^m.
    self_296, self_260, foreign_296 : arrays (wavenumbers,)
        Water continuum at those temperatures, without the radiation term. [1e-20 cm2 (cm-1)-1]
    exponential_self : bool
        The self continuum varies exponentially with temperature, unclipped (``updated``); else
        linearly between 260 and 296 K.
    halocarbon_cross_section : array (3, wavenumbers)
        Of CFC-11, CFC-12 and HCFC-22. [cm2]
    nitrogen, nitric_acid : arrays (wavenumbers,)
        Collision-induced band of nitrogen [km-1] and absorption of nitric acid [(atm cm)-1].
    oxygen : array (3, wavenumbers)
        Collision-induced band of oxygen: strength and two temperature coefficients.
    """

    name: str
    wavenumber: Float
    log_coefficient: Float
    exponent: Float
    run_gas: Integer
    run_start: Integer
    run_stop: Integer
    run_pressure: Float
    run_temperature: Float
    self_296: Float
    self_260: Float
    foreign_296: Float
    exponential_self: bool
    halocarbon_cross_section: Float
    nitrogen: Float
    nitric_acid: Float
    oxygen: Float


@cache
def wavenumbers() -> Float:
    """All wavenumbers of the tables, 5 to 3,000 cm-1 in steps of 5. [cm-1]."""
    found = _tables()["wavenumber"]
    found.flags.writeable = False
    return found


@cache
def absorption_set(name: str = DEFAULT_SET) -> AbsorptionSet:
    """A named absorption set at all its wavenumbers.

    Raises
    ------
    DomainError
        If there is no set of that name.
    """
    return absorption_at(np.arange(wavenumbers().size), name)


def absorption_at(index: Integer, name: str = DEFAULT_SET) -> AbsorptionSet:
    """The part of an absorption set that a band needs.

    Parameters
    ----------
    index : integer array (n,)
        Increasing positions in :func:`wavenumbers`.
    name : str
        ``updated`` or ``lowtran7``.

    Raises
    ------
    DomainError
        If there is no set of that name.
    """
    if name not in ABSORPTION_SETS:
        raise DomainError(
            f"there is no absorption set {name!r}", remedy=f"Choose one of {', '.join(ABSORPTION_SETS)}."
        )
    tables = _tables()
    which = int(np.flatnonzero(tables["sets"] == name)[0])
    pick = {key: tables[key][which][..., index] for key in _BY_SET}
    gas, start, stop, pressure, temperature = _runs(pick["log10c"], pick["n"], pick["m"])
    return AbsorptionSet(
        name=name,
        wavenumber=tables["wavenumber"][index],
        log_coefficient=np.ascontiguousarray(np.nan_to_num(pick["log10c"]) * np.log(10.0)),
        exponent=np.ascontiguousarray(np.nan_to_num(pick["a"], nan=1.0)),
        run_gas=gas,
        run_start=start,
        run_stop=stop,
        run_pressure=pressure,
        run_temperature=temperature,
        self_296=pick["self_296"],
        self_260=pick["self_260"],
        foreign_296=pick["foreign_296"],
        exponential_self=name == "updated",
        halocarbon_cross_section=pick["halocarbon_cross_section"],
        nitrogen=tables["nitrogen"][index],
        nitric_acid=tables["nitric_acid"][index],
        oxygen=tables["oxygen"][:, index],
    )


_BY_SET = ("log10c", "a", "n", "m", "self_296", "self_260", "foreign_296", "halocarbon_cross_section")


@cache
def _tables() -> dict[str, NDArray[np.float64]]:
    file = resources.files("groundglow.atmosphere").joinpath("data/absorption.npz")
    with file.open("rb") as stream, np.load(stream, allow_pickle=False) as archive:
        return {key: archive[key] for key in archive.files}


def _runs(log10c: Float, n: Float, m: Float) -> tuple[Integer, Integer, Integer, Float, Float]:
    """Stretches over which a gas is present and its scaling exponents do not change."""
    found: list[tuple[int, int, int]] = []
    for gas in range(log10c.shape[0]):
        key = np.where(np.isnan(log10c[gas]), np.nan, n[gas] + 1000.0 * m[gas])
        new = np.flatnonzero(
            np.append(True, ~((key[1:] == key[:-1]) | (np.isnan(key[1:]) & np.isnan(key[:-1]))))
        )
        ends = np.append(new[1:], key.size)
        found += [
            (gas, int(a), int(b)) for a, b in zip(new, ends, strict=True) if not np.isnan(log10c[gas, a])
        ]
    runs = np.array(found, dtype=np.int64).reshape(-1, 3)
    return (
        runs[:, 0].copy(),
        runs[:, 1].copy(),
        runs[:, 2].copy(),
        n[runs[:, 0], runs[:, 1]],
        m[runs[:, 0], runs[:, 1]],
    )
