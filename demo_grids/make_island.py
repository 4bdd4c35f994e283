"""Make the layers of an invented island: invented demonstration data, no real place.

The Isle of Mirrowmere, which does not exist, lies in open ocean between 12 and 14 degrees
north. Every number here was made by this script from one seed; no measured data went in. The
relief comes from a small landscape model (uplift against stream-power incision, in which the
rock sets the resistance, then a drowned coast); the rain from moisture carried by a trade wind
over that relief; runoff from rain and temperature by Turc's formula; plant cover from rain,
height and rock. So the layers agree with one another, as those of a real place would.

Run ``python demo_grids/make_island.py`` (about fifteen seconds); it writes beside itself:

==================  =====================================================================
lithology.tif       rock codes, 0.0025 degrees, 0 = sea; legend.csv names them
elevation.tif       m, 0.005 degrees
climate.nc          tas (degC) and pr (mm yr-1), annual mean climatology, 0.02 degrees,
                    latitude ascending, reaches beyond the coast
runoff.tif          mm yr-1, 0.01 degrees, with one gap under a "cloud"
vegetation.tif      NDVI as int16 x 0.0001, 0.005 degrees
landcover.tif       class codes, 0.005 degrees; landcover.csv names them
districts.gpkg      districts: one has an islet, one an enclave, one a lake for a hole;
                    part of the land lies in none
==================  =====================================================================
"""

from __future__ import annotations

import argparse
import csv
import heapq
from dataclasses import dataclass
from pathlib import Path

import geopandas as gpd
import numpy as np
import pyogrio
import rasterio
import rasterio.features
import xarray as xr
from rasterio.transform import Affine, from_origin
from scipy import ndimage
from scipy.sparse import coo_array
from scipy.sparse.csgraph import dijkstra
from shapely import set_precision
from shapely.geometry import LineString, MultiPolygon, Polygon, shape
from shapely.ops import linemerge, polygonize, unary_union

SEED = 20250
ROWS, COLS, STEP = 700, 900, 0.0025
WEST, NORTH = -31.1, 13.85
KM_X, KM_Y = STEP * 108.45, STEP * 110.63  # km per cell near 13 degrees north
PEAK_M = 3200.0
SEA_LEVEL_C, LAPSE_C_PER_KM = 24.0, 6.0
TREELINE_M = 2350.0
WIND_TO = (-0.62, -0.78)  # the trade wind blows from the north-east: east and north parts
NOTE = "invented demonstration data; no real place"
CREDIT = {"source": NOTE, "attribution": "Saprolite project, " + NOTE}

LEGEND = (
    (1, "basalt", "Old Kettle shield lavas (invented)"),
    (2, "andesite", "Tarn Vey volcanics (invented)"),
    (3, "rhyolite", "Pale Dome rhyolite (invented)"),
    (4, "granite", "Hollin granite (invented)"),
    (5, "gneiss", "Spine gneiss (invented)"),
    (6, "schist", "Mica Water schist (invented)"),
    (7, "ultramafic rock", "Greenstair ophiolite (invented)"),
    (8, "shale", "Lower Quill shale (invented)"),
    (9, "sandstone", "Brannoch sandstone (invented)"),
    (10, "shale", "Upper Quill shale (invented)"),
    (11, "limestone", "Fold Ledge limestone (invented)"),
    (12, "limestone", "Chalkmere plateau limestone (invented)"),
    (13, "dolomite", "Sallow dolomite (invented)"),
    (14, "mixed sediment", "Dry Shore terraces (invented)"),
    (15, "alluvium", "valley and coastal alluvium (invented)"),
    (16, "water", "lakes (invented)"),
)
LAND_COVER = (
    (1, "cloud forest"),
    (2, "rain forest"),
    (3, "dry forest"),
    (4, "shrubland"),
    (5, "grassland"),
    (6, "cropland"),
    (7, "alpine scrub"),
    (8, "bare rock and young lava"),
    (9, "water"),
    (10, "wetland"),
)
# how easily running water cuts each rock, relative
ERODIBILITY = dict(
    zip(
        range(17),
        (1, 0.9, 0.8, 0.6, 0.45, 0.65, 1.0, 0.6, 1.7, 0.75, 1.7, 0.6, 0.45, 0.6, 1.6, 1.5, 1.5),
        strict=True,
    )
)


@dataclass(frozen=True)
class Frame:
    """Positions of the cells: km east and north, and along and across the mountain range."""

    x: np.ndarray
    y: np.ndarray
    along: np.ndarray
    across: np.ndarray  # positive to the south-west, the lee side

    def bump(self, along: float, across: float, wide: float, high: float) -> np.ndarray:
        """Return a bell centred on a point given in range coordinates."""
        distance = ((self.along - along) / wide) ** 2 + ((self.across - across) / high) ** 2
        return np.exp(-distance)


def make_frame() -> Frame:
    """Lay out the cells, with the range running west-north-west to east-south-east."""
    x = ((np.arange(COLS) + 0.5) * KM_X)[None, :] + np.zeros((ROWS, 1))
    y = ((ROWS - np.arange(ROWS) - 0.5) * KM_Y)[:, None] + np.zeros((1, COLS))
    east, north = x - 120.0, y - 97.0
    cosine, sine = np.cos(np.radians(28)), np.sin(np.radians(28))
    return Frame(x, y, cosine * east - sine * north, -sine * east - cosine * north)


