"""The compiled interpolation against its readable statement and against itself."""

from __future__ import annotations

import numpy as np
import pytest

from groundglow.atmosphere.explicit import StatedUncertainty, explicit_grid
from groundglow.atmosphere.grid import AirTerms, AtmosphereGrid
from groundglow.atmosphere.interpolate import (
    field_names,
    interpolate,
    interpolate_anywhere,
    interpolate_plainly,
    pack,
)
from groundglow.errors import DomainError


def grid_of(places: tuple[int, int], heights: int, angles: int, temperatures: int = 1) -> AtmosphereGrid:
    """A grid of random terms."""
    random = np.random.default_rng(5)
    nodes = (*places, heights, angles)

    def terms() -> AirTerms:
        return AirTerms(
            transmittance=random.uniform(0.3, 0.9, (temperatures, *nodes)),
            path_radiance=random.uniform(0.0, 4.0, nodes),
            transmitted_sky_radiance=random.uniform(0.0, 4.0, nodes),
            sky_radiance=random.uniform(0.0, 4.0, nodes[:3]),
            sky_flux=random.uniform(200.0, 400.0, nodes[:3]),
        )

    return AtmosphereGrid(
        x=1000.0 * np.arange(places[1]),
        y=1000.0 * np.arange(places[0]),
        height=np.linspace(0.0, 2000.0, heights),
        view_zenith_angle=np.linspace(0.0, 50.0, angles),
        surface_temperature=np.linspace(280.0, 320.0, temperatures),
        terms=terms(),
        causes={name: terms() for name in ("water_vapour", "air_temperature", "absorption_model")},
    )


SHAPES = [
    ((1, 1), 1, 1, 1),
    ((1, 1), 8, 1, 1),
    ((1, 1), 1, 6, 3),
    ((1, 1), 8, 6, 1),
    ((3, 1), 4, 1, 1),
    ((1, 3), 1, 4, 3),
    ((3, 4), 5, 4, 3),
]


def pixels(rows: int = 37, cols: int = 141) -> tuple[np.ndarray, np.ndarray, np.ndarray, np.ndarray]:
    """Places, heights and secants that reach beyond the nodes, some unknown."""
    random = np.random.default_rng(6)
    x = np.linspace(-200.0, 3300.0, cols)
    y = np.linspace(2300.0, -200.0, rows)
    height = random.uniform(-50.0, 2100.0, (rows, cols)).astype(np.float32)
    secant = random.uniform(1.0, 1.6, (rows, cols)).astype(np.float32)
    height[3, 5] = np.nan
    secant[4, 6] = np.nan
    return x, y, height, secant


@pytest.mark.parametrize(("places", "heights", "angles", "temperatures"), SHAPES)
def test_kernel_agrees_with_the_plain_statement(
    places: tuple[int, int], heights: int, angles: int, temperatures: int
) -> None:
    stack = pack(grid_of(places, heights, angles, temperatures))
    x, y, height, secant = pixels()
    plain = interpolate_plainly(stack, x[np.newaxis], y[:, np.newaxis], height, secant)
    found = interpolate(stack, x, y, height, secant)
    assert found.shape == (stack.fields, 37, 141)
    # 1e-3 m of height in float32 and the rounding of four products.
    np.testing.assert_allclose(found, plain, rtol=2e-5)
    freely = interpolate_anywhere(stack, *np.meshgrid(x, y), height, secant)
    np.testing.assert_allclose(freely, plain, rtol=2e-5)


def test_fields_are_named_in_their_order() -> None:
    grid = grid_of((1, 1), 1, 1, 3)
    names = field_names(3, tuple(grid.causes))
    assert names[:6] == (
        "transmittance_0", "transmittance_1", "transmittance_2",
        "path_radiance", "transmitted_sky_radiance", "sky_flux",
    )  # fmt: skip
    found = dict(
        zip(names, interpolate(pack(grid), np.zeros(1), np.zeros(1), 0.0, 1.0)[:, 0, 0], strict=True)
    )
    assert found["transmittance_1"] == np.float32(grid.terms.transmittance[1].item())
    water = grid.causes["water_vapour"]
    assert found["water_vapour.path_radiance"] == np.float32(water.path_radiance.item())
    assert found["water_vapour.sky_flux"] == np.float32(water.sky_flux.item())


def test_nodes_are_met_exactly_and_the_outermost_values_are_kept_beyond_them() -> None:
    grid = grid_of((1, 1), 3, 2)
    height = np.array([[-500.0, 0.0, 1000.0, 2000.0, 9000.0]], dtype=np.float32)
    found = interpolate(pack(grid), np.zeros(5), np.zeros(1), height, 1.0)[0, 0]
    expected = grid.terms.transmittance[0, 0, 0, [0, 0, 1, 2, 2], 0].astype(np.float32)
    np.testing.assert_array_equal(found, expected)


def test_unknown_coordinates_give_unknown_air_only_where_they_matter() -> None:
    x, y, height, secant = pixels()
    both = interpolate(pack(grid_of((1, 1), 3, 2)), x, y, height, secant)
    assert np.isnan(both[:, 3, 5]).all()
    assert np.isnan(both[:, 4, 6]).all()
    assert np.isfinite(np.delete(both.reshape(both.shape[0], -1), [3 * 141 + 5, 4 * 141 + 6], axis=1)).all()
    everywhere = interpolate(pack(explicit_grid(0.8, 1.0, 2.0, sky_flux=300.0)), x, y, height, secant)
    assert np.isfinite(everywhere).all()


def test_a_tile_does_not_depend_on_how_the_scene_is_cut() -> None:
    stack = pack(grid_of((3, 4), 5, 4, 3))
    x, y, height, secant = pixels()
    whole = interpolate(stack, x, y, height, secant)
    part = interpolate(stack, x[70:], y[11:], height[11:, 70:], secant[11:, 70:])
    np.testing.assert_array_equal(part, whole[:, 11:, 70:])


def test_one_number_for_the_whole_tile_agrees_with_a_raster_of_it() -> None:
    stack = pack(grid_of((3, 4), 5, 4))
    x, y, height, secant = pixels()
    one_angle = interpolate(stack, x, y, height, 1.2)
    raster = interpolate(stack, x, y, height, np.full_like(height, 1.2))
    np.testing.assert_allclose(one_angle, raster, rtol=2e-6)
    one_height = interpolate(stack, x, y, 700.0, secant)
    raster = interpolate(stack, x, y, np.full_like(height, 700.0), secant)
    np.testing.assert_allclose(one_height, raster, rtol=2e-6)


def test_an_output_array_is_filled_and_checked() -> None:
    stack = pack(explicit_grid(0.8, 1.0, 2.0, uncertainty=StatedUncertainty(transmittance=0.02)))
    out = np.empty((stack.fields, 2, 3), dtype=np.float32)
    assert interpolate(stack, np.zeros(3), np.zeros(2), 0.0, 1.0, out) is out
    assert (out[0] == np.float32(0.8)).all()
    with pytest.raises(DomainError, match="output of the interpolation"):
        interpolate(stack, np.zeros(3), np.zeros(2), 0.0, 1.0, out[:, :1])
    with pytest.raises(DomainError, match="height has shape"):
        interpolate(stack, np.zeros(3), np.zeros(2), np.zeros((3, 2), dtype=np.float32), 1.0)
    with pytest.raises(DomainError, match="two-dimensional"):
        interpolate_anywhere(stack, np.zeros(3), np.zeros(3), 0.0, 1.0)
    with pytest.raises(DomainError, match="one-dimensional"):
        interpolate(stack, np.zeros((1, 3)), np.zeros(3), 0.0, 1.0)
