"""Time axes of climate files: calendars, gaps, periods, and the weight of each step."""

from __future__ import annotations

from typing import Any

import cftime
import numpy as np
import pytest
import xarray as xr

from mapper.errors import ValuesError
from mapper.grid import Window

LAT, LON = [1.5, 0.5], [0.5, 1.5, 2.5]
WHOLE = Window(0, 0, 2, 3)
CALENDARS = ["standard", "proleptic_gregorian", "noleap", "all_leap", "360_day", "julian"]


def days_in(year, month, calendar):
    start = cftime.datetime(year, month, 1, calendar=calendar)
    stop = cftime.datetime(year + month // 12, month % 12 + 1, 1, calendar=calendar)
    return (stop - start).days


def months(first, count):
    return [
        (first[0] + (first[1] - 1 + n) // 12, (first[1] - 1 + n) % 12 + 1) for n in range(count)
    ]


def series(bench, values, time, *, units="degC", time_attrs=None, bounds=None, name="t.nc") -> Any:
    """A file whose cells all hold ``values``, one a step."""
    cube = np.broadcast_to(np.asarray(values, float)[:, None, None], (len(values), 2, 3))
    array = xr.DataArray(cube, dims=("time", "lat", "lon"), attrs={"units": units})
    coords = {
        "time": ("time", np.asarray(time, float), dict(time_attrs or {})),
        "lat": ("lat", LAT, {"units": "degrees_north"}),
        "lon": ("lon", LON, {"units": "degrees_east"}),
    }
    variables = {"v": array}
    if bounds is not None:
        coords["time"][2].setdefault("bounds", "time_bnds")
        key = coords["time"][2].get("climatology", "time_bnds")
        variables[key] = (("time", "bnds"), np.asarray(bounds, float))
    return bench.nc(name, variables, coords)


def monthly(bench, dates, values, calendar="standard", **how):
    points = [cftime.datetime(y, m, 15, calendar=calendar) for y, m in dates]
    unit = "days since 1980-01-01"
    time = [cftime.date2num(one, unit, calendar) for one in points]
    attrs = {"units": unit, "calendar": calendar}
    return series(bench, values, time, time_attrs=attrs, **how)


def mean_of(bench, path, layer="temperature", **keys):
    values = bench.layer(layer, path, **keys).values(WHOLE)
    assert np.ptp(values) < 1e-9
    return float(values[0, 0])


@pytest.mark.parametrize("calendar", CALENDARS)
def test_43_months_weigh_by_their_length_in_the_calendar_of_the_file(bench, calendar):
    dates = months((1991, 1), 24)
    values = np.arange(24.0)
    weights = [days_in(y, m, calendar) for y, m in dates]
    expected = np.average(values, weights=weights) + 273.15
    assert mean_of(bench, monthly(bench, dates, values, calendar)) == pytest.approx(expected)


def test_44_months_since_are_read_by_bounds_of_whole_months(bench):
    values = np.arange(12.0)
    attrs = {"units": "months since 1995-01-01", "calendar": "standard"}
    edges = np.arange(13.0)
    path = series(
        bench,
        values,
        edges[:-1] + 0.5,
        time_attrs=attrs,
        bounds=np.stack([edges[:-1], edges[1:]], axis=1),
    )
    weights = [days_in(1995, m, "standard") for m in range(1, 13)]
    expected = np.average(values, weights=weights) + 273.15
    assert mean_of(bench, path) == pytest.approx(expected)


def test_44_months_since_without_bounds_are_refused(bench):
    attrs = {"units": "months since 1995-01-01", "calendar": "standard"}
    path = series(bench, np.arange(12.0), np.arange(12.0), time_attrs=attrs)
    with pytest.raises(ValuesError, match="no fixed length") as refused:
        bench.layer("temperature", path)
    assert "cdo" in refused.value.fix


def test_45_eleven_months_are_refused(bench):
    path = monthly(bench, months((1995, 1), 11), np.arange(11.0))
    with pytest.raises(ValuesError, match="11 months from 1995-01 to 1995-11 are not whole years"):
        bench.layer("temperature", path)


def test_45_a_month_that_is_missing_within_is_refused_by_name(bench):
    dates = [one for one in months((1995, 1), 24) if one != (1995, 6)]
    path = monthly(bench, dates, np.arange(23.0))
    with pytest.raises(ValuesError, match="1 months are missing: 1995-06"):
        bench.layer("temperature", path)


def test_45_a_december_given_twice_is_refused_by_name(bench):
    dates = [*months((1995, 1), 12), (1995, 12)]
    path = monthly(bench, dates, np.arange(13.0))
    with pytest.raises(ValuesError, match="1 months occur more than once: 1995-12"):
        bench.layer("temperature", path)


def test_45_unsorted_time_gives_what_sorted_time_gives(bench):
    dates = months((1995, 1), 12)
    values = np.arange(12.0) ** 1.5
    order = np.random.default_rng(2).permutation(12)
    plain = mean_of(bench, monthly(bench, dates, values))
    mixed = monthly(bench, [dates[at] for at in order], values[order], name="mixed.nc")
    assert mean_of(bench, mixed) == plain


def daily(bench, first, last, **how):
    unit = "days since 1980-01-01"
    start = int(cftime.date2num(cftime.datetime(*first, calendar="standard"), unit, "standard"))
    stop = int(cftime.date2num(cftime.datetime(*last, calendar="standard"), unit, "standard"))
    time = np.arange(start, stop + 1) + 0.5
    values = np.where(np.arange(time.size) == 59, 366.0, 0.0)  # the leap day of 1996
    attrs = {"units": unit, "calendar": "standard"}
    return series(bench, how.pop("values", values), time, time_attrs=attrs, **how)


def test_45_a_daily_leap_year_counts_its_leap_day(bench):
    path = daily(bench, (1996, 1, 1), (1996, 12, 31), units="K", values=None or (
        280.0 + np.where(np.arange(366) == 59, 36.6, 0.0)
    ))  # fmt: skip
    assert mean_of(bench, path) == pytest.approx(280.1)


def test_45_days_that_are_no_whole_year_are_refused(bench):
    path = daily(bench, (1996, 1, 1), (1996, 12, 30), units="K", values=np.full(365, 280.0))
    with pytest.raises(ValuesError, match="from 1996-01-01 to 1996-12-30 are not whole years"):
        bench.layer("temperature", path)


def test_46_one_step_is_read_as_it_is(bench):
    path = monthly(bench, [(1995, 7)], [12.0])
    assert mean_of(bench, path) == pytest.approx(285.15)


def climatology(bench, calendar="standard"):
    unit = "days since 1961-01-01"

    def number(year, month):
        date = cftime.datetime(year + (month - 1) // 12, (month - 1) % 12 + 1, 1, calendar=calendar)
        return cftime.date2num(date, unit, calendar)

    bounds = [(number(1961, m), number(1990, m + 1)) for m in range(1, 13)]
    attrs = {"units": unit, "calendar": calendar, "climatology": "climatology_bounds"}
    time = [number(1975, m) + 14 for m in range(1, 13)]
    return series(bench, np.arange(12.0), time, time_attrs=attrs, bounds=bounds)


@pytest.mark.parametrize("calendar", ["standard", "360_day"])
def test_46_a_climatology_weighs_months_by_their_mean_length_over_its_period(bench, calendar):
    lengths = [np.mean([days_in(y, m, calendar) for y in range(1961, 1991)]) for m in range(1, 13)]
    expected = np.average(np.arange(12.0), weights=lengths) + 273.15
    assert mean_of(bench, climatology(bench, calendar)) == pytest.approx(expected, rel=1e-12)


def test_46_days_written_as_dates_are_refused_with_a_hint(bench):
    attrs = {"units": "day as %Y%m%d.%f", "calendar": "standard"}
    path = series(bench, np.arange(12.0), [19950100 + 100 * m + 15 for m in range(12)],
                  time_attrs=attrs)  # fmt: skip
    with pytest.raises(ValuesError, match="day as %Y%m%d") as refused:
        bench.layer("temperature", path)
    assert "days since" in refused.value.fix


def test_twelve_months_without_dates_are_a_year(bench):
    cube = np.broadcast_to(np.arange(12.0)[:, None, None], (12, 2, 3))
    path = bench.nc(
        "m.nc",
        {"v": (("month", "lat", "lon"), cube, {"units": "degC"})},
        {
            "month": ("month", np.arange(1, 13)),
            "lat": ("lat", LAT, {"units": "degrees_north"}),
            "lon": ("lon", LON, {"units": "degrees_east"}),
        },
    )
    lengths = [31, 28.2425, 31, 30, 31, 30, 31, 31, 30, 31, 30, 31]
    expected = np.average(np.arange(12.0), weights=lengths) + 273.15
    assert mean_of(bench, path) == pytest.approx(expected, rel=1e-12)


def test_years_select_a_period(bench):
    dates = months((1990, 1), 36)
    path = monthly(bench, dates, np.repeat([1.0, 2.0, 4.0], 12))
    assert mean_of(bench, path, years=[1991, 1992]) == pytest.approx(
        273.15 + (2 * 365 + 4 * 366) / 731
    )


@pytest.mark.parametrize("years", [[1989, 1991], [2000, 2001]])
def test_years_that_the_file_lacks_are_refused_with_those_it_holds(bench, years):
    path = monthly(bench, months((1990, 1), 36), np.arange(36.0))
    with pytest.raises(ValuesError, match="the file holds 1990 to 1992") as refused:
        bench.layer("temperature", path, years=years)
    assert refused.value.fix.startswith("years = [199")


def test_years_for_a_file_without_time_are_refused(bench):
    path = bench.field("t.nc", np.full((2, 3), 280.0), LAT, LON, units="K")
    with pytest.raises(ValuesError, match="no time axis"):
        bench.layer("temperature", path, years=[1990, 1991])


@pytest.mark.parametrize("calendar", CALENDARS)
def test_40_twelve_sums_of_months_add_up_to_the_sum_of_the_year(bench, calendar):
    values = np.array([10.0, 20, 30, 40, 50, 60, 70, 80, 90, 100, 110, 120])
    path = monthly(bench, months((1995, 1), 12), values, calendar, units="mm month-1")
    assert mean_of(bench, path, "runoff") == pytest.approx(values.sum(), rel=1e-12)


def test_40_monthly_fluxes_weigh_by_month_and_count_365_25_days(bench):
    values = np.arange(1.0, 13) * 1e-5
    path = monthly(bench, months((1995, 1), 12), values, units="kg m-2 s-1")
    weights = [days_in(1995, m, "standard") for m in range(1, 13)]
    expected = np.average(values, weights=weights) * 365.25 * 86_400
    assert mean_of(bench, path, "runoff") == pytest.approx(expected, rel=1e-12)


def test_a_yearly_series_weighs_years_by_their_length(bench):
    unit = "days since 1980-01-01"
    time = [
        cftime.date2num(cftime.datetime(y, 7, 1, calendar="standard"), unit, "standard")
        for y in (1995, 1996, 1997)
    ]
    attrs = {"units": unit, "calendar": "standard"}
    path = series(bench, [1.0, 2.0, 3.0], time, time_attrs=attrs)
    expected = np.average([1.0, 2.0, 3.0], weights=[365, 366, 365]) + 273.15
    assert mean_of(bench, path) == pytest.approx(expected)


def test_steps_of_other_lengths_are_refused(bench):
    attrs = {"units": "days since 1995-01-01", "calendar": "standard"}
    path = series(bench, np.arange(73.0), np.arange(73) * 5.0, time_attrs=attrs)
    with pytest.raises(ValuesError, match="5 days long"):
        bench.layer("temperature", path)


def test_a_cell_that_lacks_one_month_has_no_mean(bench):
    cube = np.full((12, 2, 3), 280.0)
    cube[4, 1, 2] = np.nan
    unit = "days since 1995-01-01"
    time = [
        cftime.date2num(cftime.datetime(1995, m, 15, calendar="noleap"), unit, "noleap")
        for m in range(1, 13)
    ]
    path = bench.nc(
        "gap.nc",
        {"v": (("time", "lat", "lon"), cube, {"units": "K"})},
        {
            "time": ("time", time, {"units": unit, "calendar": "noleap"}),
            "lat": ("lat", LAT, {"units": "degrees_north"}),
            "lon": ("lon", LON, {"units": "degrees_east"}),
        },
    )
    found = bench.layer("temperature", path).values(WHOLE)
    assert np.argwhere(np.isnan(found)).tolist() == [[1, 2]]


def test_the_mean_of_a_window_equals_the_window_of_the_mean(bench, monkeypatch):
    rng = np.random.default_rng(11)
    cube = rng.uniform(270, 300, (24, 8, 10))
    dates = months((1995, 1), 24)
    unit = "days since 1980-01-01"
    time = [
        cftime.date2num(cftime.datetime(y, m, 15, calendar="standard"), unit, "standard")
        for y, m in dates
    ]
    path = bench.nc(
        "c.nc",
        {"v": (("time", "lat", "lon"), cube, {"units": "K"})},
        {
            "time": ("time", time, {"units": unit, "calendar": "standard"}),
            "lat": ("lat", np.arange(7.5, -0.5, -1), {"units": "degrees_north"}),
            "lon": ("lon", np.arange(0.5, 10), {"units": "degrees_east"}),
        },
    )
    kept = bench.layer("temperature", path).values(Window(0, 0, 8, 10))
    monkeypatch.setattr("mapper.layers.decoding.MOST_KEPT_CELLS", 1)
    monkeypatch.setattr("mapper.layers.decoding.SLAB_CELLS", 100)
    layer = bench.layer("temperature", path)
    for window in (Window(0, 0, 8, 10), Window(2, 3, 4, 5), Window(7, 9, 1, 1)):
        part = kept[window.row : window.row_stop, window.col : window.col_stop]
        np.testing.assert_array_equal(layer.values(window), part)


def test_another_axis_than_time_is_asked_about(bench):
    path = bench.nc(
        "z.nc",
        {"v": (("plev", "lat", "lon"), np.full((3, 2, 3), 280.0), {"units": "K"})},
        {
            "plev": ("plev", [1000.0, 500.0, 100.0], {"units": "hPa"}),
            "lat": ("lat", LAT, {"units": "degrees_north"}),
            "lon": ("lon", LON, {"units": "degrees_east"}),
        },
    )
    with pytest.raises(ValuesError, match="3 values along 'plev'"):
        bench.layer("temperature", path)
