"""The invented district: its relief, land cover, surface temperature, emissivity and reflectance.

Everything is painted on a fine grid of 15 m cells (rows downwards, columns eastwards); relief lives
on 90 m nodes and is bilinear between them. All of it is invented; no real place is shown.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.ndimage import gaussian_filter, map_coordinates
from scipy.spatial import cKDTree

Float = NDArray[np.float64]
Codes = NDArray[np.uint8]

ROWS, COLUMNS = 561, 603  # delivered 30 m pixels
CELL, PIXEL, NODE = 15.0, 30.0, 90.0  # m
BORDER = 2  # relief nodes beyond the district on every side

# Errors of a class's emissivity agree so far between the two bands, and between bands and broadband.
BAND_CORRELATION, BROADBAND_CORRELATION = 0.8, 0.7

SUN_AZIMUTH = 149.0  # deg from north, late morning


@dataclass(frozen=True)
class SurfaceClass:
    """What one kind of surface is like.

    Temperatures are those of level ground at 220 m; the emissivity uncertainty is one standard
    deviation of a whole class around its value and the same for the bands and the broadband value
    unless ``broadband_uncertainty`` says otherwise.
    """

    code: int
    name: str
    temperature: float  # K
    spread: float  # K, from parcel to parcel
    sun: float  # K per unit of illumination beyond that of level ground
    emissivity: tuple[float, float]  # bands 1 and 2
    broadband: float
    uncertainty: float
    broadband_uncertainty: float
    red: float
    near_infrared: float


# Temperatures of a fair July noon, invented. Emissivities lie inside the ranges usually quoted for
# such surfaces (Salisbury & D'Aria 1992, doi 10.1016/0034-4257(92)90092-X; Snyder et al. 1998,
# doi 10.1080/014311698214497; Kotthaus et al. 2014, doi 10.1016/j.isprsjprs.2014.05.005). Sand's
# broadband value is far below its band values: quartz dips at 8-9.5 um, where neither band looks.
CLASSES = (
    SurfaceClass(10, "open water", 292.6, 0.0, 0.0, (0.991, 0.987), 0.983, 0.003, 0.004, 0.035, 0.015),
    SurfaceClass(20, "woodland", 297.6, 0.6, 5.0, (0.984, 0.986), 0.983, 0.005, 0.006, 0.028, 0.340),
    SurfaceClass(31, "green crops", 299.8, 1.1, 8.0, (0.980, 0.982), 0.978, 0.006, 0.007, 0.045, 0.430),
    SurfaceClass(
        32, "ripe crops and stubble", 309.0, 2.0, 14.0, (0.962, 0.968), 0.950, 0.010, 0.012, 0.165, 0.270
    ),
    SurfaceClass(33, "pasture", 302.6, 1.2, 10.0, (0.976, 0.979), 0.973, 0.007, 0.008, 0.075, 0.310),
    SurfaceClass(40, "bare soil", 311.5, 1.8, 16.0, (0.960, 0.967), 0.945, 0.012, 0.015, 0.175, 0.225),
    SurfaceClass(50, "bare sand", 315.5, 1.0, 18.0, (0.950, 0.957), 0.905, 0.012, 0.012, 0.330, 0.390),
    SurfaceClass(61, "asphalt", 316.0, 1.2, 12.0, (0.957, 0.964), 0.952, 0.010, 0.012, 0.110, 0.130),
    SurfaceClass(62, "tile roofs", 314.0, 2.2, 12.0, (0.930, 0.938), 0.925, 0.012, 0.014, 0.170, 0.220),
    SurfaceClass(63, "metal roofs", 322.0, 3.0, 10.0, (0.220, 0.220), 0.200, 0.050, 0.050, 0.300, 0.320),
    SurfaceClass(70, "spoil heap", 311.0, 1.5, 18.0, (0.955, 0.960), 0.940, 0.012, 0.015, 0.070, 0.085),
)
(WATER, WOODLAND, GREEN_CROPS, RIPE_CROPS, PASTURE, SOIL, SAND, ASPHALT, TILES, METAL, HEAP) = (
    item.code for item in CLASSES
)


@dataclass(frozen=True)
class District:
    """The painted district; arrays are (fine rows, fine columns) unless said otherwise."""

    nodes: Float  # m, relief on the 90 m nodes, with its border
    height: Float  # m
    classes: Codes
    parcel: Float  # one standard normal number per parcel, spread over its cells
    temperature: Float  # K
    cloud: Float  # opacity of the cloud above, 0-1
    shadow: Float  # share of the direct sun taken by cloud, 0-1
    illumination: Float  # cosine of the sun's incidence over that on level ground


def fine_coordinates() -> tuple[Float, Float]:
    """East and south distances of the cells' centres from the district's north-west corner. [m]"""
    x = (np.arange(COLUMNS * 2) + 0.5) * CELL
    y = (np.arange(ROWS * 2) + 0.5) * CELL
    east, south = np.meshgrid(x, y)
    return east, south


def bilinear(nodes: Float, east: Float, south: Float) -> Float:
    """A field on the 90 m nodes at any place."""
    row, column = south / NODE - 0.5 + BORDER, east / NODE - 0.5 + BORDER
    return np.asarray(map_coordinates(nodes, [row, column], order=1, mode="nearest"))


def smooth_noise(random: np.random.Generator, shape: tuple[int, int], scale: float) -> Float:
    """Gaussian noise of unit spread, smooth over ``scale`` cells."""
    field = gaussian_filter(random.standard_normal(shape), scale, mode="reflect")
    return np.asarray((field - field.mean()) / field.std())


def river_line() -> Float:
    """Points along the river Ember, west to east. [m]"""
    x = np.arange(-3000.0, 22000.0, 10.0)
    y = 8300.0 + 2300.0 * np.sin(x / 2900.0 + 0.5) * np.exp(-(((x - 9000.0) / 9000.0) ** 2))
    y += 330.0 * np.sin(x / 520.0) + 90.0 * np.sin(x / 171.0 + 1.0)
    return np.stack([x, y], axis=1)


def relief(random: np.random.Generator) -> Float:
    """Height above sea level on the 90 m nodes: a valley, hills north and south-west, the heap. [m]"""
    rows, columns = round(ROWS * PIXEL / NODE) + 2 * BORDER, round(COLUMNS * PIXEL / NODE) + 2 * BORDER
    east, south = np.meshgrid(
        (np.arange(columns) + 0.5 - BORDER) * NODE, (np.arange(rows) + 0.5 - BORDER) * NODE
    )
    distance, _ = cKDTree(river_line()).query(np.stack([east, south], axis=-1))
    valley = 1.0 - np.exp(-((distance / 3600.0) ** 2))
    rough = smooth_noise(random, east.shape, 16.0) + 0.35 * smooth_noise(random, east.shape, 6.0)
    rough += 0.07 * smooth_noise(random, east.shape, 2.0)
    hills = 380.0 * np.exp(-(((east - 13500.0) / 5200.0) ** 2) - (((south - 1200.0) / 3600.0) ** 2))
    hills += 230.0 * np.exp(-(((east - 1800.0) / 4200.0) ** 2) - (((south - 15800.0) / 3300.0) ** 2))
    height = 232.0 - 14.0 * east / 18000.0 + valley * (85.0 + hills + 62.0 * rough)
    heap = np.hypot((east - 9750.0) / 420.0, (south - 10350.0) / 300.0)
    return np.asarray(np.maximum(height, 210.0) + 46.0 * np.exp(-(heap**2)))


def illumination(nodes: Float, sun_elevation: float) -> Float:
    """Cosine of the sun's incidence on the slope over that on level ground, on the fine grid."""
    down_south, down_east = np.gradient(nodes, NODE)
    elevation, azimuth = np.radians(sun_elevation), np.radians(SUN_AZIMUTH)
    towards_east, towards_south = np.sin(azimuth), -np.cos(azimuth)
    level = np.sin(elevation)
    slope = level - np.cos(elevation) * (down_east * towards_east + down_south * towards_south)
    ratio = slope / np.sqrt(1.0 + down_east**2 + down_south**2) / level
    return bilinear(ratio, *fine_coordinates())


