"""The notebook's door: lazy, and equal to the run."""

import dask
import numpy as np
import pytest
import rasterio
import xarray as xr

import mapper
from mapper.errors import LawError
from tests.making import small_job, write_raster


def rain_job(tmp_path):
    layers = {
        "lithology": {"path": "rock.tif", "legend": "legend.csv"},
        "precipitation": {"path": "rain.tif"},
        "temperature": {"path": "warm.tif"},
    }
    write_raster(tmp_path / "rain.tif", np.linspace(300, 3000, 16).reshape(4, 4), unit="mm yr-1")
    write_raster(tmp_path / "warm.tif", np.linspace(0, 25, 16).reshape(4, 4), unit="degC")
    return mapper.load_job(small_job(tmp_path, layers=layers, law={"default": "product"}))


def test_nothing_is_computed_until_asked(tmp_path):
    def refuse(*_args, **_kwargs):
        raise AssertionError

    with dask.config.set(scheduler=refuse):
        dataset = mapper.open_layers(mapper.load_job(small_job(tmp_path)))
        result = mapper.drawdown(dataset)
    assert dask.is_dask_collection(dataset)
    assert dask.is_dask_collection(result)


def test_layers_carry_units_names_and_crs(tmp_path):
    dataset = mapper.open_layers(rain_job(tmp_path))
    assert dataset["temperature"].attrs["units"] == "K"
    assert dataset["temperature"].attrs["standard_name"] == "air_temperature"
    assert dataset["precipitation"].attrs["units"] == "mm yr-1"
    assert dataset.rio.crs.to_epsg() == 6933
    assert dataset["rock_share"].sum("rock").values.tolist() == [[1.0] * 4] * 4


@pytest.mark.parametrize("chunks", [None, (3, 2)])
def test_the_lazy_rates_are_those_of_the_run(tmp_path, chunks):
    job = rain_job(tmp_path)
    result = mapper.run(job)
    lazy = mapper.drawdown(mapper.open_layers(job, chunks=chunks)).compute()
    for name in ("consumption", "drawdown"):
        with rasterio.open(result.folder / "maps" / f"{name}.tif") as file:
            assert np.array_equal(lazy[name].values.astype("float32"), file.read(1))


def test_another_law_may_be_asked_for_by_name(tmp_path):
    dataset = mapper.open_layers(mapper.load_job(small_job(tmp_path)))
    rates = mapper.drawdown(dataset, "amiotte-suchet-1995")["consumption"].values
    assert rates[1] == pytest.approx(0.479 * 44.0095, rel=1e-12)


@pytest.mark.parametrize(
    ("law", "message"),
    [("amiotte", "there is no law 'amiotte'"), ("product", "the law needs temperature"),
     ("dessert-2003", "'dessert-2003' has no|the law needs temperature")],
)  # fmt: skip
def test_a_law_that_does_not_fit_is_refused(tmp_path, law, message):
    dataset = mapper.open_layers(mapper.load_job(small_job(tmp_path)))
    with pytest.raises(LawError, match=message):
        mapper.drawdown(dataset, law)


def test_a_dataset_of_ones_own_needs_a_law():
    with pytest.raises(LawError, match="does not carry a job's laws"):
        mapper.drawdown(xr.Dataset())