def noise(rng: np.random.Generator, wave_km: float, octaves: int, gain: float = 0.5) -> np.ndarray:
    """Return smooth noise of about unit spread, the longest wave first."""
    total, weight = np.zeros((ROWS, COLS)), 0.0
    for octave in range(octaves):
        cells = max(2.0, wave_km / 2**octave / KM_Y / 2)
        down, over = _spline(ROWS, cells), _spline(COLS, cells)
        coarse = rng.standard_normal((down.shape[1], over.shape[1]))
        total += gain**octave * (down @ coarse @ over.T) / 0.48
        weight += gain ** (2 * octave)
    return total / np.sqrt(weight)


def _spline(count: int, cells: float) -> np.ndarray:
    """Return the matrix that spreads knots over cells with cubic B-splines."""
    place = np.arange(count)[:, None] / cells + 1.5
    far = np.abs(place - np.arange(int(count / cells) + 5)[None, :])
    inner = 2 / 3 - far**2 + far**3 / 2
    return np.where(far < 1, inner, np.clip(2 - far, 0, None) ** 3 / 6)


def first_outline(frame: Frame, rng: np.random.Generator) -> np.ndarray:
    """Return a field that is positive on land, before rivers and the sea shape the coast."""
    along = frame.along + 5 * noise(rng, 45, 3)
    across = frame.across + 5 * noise(rng, 45, 3) - 0.0022 * frame.along**2
    field = 1.0 - np.hypot(along / 96.0, (across + 4) / 45.0)
    field += 0.55 * frame.bump(66, -12, 26, 30)  # the shield volcano builds out the east
    field += 0.50 * frame.bump(-22, -58, 9, 20)  # a granite headland to the north
    field += 0.35 * frame.bump(-72, 30, 26, 17)  # the limestone plateau in the south-west
    field -= 0.75 * frame.bump(14, 52, 22, 17)  # the great bay of the south coast
    field -= 0.50 * frame.bump(-56, -40, 17, 15)  # a gulf west of the headland
    field -= 0.45 * frame.bump(18, -50, 15, 15)  # and one east of it
    field += 0.13 * noise(rng, 38, 6, 0.6)
    field += 1.05 * frame.bump(20, 60, 6.5, 4.5)  # an islet in the great bay
    field += 0.85 * frame.bump(27, 67, 2.5, 2.5)
    return field


def bedrock(frame: Frame, rng: np.random.Generator) -> np.ndarray:
    """Return rock codes before alluvium and lakes: core, fold belt, plateau, volcanoes."""
    along = frame.along + 3 * noise(rng, 25, 3)
    across = frame.across - 0.0022 * frame.along**2
    across = across + 4.0 * noise(rng, 60, 2) + 0.9 * noise(rng, 10, 4)
    code = np.full((ROWS, COLS), 5, dtype=np.uint8)
    code[across < -17] = 6
    code[(across > 5) & (across <= 12)] = 6
    sliver = np.abs(across - 11 - 1.5 * noise(rng, 30, 2)) < 0.9 * noise(rng, 22, 2) + 0.35
    # strata bent into plunging folds: what crops out depends on the depth in the fold
    wave = 12.0 + 2.0 * np.sin(along / 37.0)
    level = np.cos(2 * np.pi * (across - 14.0) / wave) + 1.05 * np.sin(along / 9.5 + across / 30)
    level += 0.25 * noise(rng, 16, 4)
    belt = across > 12
    for top, rock in ((9.0, 8), (0.85, 9), (0.35, 10), (-0.45, 11), (-0.85, 9), (-1.35, 8)):
        code[belt & (level < top)] = rock
    code[sliver & (across > 5)] = 7
    edge = across + 0.16 * (along + 60) + 2.5 * noise(rng, 24, 4)
    plateau = (edge > 25) & (along < -8)
    code[plateau] = 12
    code[plateau & (edge < 28.5)] = 13
    code[(across > 30 + 2.0 * noise(rng, 20, 4)) & (along >= -8)] = 14

    lobes = 1 + 0.16 * noise(rng, 26, 4)
    pluton = np.hypot((along + 26) / 21.0, (across + 21) / 19.0) < lobes
    code[pluton] = 4
    code[np.hypot((along - 22) / 9.0, (across + 4) / 5.0) < lobes] = 4
    arc = np.hypot((along - 44) / 20.0, (across + 20) / 15.0) < lobes
    code[arc] = 2
    code[np.hypot((along + 74) / 10.0, (across + 20) / 8.0) < lobes] = 2
    code[np.hypot(along - 34, (across + 17) / 0.8) < 4.0 * lobes] = 3
    angle = np.arctan2(frame.across + 10, frame.along - 68)
    flows = 1 + 0.07 * np.sin(5 * angle) + 0.05 * np.sin(11 * angle + 1) + 0.08 * noise(rng, 16, 4)
    code[np.hypot(frame.along - 68, frame.across + 10) < 31.0 * flows] = 1
    code[np.hypot(frame.along - 23, frame.across - 62) < 13] = 1
    return code