def rotated(east: Float, south: Float, centre: tuple[float, float], degrees: float) -> tuple[Float, Float]:
    """Coordinates along axes turned about a centre. [m]"""
    angle = np.radians(degrees)
    x, y = east - centre[0], south - centre[1]
    return np.cos(angle) * x + np.sin(angle) * y, -np.sin(angle) * x + np.cos(angle) * y


def parcels(random: np.random.Generator, east: Float, south: Float) -> tuple[NDArray[np.intp], int]:
    """Number of the field each cell belongs to: a jittered lattice, long side east by north."""
    along, across = rotated(east, south, (9000.0, 8400.0), -24.0)
    a, c = np.meshgrid(np.arange(-14000.0, 14000.0, 420.0), np.arange(-14000.0, 14000.0, 230.0))
    a = a + 210.0 * (np.arange(a.shape[0])[:, np.newaxis] % 2)
    seeds = np.stack([a, c], axis=-1).reshape(-1, 2) + random.uniform(-85.0, 85.0, (a.size, 2))
    stretch = np.array([1.0, 1.5])
    _, number = cKDTree(seeds * stretch).query(np.stack([along, across], axis=-1) * stretch)
    return number, a.size


def countryside(
    random: np.random.Generator, nodes: Float, parcel: NDArray[np.intp], parcels_count: int
) -> Codes:
    """Fields, pasture and woods, before river, town and workings are cut into them."""
    east, south = fine_coordinates()
    height = bilinear(nodes, east, south)
    dealt = random.choice(
        np.array([GREEN_CROPS, RIPE_CROPS, PASTURE, SOIL], dtype=np.uint8),
        parcels_count,
        p=[0.40, 0.32, 0.17, 0.11],
    )
    classes = dealt[parcel]
    wild = smooth_noise(random, east.shape, 55.0) + 0.4 * smooth_noise(random, east.shape, 14.0)
    classes[height + 45.0 * wild > 352.0] = PASTURE
    wild += 0.25 * smooth_noise(random, east.shape, 4.0)
    classes[height + 85.0 * wild > 405.0] = WOODLAND
    copse = smooth_noise(random, east.shape, 22.0) + 0.2 * smooth_noise(random, east.shape, 4.0)
    classes[copse > 1.8] = WOODLAND
    return np.asarray(classes)


