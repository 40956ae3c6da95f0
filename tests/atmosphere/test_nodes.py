"""Choosing nodes, levels and places."""

from __future__ import annotations

import numpy as np
import pytest

from groundglow.atmosphere.layering import solution_levels
from groundglow.atmosphere.model_atmospheres import model_atmosphere
from groundglow.atmosphere.nodes import height_nodes, secant_nodes, thinned
from groundglow.atmosphere.sensor_height import SPACE, SensorHeight
from groundglow.errors import DomainError

LEVELS = model_atmosphere("us_standard").height


def bow(height: float) -> tuple[np.ndarray, np.ndarray]:
    return np.array([np.exp(-height / 2000.0)]), np.array([10.0])


def test_interpolation_between_chosen_heights_stays_within_the_tolerance() -> None:
    nodes = height_nodes(0.0, 3000.0, bow, 0.02)
    assert (nodes[0], nodes[-1]) == (0.0, 3000.0)
    fine = np.linspace(0.0, 3000.0, 2001)
    straight = np.interp(fine, nodes, np.exp(-nodes / 2000.0))
    error = 10.0 * np.abs(straight - np.exp(-fine / 2000.0))
    assert error.max() <= 0.02
    # Not wasteful either: the smallest even spacing that does it has 13 nodes.
    assert nodes.size <= 20


def test_level_ground_and_a_fixed_view_have_one_node() -> None:
    assert height_nodes(300.0, 305.0, bow, 0.02) == pytest.approx([302.5])
    assert secant_nodes(1.2, 1.2, bow, 0.02) == pytest.approx([1.2])


def test_a_straight_line_needs_its_ends_only() -> None:
    nodes = height_nodes(0.0, 1000.0, lambda h: (np.array([h]), np.ones(1)), 0.01)
    np.testing.assert_array_equal(nodes, [0.0, 1000.0])


def test_thinning_keeps_a_kink() -> None:
    position = np.linspace(0.0, 10.0, 11)
    values = np.maximum(position - 4.0, 0.0)[:, np.newaxis]
    np.testing.assert_array_equal(thinned(position, values, np.ones_like(values), 0.1), [0, 4, 10])


@pytest.mark.parametrize("ground", [0.0, 137.0, 999.5, 2500.0])
def test_levels_begin_at_the_ground_and_keep_those_of_the_profile(ground: float) -> None:
    found = solution_levels(LEVELS, ground)
    assert found[0] == ground
    assert found[-1] == LEVELS[-1]
    assert set(LEVELS[ground + 1.0 < LEVELS]) <= set(found)
    assert np.diff(found)[0] <= 26.0
    assert (np.diff(found) > 0.0).all()
    assert found.size < 75


@pytest.mark.parametrize("sensor", [60.0, 100.0, 3000.0, 10000.0])
def test_a_sensor_in_the_air_is_a_level_with_fine_steps_below_it(sensor: float) -> None:
    found = solution_levels(LEVELS, 0.0, sensor)
    place = np.flatnonzero(found == sensor)
    assert place.size == 1
    assert found[place[0]] - found[place[0] - 1] <= 26.0


def test_refinement_divides_every_step() -> None:
    coarse, fine = solution_levels(LEVELS, 0.0), solution_levels(LEVELS, 0.0, refinement=3)
    assert fine.size == 3 * (coarse.size - 1) + 1
    np.testing.assert_allclose(fine[::3], coarse)


def test_sensor_heights() -> None:
    assert SPACE.above_sea(500.0) is None
    assert SensorHeight("ground", 120.0).above_sea(500.0) == 620.0
    assert SensorHeight("sea", 3000.0).above_sea(500.0) == 3000.0
    assert SensorHeight("sea", 700e3).above_sea(500.0) is None


def test_a_sensor_below_the_terrain_is_refused() -> None:
    with pytest.raises(DomainError, match="not above the ground at 1500 m"):
        SensorHeight("sea", 1200.0).above_sea(1500.0)
    with pytest.raises(DomainError, match="not above it"):
        SensorHeight("ground", 0.0)
    with pytest.raises(DomainError, match="must be a number"):
        SensorHeight("sea", np.nan)
    with pytest.raises(DomainError, match="not above 'tree'"):
        SensorHeight("tree", 3.0)  # type: ignore[arg-type]
