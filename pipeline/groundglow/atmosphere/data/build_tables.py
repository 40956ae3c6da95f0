"""Build the compact absorption and model-atmosphere tables of this folder from plain CSV tables.

Usage::

    python build_tables.py ABSORPTION_LOWTRAN7_CSV ABSORPTION_UPDATE_CSV MODEL_PROFILES_CSV FOLDER

The CSV tables are described in PROVENANCE.md beside this script. The result, ``absorption.npz`` and
``model_atmospheres.npz``, has the same bytes whenever it is built from the same tables.
"""

from __future__ import annotations

import csv
import sys
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

Table = dict[str, NDArray[np.float64]]

# Column prefix of the tables and name in Groundglow.
GASES = {
    "h2o": "water_vapour",
    "co2": "carbon_dioxide",
    "o3": "ozone",
    "n2o": "nitrous_oxide",
    "co": "carbon_monoxide",
    "ch4": "methane",
    "o2": "oxygen",
    "no": "nitric_oxide",
    "so2": "sulphur_dioxide",
    "no2": "nitrogen_dioxide",
    "nh3": "ammonia",
}
HALOCARBONS = {"cfc11": "cfc_11", "cfc12": "cfc_12", "hcfc22": "hcfc_22"}
UPDATED_GASES = ("h2o", "co2", "o3", "n2o")
COEFFICIENTS = ("log10c", "a", "n", "m")

MODELS = (
    "tropical", "midlatitude_summer", "midlatitude_winter",
    "subarctic_summer", "subarctic_winter", "us_standard",
)  # fmt: skip
# Heights that the profile table adds to those of the printed model atmospheres. [km]
INTERPOLATED_HEIGHTS = (0.01, 0.04, 0.1, 0.2, 0.35, 0.5, 0.75, 1.5, 2.5)


def read(path: Path) -> tuple[list[dict[str, str]], Table]:
    """Rows as text, and columns as numbers with NaN for an empty cell (text columns are left out)."""
    with path.open(newline="") as file:
        rows = list(csv.DictReader(file))
    names = [name for name in rows[0] if name != "atmosphere"]
    return rows, {n: np.array([float(row[n]) if row[n] else np.nan for row in rows]) for n in names}


def absorption(old: Table, new: Table) -> Table:
    """Both absorption sets on the wavenumbers of the older one; axis 0 of the gases is the set."""
    wavenumber = old["wavenumber"]
    place = np.searchsorted(wavenumber, new["wavenumber"])
    if not np.array_equal(wavenumber[place], new["wavenumber"]):
        raise SystemExit("the wavenumbers of the update are not among those of the older table")
    result: Table = {"wavenumber": wavenumber}
    for name in COEFFICIENTS:
        both = np.array([[old[f"{gas}_{name}"] for gas in GASES]] * 2)
        for i, gas in enumerate(GASES):
            if gas in UPDATED_GASES:
                both[1, i, place] = new[f"{gas}_{name}"]
        result[name] = both
    for name, factor in (("self_296", "self"), ("self_260", "self"), ("foreign_296", "foreign")):
        both = np.array([old[f"h2o_{name}"]] * 2)
        both[1, place] *= new[f"h2o_{factor}_factor"]
        result[name] = both
    halocarbons = np.zeros((2, len(HALOCARBONS), wavenumber.size))
    for i, gas in enumerate(HALOCARBONS):
        halocarbons[1, i, place] = new[f"{gas}_xs"]
    result["halocarbon_cross_section"] = halocarbons
    result["nitrogen"] = old["n2_cont"]
    result["nitric_acid"] = old["hno3_abs"]
    result["oxygen"] = np.array([old[f"o2cont_{part}"] for part in "sab"])
    return result


def model_atmospheres(rows: list[dict[str, str]], table: Table) -> Table:
    """The six profiles at the printed levels; nitric acid is turned from ppbv into ppmv."""
    printed = ~np.isin(table["z_km"], INTERPOLATED_HEIGHTS)
    name = np.array([row["atmosphere"] for row in rows])
    result: Table = {"height": 1000.0 * table["z_km"][(name == MODELS[0]) & printed]}
    keys = {"p_hpa": "pressure", "t_k": "temperature", **GASES}
    for column, key in keys.items():
        result[key] = np.array([table[column][(name == model) & printed] for model in MODELS])
    result["nitric_acid"] = np.array([table["hno3"][(name == model) & printed] / 1e3 for model in MODELS])
    return result


def main(arguments: list[str]) -> None:
    """Read the three tables and write the two files."""
    older, update, profiles, folder = (Path(argument) for argument in arguments)
    old, new = read(older)[1], read(update)[1]
    names = {"gases": np.array(list(GASES.values())), "halocarbons": np.array(list(HALOCARBONS.values()))}
    sets: dict[str, Any] = {"sets": np.array(["lowtran7", "updated"]), **names, **absorption(old, new)}
    np.savez_compressed(folder / "absorption.npz", **sets)
    models: dict[str, Any] = {"models": np.array(MODELS), **model_atmospheres(*read(profiles))}
    np.savez_compressed(folder / "model_atmospheres.npz", **models)


if __name__ == "__main__":
    main(sys.argv[1:])