def cut_town(random: np.random.Generator, classes: Codes) -> None:
    """The town of Emberholt: streets on a turned lattice, tiled blocks with gardens, a works quarter."""
    east, south = fine_coordinates()
    along, across = rotated(east, south, (6100.0, 7900.0), 17.0)
    edge = 1.0 + 0.16 * smooth_noise(random, east.shape, 30.0)
    town = np.hypot(along / 1750.0, across / 1250.0) < edge
    houses = smooth_noise(random, east.shape, 1.3) > np.hypot(along / 1750.0, across / 1250.0) * 1.5 - 0.8
    classes[town] = np.where(houses, TILES, PASTURE)[town]
    streets = (along % 105.0 < 17.0) | (across % 150.0 < 17.0)
    avenues = (np.abs(along) < 24.0) | (np.abs(across) < 24.0) | (np.hypot(along, across) < 95.0)
    classes[town & (streets | avenues)] = ASPHALT
    park = np.hypot((along - 620.0) / 260.0, (across + 380.0) / 170.0) < 1.0
    classes[park] = np.where(copse_like(random, east.shape), WOODLAND, PASTURE)[park]
    works = (np.abs(along - 2650.0) < 700.0) & (np.abs(across - 250.0) < 620.0)
    hall = ((along - 1950.0) % 200.0 < 140.0) & ((across + 370.0) % 155.0 < 105.0)
    number = (np.floor((along - 1950.0) / 200.0) * 7 + np.floor((across + 370.0) / 155.0) * 3).astype(int) % 5
    classes[works] = ASPHALT
    classes[works & hall] = np.where(number < 3, METAL, TILES)[works & hall]


def copse_like(random: np.random.Generator, shape: tuple[int, int]) -> NDArray[np.bool_]:
    """Loose groups of trees."""
    return np.asarray(smooth_noise(random, shape, 2.5) > 0.1)