class Relief:
    """Heights on one resolution, worn down by running water."""

    neighbours = ((-1, -1), (-1, 0), (-1, 1), (0, -1), (0, 1), (1, -1), (1, 0), (1, 1))

    def __init__(self, height: np.ndarray, land: np.ndarray, cell_km: float) -> None:
        land = land.copy()
        land[[0, -1], :] = False
        land[:, [0, -1]] = False
        self.land, self.cell_km = land, cell_km
        self.height = np.where(land, np.maximum(height, 0.01), 0.0)
        self.inside = np.flatnonzero(land)

    def fill(self) -> None:
        """Raise every hollow until it spills (priority flood from the sea)."""
        rows, cols = self.height.shape
        height = self.height.ravel().tolist()
        todo = self.land.ravel().tolist()
        offsets = [i * cols + j for i, j in self.neighbours]
        shore = ndimage.binary_dilation(self.land, np.ones((3, 3))) & ~self.land
        heap = [(0.0, cell) for cell in np.flatnonzero(shore).tolist()]
        while heap:
            level, cell = heapq.heappop(heap)
            for offset in offsets:
                other = cell + offset
                if todo[other]:
                    todo[other] = False
                    if height[other] <= level:
                        height[other] = level + 0.01
                    heapq.heappush(heap, (height[other], other))
        self.height = np.array(height).reshape(rows, cols)

    def drain(self) -> tuple[np.ndarray, np.ndarray, np.ndarray, np.ndarray]:
        """Return land cells from low to high, their receivers, lengths, and drained areas."""
        flat, cols = self.height.ravel(), self.height.shape[1]
        here = flat[self.inside]
        steepest = np.zeros(here.size)
        receiver = self.inside.copy()
        length = np.full(here.size, self.cell_km)
        for i, j in self.neighbours:
            far = self.cell_km * float(np.hypot(i, j))
            other = self.inside + i * cols + j
            slope = (here - flat[other]) / far
            better = slope > steepest
            steepest[better] = slope[better]
            receiver[better] = other[better]
            length[better] = far
        order = np.argsort(here, kind="stable")
        cells, receiver, length = self.inside[order], receiver[order], length[order]
        area = [self.cell_km**2] * flat.size
        for cell, to in zip(cells[::-1].tolist(), receiver[::-1].tolist(), strict=True):
            if to != cell:
                area[to] += area[cell]
        return cells, receiver, length, np.array(area)

    def wear(self, uplift: np.ndarray, ease: np.ndarray, steps: int, smooth: float) -> None:
        """Uplift, let rivers cut (implicitly, so any step is stable), let slopes creep."""
        for _ in range(steps):
            cells, receiver, length, area = self.drain()
            lifted = (self.height + uplift * self.land).ravel()
            cut = ease.ravel()[cells] * area[cells] ** 0.45 / length
            height = lifted.tolist()
            for cell, to, rate in zip(cells.tolist(), receiver.tolist(), cut.tolist(), strict=True):
                if to != cell:
                    low = height[to]
                    if height[cell] > low:
                        height[cell] = (height[cell] + rate * low) / (1.0 + rate)
            self.height = np.array(height).reshape(self.height.shape)
            creep = ndimage.gaussian_filter(self.height, 1.0) - self.height
            self.height += np.where(self.land, smooth * creep, 0.0)


