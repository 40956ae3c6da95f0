"""The six model atmospheres of AFGL-TR-86-0110, by name or by latitude and date.

References
----------
Anderson, G. P., Clough, S. A., Kneizys, F. X., Chetwynd, J. H., Shettle, E. P. (1986), AFGL
Atmospheric Constituent Profiles (0-120 km), AFGL-TR-86-0110.
"""

from __future__ import annotations

import datetime
from functools import cache
from importlib import resources

import numpy as np
from numpy.typing import NDArray

from groundglow.atmosphere.composition import CLIMATOLOGICAL_GASES
from groundglow.atmosphere.profile import Profile
from groundglow.errors import DomainError

MODEL_ATMOSPHERES = (
    "tropical", "midlatitude_summer", "midlatitude_winter",
    "subarctic_summer", "subarctic_winter", "us_standard",
)  # fmt: skip
# The report places them at 15, 45 and 60 degrees; these are the borders half way.
_TROPICS, _SUBARCTIC = 30.0, 52.5  # deg
_SUMMER_MONTHS = range(4, 10)  # of the northern hemisphere


@cache
def model_atmosphere(name: str) -> Profile:
    """A model atmosphere with its minor constituents, 0 to 100 km.

    Parameters
    ----------
    name : str
        One of ``MODEL_ATMOSPHERES``.

    Raises
    ------
    DomainError
        If there is none of that name.
    """
    if name not in MODEL_ATMOSPHERES:
        raise DomainError(
            f"there is no model atmosphere {name!r}", remedy=f"Choose one of {', '.join(MODEL_ATMOSPHERES)}."
        )
    tables = _tables()
    which = int(np.flatnonzero(tables["models"] == name)[0])
    return Profile(
        height=tables["height"],
        pressure=tables["pressure"][which],
        temperature=tables["temperature"][which],
        gases={gas: tables[gas][which] for gas in CLIMATOLOGICAL_GASES},
        notes=(f"model atmosphere {name} (AFGL-TR-86-0110)",),
    )


def model_for(latitude: float, date: datetime.date) -> str:
    """Name of the model atmosphere for a place and date.

    Tropical within 30 degrees of the equator, sub-arctic beyond 52.5; summer from April to
    September, in the southern hemisphere from October to March.

    Parameters
    ----------
    latitude : float
        North positive. [deg]
    date : date
        Of the scene.

    Raises
    ------
    DomainError
        If the latitude is not between -90 and 90.
    """
    if not -90.0 <= latitude <= 90.0:
        raise DomainError(f"a latitude must lie between -90 and 90 degrees, not {latitude}")
    if abs(latitude) < _TROPICS:
        return "tropical"
    summer = (date.month in _SUMMER_MONTHS) == (latitude > 0.0)
    zone = "subarctic" if abs(latitude) > _SUBARCTIC else "midlatitude"
    return f"{zone}_{'summer' if summer else 'winter'}"


@cache
def _tables() -> dict[str, NDArray[np.float64]]:
    file = resources.files("groundglow.atmosphere").joinpath("data/model_atmospheres.npz")
    with file.open("rb") as stream, np.load(stream, allow_pickle=False) as archive:
        return {key: archive[key] for key in archive.files}