def cut_roads_and_airfield(classes: Codes) -> None:
    """Three trunk roads out of the town and an airfield in the south-east."""
    east, south = fine_coordinates()
    wave = 160.0 * np.sin(east / 1500.0)
    for slope, start in ((0.31, 6050.0), (-0.42, 10500.0)):
        classes[np.abs(south - start - slope * east - wave) < 17.0] = ASPHALT
    classes[np.abs(east - 6100.0 - 0.12 * (south - 7900.0) - 200.0 * np.sin(south / 1900.0)) < 15.0] = ASPHALT
    along, across = rotated(east, south, (13600.0, 13300.0), -24.0)
    classes[(np.abs(along) < 1500.0) & (np.abs(across) < 300.0)] = PASTURE
    runway = (np.abs(along) < 1350.0) & (np.abs(across + 120.0) < 45.0)
    apron = (np.abs(along - 250.0) < 330.0) & (np.abs(across - 130.0) < 120.0)
    classes[runway | apron] = ASPHALT
    classes[(np.abs(along - 250.0) < 100.0) & (np.abs(across - 210.0) < 50.0)] = METAL


def cut_workings_and_water(random: np.random.Generator, classes: Codes) -> None:
    """The sand pit, the spoil heap, the reservoir and the river with its sand banks."""
    east, south = fine_coordinates()
    ragged = smooth_noise(random, east.shape, 18.0)
    pit = np.hypot((east - 5200.0) / 760.0, (south - 13300.0) / 520.0) + 0.13 * ragged
    classes[pit < 1.0] = SAND
    classes[pit < 0.22] = WATER
    heap = np.hypot((east - 9750.0) / 520.0, (south - 10350.0) / 370.0) + 0.08 * ragged
    classes[heap < 1.0] = HEAP
    lake = np.hypot((east - 14300.0) / 1500.0, (south - 9300.0) / 760.0) + 0.17 * ragged
    classes[lake < 1.08] = PASTURE
    classes[lake < 1.0] = WATER
    near = 500.0  # m; farther cells need no distance
    distance, _ = cKDTree(river_line()).query(np.stack([east, south], axis=-1), distance_upper_bound=near)
    width = 46.0 + 22.0 * np.sin(east / 900.0) + east / 500.0
    bank = (distance < width + 70.0) & (smooth_noise(random, east.shape, 12.0) > 1.1)
    classes[bank] = SAND
    bridges = classes == ASPHALT
    classes[(distance < width) & ~bridges] = WATER


def clouds(random: np.random.Generator, sun_elevation: float) -> tuple[Float, Float]:
    """Opacity of fair-weather clouds in the east with thin rims, and the shadow they cast."""
    east, south = fine_coordinates()
    lumps = smooth_noise(random, east.shape, 38.0) + 0.35 * smooth_noise(random, east.shape, 11.0)
    region = 1.9 * np.exp(-(((east - 15200.0) / 2700.0) ** 2) - (((south - 6600.0) / 3600.0) ** 2))
    inland = np.minimum(np.minimum(east, COLUMNS * PIXEL - east), np.minimum(south, ROWS * PIXEL - south))
    region -= 4.0 * np.exp(-((inland / 700.0) ** 2))  # none near the edges, so that every shadow is whole
    opacity = np.clip((lumps + region - 1.85) / 0.6, 0.0, 1.0)
    reach = 1500.0 / np.tan(np.radians(sun_elevation))  # cloud base 1.5 km above the ground
    rows = round(reach * np.cos(np.radians(SUN_AZIMUTH)) / CELL)
    columns = round(-reach * np.sin(np.radians(SUN_AZIMUTH)) / CELL)
    return opacity, np.roll(opacity, (rows, columns), axis=(0, 1))


def surface_temperature(
    random: np.random.Generator, classes: Codes, height: Float, *, lit: Float, parcel: Float, shadow: Float
) -> Float:
    """Temperature of every cell. [K]"""
    index = class_index(classes)
    base = np.array([item.temperature for item in CLASSES])[index]
    spread = np.array([item.spread for item in CLASSES])[index]
    sun = np.array([item.sun for item in CLASSES])[index]
    temperature = base + spread * parcel + sun * (lit - 1.0) - 0.0065 * (height - 220.0)
    temperature += 0.5 * smooth_noise(random, classes.shape, 4.0) * (classes != WATER)
    temperature -= 0.55 * sun * shadow  # a few minutes of shade
    east, south = fine_coordinates()
    lake = np.hypot((east - 14300.0) / 1500.0, (south - 9300.0) / 760.0) < 1.4
    calm = 0.35 * smooth_noise(random, classes.shape, 25.0)
    temperature[classes == WATER] = (292.4 + 1.9 * lake + calm)[classes == WATER]
    return smoulder(random, classes, temperature)