def shrink(field: np.ndarray, factor: int) -> np.ndarray:
    """Return block means."""
    rows, cols = field.shape
    return field.reshape(rows // factor, factor, cols // factor, factor).mean(axis=(1, 3))


def grow(field: np.ndarray, factor: int) -> np.ndarray:
    """Return a field on cells a whole number of times finer (linear)."""
    rows, cols = field.shape
    i = (np.arange(rows * factor) + 0.5) / factor - 0.5
    j = (np.arange(cols * factor) + 0.5) / factor - 0.5
    return ndimage.map_coordinates(field, np.meshgrid(i, j, indexing="ij"), order=1, mode="nearest")


def volcanoes(frame: Frame, rng: np.random.Generator) -> np.ndarray:
    """Return the heights to which eruptions build: a shield with a caldera, and lesser cones."""
    rough = 1 + 0.03 * noise(rng, 12, 4)
    radius = np.hypot(frame.along - 68, frame.across + 10)
    shield = 2350 * np.clip(1 - radius / 36, 0, None) ** 1.15
    shield = np.where(radius < 2.6 * rough, np.minimum(shield, 1900), shield) * rough
    arc = np.hypot((frame.along - 41) / 1.3, frame.across + 20)
    cone = 2250 * np.exp(-arc / 6.5)
    islet = 330 * np.exp(-np.hypot(frame.along - 20, frame.across - 60) / 4)
    return np.maximum(np.maximum(shield, cone), islet)


def make_relief(
    frame: Frame, outline: np.ndarray, rock: np.ndarray, rng: np.random.Generator
) -> np.ndarray:
    """Return heights in m, negative where the sea is."""
    land = ndimage.binary_fill_holes(outline > 0)
    coast_km = ndimage.distance_transform_edt(land, sampling=(KM_Y, KM_X))
    ridge = frame.across - 0.0022 * frame.along**2 + 5 * noise(rng, 50, 2) + 4
    uplift = 0.10 + 1.1 * np.exp(-((ridge / 15.0) ** 2)) * np.clip(
        1.25 - np.abs(frame.along + 22) / 100, 0, 1
    )
    uplift += 0.55 * frame.bump(-26, -20, 18, 15) + 0.2 * frame.bump(-70, 34, 25, 15)
    uplift += 0.22 * np.exp(-(((ridge - 26) / 8.0) ** 2))
    uplift *= np.clip(coast_km / 14.0, 0.06, 1.0) ** 0.8 * (1 + 0.25 * noise(rng, 20, 3))
    ease = np.vectorize(ERODIBILITY.get, otypes=[float])(rock)
    ease *= np.exp(0.35 * noise(rng, 3, 3))
    built = volcanoes(frame, rng)

    height = shrink(coast_km, 4) * (1 + 0.2 * shrink(noise(rng, 10, 4), 4))
    # heights scale with uplift, so the coarse pass is free to choose its unit
    lift = uplift
    for factor, steps, rate in ((4, 80, 0.07), (2, 24, 0.11), (1, 7, 0.12)):
        relief = Relief(height, shrink(land.astype(float), factor) > 0.5, KM_Y * factor)
        relief.fill()
        relief.wear(shrink(lift, factor), shrink(ease, factor) * rate, steps, 0.06)
        height = relief.height
        if factor == 4:
            unit = PEAK_M * 1.1 / height.max()
            height, lift = height * unit, uplift * unit * 0.6
        if factor == 2:
            height = np.maximum(height, shrink(built * np.clip(coast_km / 4, 0, 1) ** 0.7, 2))
        if factor > 1:
            height = grow(height, 2)
    # the sea has risen since: it drowns the lower valleys
    height = height * (PEAK_M + 22) / height.max() - 22 - 9 * noise(rng, 30, 2)
    return keep_large(np.where(land, height, -20.0))


def keep_large(height: np.ndarray) -> np.ndarray:
    """Return the heights without specks of land and without seas inside the land."""
    land = ndimage.binary_fill_holes(height > 0)
    number, _ = ndimage.label(land)
    sizes = np.bincount(number.ravel())
    large = sizes > 30
    large[0] = False
    return np.where(large[number], np.maximum(height, 1.0), -20.0)


@dataclass(frozen=True)
class Island:
    """The finished ground: heights (m), rock codes (0 = sea), land, lakes, drained area (km2)."""

    frame: Frame
    height: np.ndarray
    rock: np.ndarray
    land: np.ndarray
    area: np.ndarray
    slope: np.ndarray


def lay_sediment(
    frame: Frame, height: np.ndarray, rock: np.ndarray, rng: np.random.Generator
) -> Island:
    """Add lakes, valley floors and coastal plains to the bedrock map."""
    land = height > 0
    relief = Relief(height, land, KM_Y)
    relief.fill()
    area = relief.drain()[3].reshape(height.shape)
    filled = np.where(land, relief.height, 0.0)
    wobble = noise(rng, 8, 4)

    lake = np.zeros_like(land)
    for along, across, wide, high, rise in ((-8, 9, 8, 5, 45), (31, 12, 5, 4, 30)):
        basin = frame.bump(along, across, wide, high) * (1 + 0.25 * wobble) > 0.37
        level = np.percentile(filled[basin], 12) + rise
        lake |= _largest(ndimage.binary_opening(basin & (filled < level)))
        filled[lake & basin] = level
    caldera = np.hypot(frame.along - 68, frame.across + 10) < 1.9 * (1 + 0.12 * wobble)
    lake |= caldera
    filled[caldera] = np.median(filled[caldera])

    channel = land & (area > 18)
    _, near = ndimage.distance_transform_edt(~channel, sampling=(KM_Y, KM_X), return_indices=True)
    reach = np.hypot(
        (near[0] - np.arange(ROWS)[:, None]) * KM_Y, (near[1] - np.arange(COLS)[None, :]) * KM_X
    )
    above = filled - filled[near[0], near[1]]
    size = np.sqrt(area[near[0], near[1]])
    slope = np.hypot(*np.gradient(ndimage.gaussian_filter(filled, 1.2), KM_Y * 1000))
    floor = (above < 14 + 0.8 * size) & (reach < 0.35 + 0.085 * size * (1 + 0.3 * wobble))
    shore_km = ndimage.distance_transform_edt(land, sampling=(KM_Y, KM_X))
    plain = (filled < 26 + 9 * wobble) & (shore_km < 3.5 + 2 * wobble) & (slope < 0.02)
    flat = land & (slope < 0.07) & (filled < 900) & (floor | plain)
    flat = ndimage.median_filter(flat.astype(np.uint8), 3).astype(bool) & ~np.isin(rock, (1,))
    flat |= land & (filled < 60) & floor & (slope < 0.03)
    # rivers have levelled their floors
    filled = np.where(floor & land & ~lake, filled - 0.75 * np.clip(above, 0, None), filled)

    code = np.where(flat, 15, rock).astype(np.uint8)
    code[lake] = 16
    code[~land] = 0
    return Island(frame, np.where(land, np.maximum(filled, 1.0), 0.0), code, land, area, slope)


def _largest(mask: np.ndarray) -> np.ndarray:
    number, count = ndimage.label(mask)
    if count == 0:
        return mask
    sizes = np.bincount(number.ravel())
    sizes[0] = 0
    return ndimage.binary_fill_holes(number == sizes.argmax())


@dataclass(frozen=True)
class Climate:
    """Temperature (degC) and precipitation (mm yr-1) on the climate grid, latitude ascending."""

    lon: np.ndarray
    lat: np.ndarray
    tas: np.ndarray
    pr: np.ndarray
    step: float


def make_climate(island: Island, rng: np.random.Generator) -> Climate:
    """Carry moist air over the relief; cool the air with height."""
    step = 0.02
    lon = -31.307 + step * np.arange(133)
    lat = 11.953 + step * np.arange(104)
    rows = (NORTH - lat) / STEP - 0.5
    cols = (lon - WEST) / STEP - 0.5
    place = np.meshgrid(rows, cols, indexing="ij")
    ground = ndimage.map_coordinates(ndimage.uniform_filter(island.height, 8), place, order=1)
    airflow = ndimage.map_coordinates(ndimage.gaussian_filter(island.height, 9), place, order=1)

    wet = _orographic(airflow, step * 110.0)
    wet = ndimage.gaussian_filter(wet, 1.0)
    patchy = ndimage.gaussian_filter(rng.standard_normal(wet.shape), 3)
    wet *= 1 + 0.05 * patchy / patchy.std()
    over_land = ndimage.map_coordinates(island.land.astype(float), place, order=1) > 0.5
    low, high = np.percentile(wet[over_land], [1, 99.7])
    share = np.clip((wet - low) / (high - low), 0, 1.05)
    pr = 420 + 3980 * share**0.85
    pr = np.clip(pr, 400, 4500)
    tas = SEA_LEVEL_C - LAPSE_C_PER_KM * ground / 1000 - 0.25 * (lat[:, None] - 13)
    tas += 0.6 * np.clip(1 - pr / 1200, 0, 1)  # clear skies in the lee
    return Climate(lon, lat, tas.astype("f4"), pr.astype("f4"), step)


def _orographic(ground: np.ndarray, cell_km: float) -> np.ndarray:
    """Return rain in free units: air rises, rains, dries; it takes up vapour over flat sea."""
    size = 260
    down = np.arctan2(-WIND_TO[0], -WIND_TO[1])  # the wind's course, turned to run along rows
    sine, cosine = np.sin(down), np.cos(down)
    half = (np.array(ground.shape) - 1) / 2
    i, j = np.meshgrid(np.arange(size) - size / 2, np.arange(size) - size / 2, indexing="ij")
    # row i of the turned grid advances with the wind; latitude ascends with the row
    source = [half[0] - i * cosine - j * sine, half[1] - i * sine + j * cosine]
    turned = ndimage.map_coordinates(ground, source, order=1, mode="constant")
    rise = np.gradient(turned, axis=0) / (cell_km * 1000)
    vapour, rain = np.ones(size), np.zeros_like(turned)
    spread = np.zeros(size)
    for row in range(size):
        condensed = vapour * (
            0.016 + 1.15 * np.clip(rise[row], 0, None) + 0.018 * turned[row] / 1000
        )
        condensed = np.clip(condensed * np.clip(1 + 9 * np.clip(rise[row], -1, 0), 0.25, 1), 0, 1)
        spread += condensed
        rain[row] = spread * 0.24  # drops drift before they land
        spread *= 0.76
        vapour = vapour - condensed + 0.012 * (1 - vapour)
        vapour = ndimage.gaussian_filter1d(vapour, 0.6)
    back = np.meshgrid(
        np.arange(ground.shape[0]) - half[0], np.arange(ground.shape[1]) - half[1], indexing="ij"
    )
    to_i = -back[0] * cosine - back[1] * sine + size / 2
    to_j = -back[0] * sine + back[1] * cosine + size / 2
    return ndimage.map_coordinates(rain, [to_i, to_j], order=1, mode="nearest")


def at_cells(climate: Climate, field: np.ndarray, factor: int) -> np.ndarray:
    """Return a climate field at the cells of the island's grid shrunk by a factor."""
    step = STEP * factor
    lat = NORTH - step * (np.arange(ROWS // factor) + 0.5)
    lon = WEST + step * (np.arange(COLS // factor) + 0.5)
    rows = (lat - climate.lat[0]) / climate.step
    cols = (lon - climate.lon[0]) / climate.step
    place = np.meshgrid(rows, cols, indexing="ij")
    return ndimage.map_coordinates(field.astype(float), place, order=1, mode="nearest")


def make_runoff(island: Island, climate: Climate, rng: np.random.Generator) -> np.ndarray:
    """Return runoff (mm yr-1) on cells of 0.01 degrees: rain less Turc's evapotranspiration."""
    rain = at_cells(climate, climate.pr, 4)
    warm = SEA_LEVEL_C - LAPSE_C_PER_KM * shrink(island.height, 4) / 1000
    limit = 300 + 25 * warm + 0.05 * warm**3
    loss = np.where(rain / limit <= 0.316, rain, rain / np.sqrt(0.9 + (rain / limit) ** 2))
    runoff = np.maximum(rain - loss, 0.03 * rain)  # storms run off even where it is dry
    runoff *= 1 + 0.04 * ndimage.gaussian_filter(rng.standard_normal(rain.shape), 1.5) / 0.19
    runoff = np.clip(runoff, 0.01 * rain, 0.97 * rain)
    land = ndimage.binary_dilation(shrink(island.land.astype(float), 4) > 0, np.ones((3, 3)))
    wobble = shrink(noise(rng, 9, 4), 4)
    frame = island.frame
    cloud = shrink(frame.bump(-47, 3, 7, 3.2) + frame.bump(-42, 6, 5, 3.0), 4)
    gap = cloud * (1 + 0.3 * wobble) > 0.42
    return np.where(land & ~gap, runoff, np.nan).astype("f4")


def make_plants(
    island: Island, climate: Climate, rng: np.random.Generator
) -> tuple[np.ndarray, np.ndarray]:
    """Return NDVI and land cover codes on cells of 0.005 degrees."""
    rain = at_cells(climate, climate.pr, 2)
    height = shrink(island.height, 2)
    rock = island.rock[::2, ::2]
    land = shrink(island.land.astype(float), 2) >= 0.5
    rock = np.where(rock == 0, 14, rock)
    texture = shrink(noise(rng, 5, 4), 2)
    line = TREELINE_M + 110 * texture + 0.06 * (rain - 1500)

    green = 0.16 + 0.72 * (1 - np.exp(-(((rain - 150) / 950) ** 1.3)))
    green *= 1 / (1 + np.exp((height - line) / 90)) * 0.72 + 0.28
    shade = {12: -0.05, 11: -0.03, 7: -0.10, 15: 0.04, 3: -0.04, 2: 0.02}
    for code, shift in shade.items():
        green = green + np.where(rock == code, shift, 0.0)
    # young flows at the shield's foot on the dry side, and bare ground around the caldera
    frame = island.frame
    angle = np.arctan2(frame.across + 10, frame.along - 68)[::2, ::2]
    radius = np.hypot(frame.along - 68, frame.across + 10)[::2, ::2]
    width = 0.05 + 0.05 * texture
    flow = (rock == 1) & (np.abs(angle - 1.25 - 0.08 * texture) < width) & (radius < 27)
    flow |= (rock == 1) & (np.abs(angle - 2.2 - 0.1 * texture) < 0.7 * width) & (radius < 19)
    lava = flow | ((rock == 1) & (radius < 4.5 + texture))
    steep = shrink(island.slope, 2)
    field = (rock == 15) | ((rock == 14) & (texture > 0.2)) | ((rock == 12) & (texture > 0.9))
    field &= (steep < 0.06) & (height < 700) & (rain > 550)
    green = np.where(field, 0.25 + 0.65 * green + 0.05 * texture, green)
    green = np.where(lava, 0.09, green) + 0.025 * texture - 0.10 * np.clip(steep - 0.5, 0, 0.6)
    green = green + 0.012 * rng.standard_normal(green.shape)
    water = rock == 16
    green = np.where(water, -0.08, np.clip(green, 0.04, 0.91))

    cover = np.select(
        [water, lava, field, height > line + 350, height > line, height > 1300],
        [9, 8, 6, 8, 7, np.where(rain > 1500, 1, np.where(rain > 800, 5, 4))],
        np.select([rain > 2000, rain > 1150, rain > 750], [2, 3, 5], 4),
    )
    marsh = (rock == 15) & (height < 9) & (steep < 0.012) & (rain > 900)
    cover = np.where(marsh, 10, cover)
    return np.where(land, green, np.nan), np.where(land, cover, 0).astype(np.uint8)


DISTRICTS = (
    # id, name, (along, across) of the seat
    ("D01", "Northreach", (-24, -38)),
    ("D02", "Gulfside", (-62, -24)),
    ("D03", "Westhollow", (-78, 6)),
    ("D04", "Chalkmere", (-58, 26)),
    ("D05", "Quill Vale", (-22, 17)),
    ("D06", "Hollin", (-10, -20)),
    ("D07", "Great Bay", (12, 28)),
    ("D08", "Tarn Vey", (38, -22)),
    ("D09", "Kettleshore", (84, -22)),
    ("D10", "Kettle Lee", (66, 12)),
    ("D11", "Dry Shore", (54, 40)),
)
ENCLAVE = ("D12", "Brannoch Free Town", (-55, 23))
WITHOUT_DISTRICT = (24, -2)  # the crown lands around the middle summit


def make_districts(island: Island, rng: np.random.Generator) -> gpd.GeoDataFrame:
    """Divide the land along its divides; shared borders are shared vertex by vertex."""
    label = _district_cells(island, rng)
    to_map = Affine(2 * STEP, 0, WEST, 0, -2 * STEP, NORTH)
    cells = [
        (shape(outline), int(value))
        for outline, value in rasterio.features.shapes(label, transform=to_map)
    ]
    rings = unary_union([outline.boundary for outline, _ in cells])
    arcs = [_round_off(arc) for arc in getattr(linemerge(rings), "geoms", [rings])]
    lines = unary_union(set_precision(arcs, 1e-6).tolist())
    parts: dict[int, list[Polygon]] = {}
    for face in polygonize(lines):
        inside = face.representative_point()
        row, col = int((NORTH - inside.y) / STEP / 2), int((inside.x - WEST) / STEP / 2)
        parts.setdefault(int(label[row, col]), []).append(face)
    names = [*DISTRICTS, ENCLAVE]
    shapes = []
    for number in range(1, len(names) + 1):
        whole = unary_union(parts[number])
        kept = [part for part in getattr(whole, "geoms", [whole]) if part.area > 2e-4]
        kept.sort(key=lambda part: -part.area)
        shapes.append(MultiPolygon(kept))
    return gpd.GeoDataFrame(
        {
            "district": [name[0] for name in names],
            "name": [name[1] for name in names],
            "note": ["invented"] * len(names),
        },
        geometry=shapes,
        crs="EPSG:4326",
    )


def _district_cells(island: Island, rng: np.random.Generator) -> np.ndarray:
    """Return district numbers on cells of 0.005 degrees: who reaches a cell with least climb."""
    height = shrink(island.height, 2)
    land = shrink(island.land.astype(float), 2) >= 0.5
    along, across = island.frame.along[::2, ::2], island.frame.across[::2, ::2]
    # outlines follow the coast loosely, and run out to sea off the bays
    reach = ndimage.gaussian_filter(land.astype(float), 3) + 0.05 * shrink(noise(rng, 18, 2), 2)
    domain = ndimage.binary_fill_holes(reach > 0.3)
    seats = [np.hypot(along - s[2][0], across - s[2][1]) for s in DISTRICTS]
    seats.append(np.hypot(along - WITHOUT_DISTRICT[0], across - WITHOUT_DISTRICT[1]))
    starts = [int(np.argmin(np.where(land, far, np.inf))) for far in seats]
    nearest = _least_climb(height + 40 * shrink(noise(rng, 10, 3), 2), starts)
    label = np.array([starts.index(int(start)) + 1 for start in nearest]).reshape(height.shape)
    label[label == len(DISTRICTS) + 1] = 0
    label = ndimage.median_filter(label, 5)
    label[~domain] = 0
    islet = np.hypot(along - 20, across - 61) < 12
    label[islet & (label > 0)] = 7
    town = np.hypot(along - ENCLAVE[2][0], across - ENCLAVE[2][1])
    wobble = shrink(noise(rng, 8, 3), 2)
    label[(town < 5.2 * (1 + 0.22 * wobble)) & (label == 4)] = len(DISTRICTS) + 1
    lake = shrink((island.rock == 16).astype(float), 2) > 0.3
    label[ndimage.binary_dilation(lake)] = 0
    return label.astype(np.int16)


def _least_climb(height: np.ndarray, starts: list[int]) -> np.ndarray:
    """Return for each cell the start from which the way is shortest, climbing counted dear."""
    number = np.arange(height.size).reshape(height.shape)
    ends, costs = [], []
    for here, there, far in (
        (np.s_[:, :-1], np.s_[:, 1:], 1.0),
        (np.s_[:-1, :], np.s_[1:, :], 1.0),
        (np.s_[:-1, :-1], np.s_[1:, 1:], 1.414),
        (np.s_[:-1, 1:], np.s_[1:, :-1], 1.414),
    ):
        ends.append((number[here].ravel(), number[there].ravel()))
        climb = np.abs(height[here] - height[there]).ravel()
        costs.append(far * (1 + 0.02 * climb))
    graph = coo_array(
        (np.concatenate(costs), tuple(np.concatenate(side) for side in zip(*ends, strict=True))),
        shape=(height.size, height.size),
    ).tocsr()
    _, _, source = dijkstra(
        graph, directed=False, indices=starts, min_only=True, return_predecessors=True
    )
    return source


def _round_off(arc: LineString) -> LineString:
    """Turn a stair of cell edges into a line that a hand could have drawn; ends stay put."""
    points = np.array(arc.coords)
    closed = bool((points[0] == points[-1]).all())
    middle = (points[1:] + points[:-1]) / 2
    points = np.vstack([points[:1], middle, points[-1:]])
    for _ in range(2):
        points[1:-1] = points[1:-1] / 2 + (points[:-2] + points[2:]) / 4
    if closed:
        points = np.vstack([points[1:-1], points[1:2]])
    return LineString(points).simplify(0.0007, preserve_topology=True)


def write_raster(path: Path, data: np.ndarray, factor: int, **how: object) -> None:
    """Write one layer as a tiled, compressed GeoTIFF; `how` holds what the file says of itself."""
    description, unit = str(how["description"]), str(how.get("unit", ""))
    with rasterio.open(
        path,
        "w",
        driver="GTiff",
        height=data.shape[0],
        width=data.shape[1],
        count=1,
        dtype=data.dtype,
        crs="EPSG:4326",
        transform=from_origin(WEST, NORTH, STEP * factor, STEP * factor),
        nodata=how["nodata"],
        compress="deflate",
        predictor=3 if data.dtype.kind == "f" else 2,
        zlevel=9,
        tiled=True,
        blockxsize=256,
        blockysize=256,
    ) as file:
        file.write(data, 1)
        file.set_band_description(1, description)
        if unit:
            file.units = (unit,)
        if "scale" in how:
            file.scales = (float(str(how["scale"])),)
        file.update_tags(**CREDIT)


def write_climate(path: Path, climate: Climate) -> None:
    """Write temperature and precipitation as CF NetCDF, latitude ascending."""
    half = climate.step / 2
    axes = {}
    for name, values in (("lat", climate.lat), ("lon", climate.lon)):
        long = {"lat": "latitude", "lon": "longitude"}[name]
        unit = {"lat": "degrees_north", "lon": "degrees_east"}[name]
        axes[name] = (
            name,
            values,
            {
                "standard_name": long,
                "long_name": long,
                "units": unit,
                "axis": {"lat": "Y", "lon": "X"}[name],
                "bounds": f"{name}_bnds",
            },
        )
    bounds = {
        f"{name}_bnds": ((name, "bnds"), np.stack([values - half, values + half], axis=1))
        for name, values in (("lat", climate.lat), ("lon", climate.lon))
    }
    dataset = xr.Dataset(
        {
            "tas": (
                ("lat", "lon"),
                np.round(climate.tas, 3),
                {
                    "standard_name": "air_temperature",
                    "long_name": "annual mean air temperature at the ground",
                    "units": "degC",
                    "grid_mapping": "crs",
                },
            ),
            "pr": (
                ("lat", "lon"),
                np.round(climate.pr, 1),
                {
                    "standard_name": "lwe_precipitation_rate",
                    "long_name": "annual mean precipitation",
                    "units": "mm yr-1",
                    "grid_mapping": "crs",
                },
            ),
            "crs": (
                (),
                np.int32(0),
                {
                    "grid_mapping_name": "latitude_longitude",
                    "semi_major_axis": 6378137.0,
                    "inverse_flattening": 298.257223563,
                    "longitude_of_prime_meridian": 0.0,
                },
            ),
            **bounds,
        },
        coords=axes,
        attrs={"Conventions": "CF-1.8", "title": "Climate of an invented island", **CREDIT},
    )
    field = {"zlib": True, "complevel": 9, "shuffle": True, "_FillValue": np.float32(1e20)}
    plain = {name: {"_FillValue": None} for name in ("lat", "lon", "lat_bnds", "lon_bnds", "crs")}
    dataset.to_netcdf(path, engine="h5netcdf", encoding={"tas": field, "pr": dict(field), **plain})


def write_table(path: Path, head: tuple[str, ...], rows: tuple[tuple[object, ...], ...]) -> None:
    """Write a small CSV."""
    with path.open("w", newline="", encoding="utf-8") as file:
        writer = csv.writer(file, lineterminator="\n")
        writer.writerow(head)
        writer.writerows(rows)


def write_districts(path: Path, districts: gpd.GeoDataFrame) -> None:
    """Write the districts, with a fixed time stamp so that the file can be made again."""
    path.unlink(missing_ok=True)
    pyogrio.set_gdal_config_options({"OGR_CURRENT_DATE": "2025-01-01T00:00:00.000Z"})
    districts.to_file(path, layer="districts", driver="GPKG", engine="pyogrio")


def make_island(seed: int = SEED) -> tuple[Island, Climate, np.random.Generator]:
    """Make the ground and the climate."""
    rng = np.random.default_rng(seed)
    frame = make_frame()
    outline = first_outline(frame, rng)
    rock = bedrock(frame, rng)
    height = make_relief(frame, outline, rock, rng)
    island = lay_sediment(frame, height, rock, rng)
    return island, make_climate(island, rng), rng


def main() -> None:
    """Write every layer."""
    parser = argparse.ArgumentParser(description="Make the layers of an invented island.")
    parser.add_argument("--into", type=Path, default=Path(__file__).parent, help="folder")
    folder = parser.parse_args().into
    folder.mkdir(parents=True, exist_ok=True)

    island, climate, rng = make_island()
    write_table(folder / "legend.csv", ("code", "rock", "label"), LEGEND)
    write_raster(
        folder / "lithology.tif", island.rock, 1, nodata=0, description="rock code, see legend.csv"
    )
    height = np.where(shrink(island.land.astype(float), 2) >= 0.5, shrink(island.height, 2), -32768)
    write_raster(
        folder / "elevation.tif",
        np.round(height).astype(np.int16),
        2,
        nodata=-32768,
        unit="m",
        description="height above the sea",
    )
    write_climate(folder / "climate.nc", climate)
    runoff = make_runoff(island, climate, rng)
    write_raster(
        folder / "runoff.tif",
        np.where(np.isnan(runoff), -9999, np.round(runoff, 1)).astype(np.float32),
        4,
        nodata=-9999,
        unit="mm yr-1",
        description="annual mean runoff",
    )
    green, cover = make_plants(island, climate, rng)
    write_raster(
        folder / "vegetation.tif",
        np.where(np.isnan(green), -32768, np.round(green / 1e-4)).astype(np.int16),
        2,
        nodata=-32768,
        scale=1e-4,
        unit="1",
        description="NDVI, annual mean",
    )
    write_raster(
        folder / "landcover.tif", cover, 2, nodata=0, description="land cover, see landcover.csv"
    )
    write_table(folder / "landcover.csv", ("code", "label"), LAND_COVER)
    write_districts(folder / "districts.gpkg", make_districts(island, rng))
    for name in sorted(path.name for path in folder.iterdir() if path.suffix != ".py"):
        print(f"{name:16} {(folder / name).stat().st_size / 1000:8.0f} kB")


if __name__ == "__main__":
    main()
