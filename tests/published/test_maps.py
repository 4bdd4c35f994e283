"""A map and a world's total against what can be had without this tool."""

import numpy as np
import pytest
import rasterio

import mapper
from tests.making import EQUAL_AREA, LON_LAT, ROOT, small_job, write_legend, write_raster


def test_a_map_of_one_rock_is_ten_lines_of_numpy(tmp_path):
    """Source of the form and numbers: rate-law F = a q exp(-(Ea/R)(1/T - 1/T0)), with a from
    Drever & Clow 1995 table 4 (read) and Ea, T0 after Hartmann et al. 2014 (memory, quoted)."""
    draw = np.random.default_rng(2)
    runoff, celsius = draw.uniform(50, 2500, (6, 7)), draw.uniform(-5, 28, (6, 7))
    job = small_job(
        tmp_path,
        law={"default": "product"},
        regions=None,
        layers={
            "lithology": {"path": "rock.tif", "legend": "legend.csv"},
            "runoff": {"path": "runoff.tif"},
            "temperature": {"path": "warm.tif"},
        },
    )
    write_raster(tmp_path / "rock.tif", np.ones((6, 7)), dtype="uint8")
    write_legend(tmp_path / "legend.csv", "code,rock\n1,granite\n")
    write_raster(tmp_path / "runoff.tif", runoff, unit="mm yr-1")
    write_raster(tmp_path / "warm.tif", celsius, unit="degC")
    result = mapper.run(mapper.load_job(job))
    with rasterio.open(result.folder / "maps" / "consumption.tif") as file:
        found = file.read(1)

    a = 0.095  # mmol of CO2 per litre, granite
    kelvin = celsius + 273.15
    warming = np.exp(-60_000.0 / 8.314462618 * (1 / kelvin - 1 / 284.15))
    moles_per_km2 = 1000.0 * a * runoff * warming
    tonnes_per_km2 = moles_per_km2 * 44.0095e-6
    assert found == pytest.approx(tonnes_per_km2, rel=2e-7)
    assert result.totals.consumption.sum() == pytest.approx(tonnes_per_km2.sum(), rel=1e-12)
    assert EQUAL_AREA  # each cell is 1 km2


@pytest.fixture(scope="module")
def world(open_data, tmp_path_factory):
    """The world of configs/world.toml on cells of a quarter degree, with the law of 1995 alone."""
    folder = tmp_path_factory.mktemp("world")
    text = (ROOT / "configs" / "world.toml").read_text(encoding="utf-8")
    text = text.replace("${SAPROLITE_OPEN_DATA}", str(open_data))
    text = text.replace('default = "product"', 'default = "amiotte-suchet-1995"')
    text = text.replace("by_rock = ", "# by_rock = ")
    text = text.replace(
        'from = "lithology"', f'crs = "{LON_LAT}"\nresolution = 0.25\nbounds = [-180, -90, 180, 90]'
    )
    (folder / "world.toml").write_text(text, encoding="utf-8")
    return mapper.run(mapper.load_job(folder / "world.toml"), out=folder / "out")


def test_the_world_takes_up_what_is_published_within_a_wide_band(world):
    """Short term, all rocks. Published totals are 0.22 to 0.29 Gt C per year. Rain without snow
    gives 33 700 km3 of runoff and with it about 0.19; the band of 0.15 to 0.35 catches wrong
    units, a grid upside down or a lost mask, and proves no more than that."""
    gigatonnes_of_carbon = world.totals.consumption.sum() * 12.011 / 44.0095 / 1e9
    assert 0.15 < gigatonnes_of_carbon < 0.35


def test_the_land_of_the_world_less_ice_is_found(world):
    """Source: MCD12C1 2019, land 144.97 and ice 14.79 million km2 on a sphere or spheroid whose
    kind is not said: the areas may differ by half a percent."""
    mapped = world.totals.rock_area.sum() / 1e6
    assert mapped == pytest.approx(144.97, rel=5e-3)
    assert world.totals.area.sum() == pytest.approx(510_065_621.724, abs=0.01)


def test_countries_and_the_rest_are_the_world(world):
    assert max(world.checks.values()) <= 1e-12
    assert len(world.totals.names) == 178