def smoulder(random: np.random.Generator, classes: Codes, temperature: Float) -> Float:
    """Warm flanks and glowing vents of the spoil heap. [K]"""
    east, south = fine_coordinates()
    heated = temperature.copy()
    for centre, radius, excess in (
        ((9620.0, 10290.0), 90.0, 260.0),
        ((9840.0, 10410.0), 60.0, 340.0),
        ((9930.0, 10280.0), 35.0, 420.0),
        ((9540.0, 10440.0), 140.0, 34.0),
        ((9760.0, 10200.0), 110.0, 22.0),
    ):
        distance = np.hypot(east - centre[0], south - centre[1])
        uneven = np.clip(1.0 + 0.3 * smooth_noise(random, classes.shape, 1.5), 0.2, 1.6)
        heated += excess * np.exp(-((distance / radius) ** 2)) * uneven * (classes == HEAP)
    return np.asarray(np.minimum(heated, 690.0))


def class_index(classes: Codes) -> NDArray[np.intp]:
    """Place of each cell's class in :data:`CLASSES`."""
    table = np.zeros(256, dtype=np.intp)
    for place, item in enumerate(CLASSES):
        table[item.code] = place
    return table[classes]


def paint(random: np.random.Generator, sun_elevation: float) -> District:
    """Paint the whole district."""
    east, south = fine_coordinates()
    nodes = np.round(relief(random) * 4.0) / 4.0
    height = bilinear(nodes, east, south)
    parcel, count = parcels(random, east, south)
    classes = countryside(random, nodes, parcel, count)
    cut_town(random, classes)
    cut_roads_and_airfield(classes)
    cut_workings_and_water(random, classes)
    per_parcel = np.clip(random.standard_normal(count), -2.0, 2.0)[parcel]
    cloud, shadow = clouds(random, sun_elevation)
    lit = illumination(nodes, sun_elevation)
    temperature = surface_temperature(random, classes, height, lit=lit, parcel=per_parcel, shadow=shadow)
    return District(nodes, height, classes, per_parcel, temperature, cloud, shadow, lit)


def mixed(correlation: float, shared: float, own: float) -> float:
    """A unit draw that is correlated so far with another one."""
    return float(correlation * shared + (1.0 - correlation**2) ** 0.5 * own)


def emissivities(
    random: np.random.Generator, district: District
) -> tuple[list[Float], list[dict[str, float]]]:
    """Emissivity of bands 1, 2 and broadband in every cell, and the draw of every class.

    Each class is off its table value by one draw a class, correlated between the bands and with the
    broadband value; parcels scatter a little around that.
    """
    values = np.empty((3, len(CLASSES)))
    draws = []
    for place, item in enumerate(CLASSES):
        shared, second, broad = random.standard_normal(3)
        values[0, place] = item.emissivity[0] + item.uncertainty * shared
        values[1, place] = item.emissivity[1] + item.uncertainty * mixed(BAND_CORRELATION, shared, second)
        values[2, place] = item.broadband + item.broadband_uncertainty * mixed(
            BROADBAND_CORRELATION, shared, broad
        )
        values[:, place] = np.minimum(values[:, place], 0.995)
        draws.append(dict(zip(("band_1", "band_2", "broadband"), values[:, place].tolist(), strict=True)))
    index = class_index(district.classes)
    scatter = 0.0015 * district.parcel * (district.classes != WATER)
    return [np.minimum(row[index] + scatter, 0.996) for row in values], draws


def reflectance(random: np.random.Generator, district: District, band: str) -> Float:
    """Reflectance of the fine red or near-infrared band, clouds and their shadows included."""
    index = class_index(district.classes)
    ground = np.array([getattr(item, band) for item in CLASSES])[index]
    ground = ground * (1.0 + 0.06 * district.parcel * (district.classes != WATER))
    ground = ground * (0.25 + 0.75 * district.illumination) * (1.0 - 0.6 * district.shadow)
    ground = ground * (1.0 + 0.01 * random.standard_normal(ground.shape))
    return np.asarray((1.0 - district.cloud) * ground + district.cloud * 0.62)
