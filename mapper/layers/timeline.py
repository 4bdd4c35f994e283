"""The time axis of a file: which steps make whole years, and how long each step is."""

from __future__ import annotations

from collections import Counter
from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise
from typing import Any, Literal

import cftime
import numpy as np
from numpy.typing import NDArray

from mapper.errors import ValuesError

Floats = NDArray[np.float64]
Length = Literal["day", "month", "year"]

MOST_LISTED = 12
MONTHS = range(1, 13)


@dataclass(frozen=True)
class Step:
    """One step of a time axis.

    ``index`` is its position in the file, ``days`` its length, ``month`` 1..12 or 0 where a step
    is longer, ``year_days`` the length of its year in the file's own calendar.
    """

    index: int
    days: float
    year: int
    month: int
    year_days: float


@dataclass(frozen=True)
class Timeline:
    """Steps in the order of time that together make whole years."""

    length: Length
    steps: tuple[Step, ...]
    calendar: str
    note: str


@dataclass(frozen=True)
class RawTime:
    """A time coordinate as the file holds it: numbers, attributes, bounds and whether climatic."""

    name: str
    values: Floats
    units: str
    calendar: str
    bounds: Floats | None
    climatology: bool


def read_timeline(raw: RawTime, years: tuple[int, int] | None, *, where: str) -> Timeline:
    """Make sense of a time coordinate.

    Parameters
    ----------
    years : first and last year to take, both included; None for all.

    Raises
    ------
    ValuesError where dates cannot be read, repeat, leave gaps, or do not make whole years.
    """
    where = f"{where}, coordinate {raw.name!r}"
    if _is_months_of_year(raw):
        return _months_of_year(raw, years, where)
    starts, stops = _dates(raw, where)
    if raw.climatology:
        return _climatology(raw, (starts, stops), years, where)
    length = _length(raw, starts, stops, where)
    steps = [_step(at, date, length, raw.calendar) for at, date in enumerate(starts)]
    steps = sorted(steps, key=lambda step: _position(step, starts[step.index], length))
    if years is not None:
        steps = [step for step in steps if years[0] <= step.year <= years[1]]
        _refuse_missing_years(steps, starts, years, where)
    _refuse_gaps(steps, starts, length, where)
    _refuse_part_years(steps, starts, length, where)
    first, last = steps[0].year, steps[-1].year
    note = f"mean of {len(steps)} {length}s, {first}..{last}, calendar {raw.calendar}"
    return Timeline(length, tuple(steps), raw.calendar, note)


def _is_months_of_year(raw: RawTime) -> bool:
    return (
        raw.name.lower() in ("month", "months", "time")
        and " since " not in raw.units
        and " as " not in raw.units
        and sorted(raw.values.tolist()) == list(MONTHS)
    )


def _months_of_year(raw: RawTime, years: tuple[int, int] | None, where: str) -> Timeline:
    """Twelve months of no stated year: February has its mean length."""
    if years is not None:
        raise ValuesError(
            f"years = {list(years)}, and the file holds one year of months without dates",
            where=where,
            fix="remove years",
        )
    length = _mean_month_lengths(raw.calendar, 2001, 2400)
    order = np.argsort(raw.values)
    steps = tuple(
        Step(int(at), float(length[month - 1]), 0, month, float(length.sum()))
        for month, at in zip(MONTHS, order, strict=True)
    )
    return Timeline("month", steps, raw.calendar, "mean of the 12 months of a year")


def _mean_month_lengths(calendar: str, first: int, last: int) -> Floats:
    lengths = [[_month_days(year, m, calendar) for m in MONTHS] for year in range(first, last + 1)]
    return np.asarray(np.mean(lengths, axis=0, dtype=np.float64))


def _dates(raw: RawTime, where: str) -> tuple[list[Any], list[Any] | None]:
    """Dates of the steps, and of their ends where the file gives bounds."""
    unit = raw.units.split(" since ")[0].strip().lower() if " since " in raw.units else ""
    if not unit:
        raise _unreadable(raw, where)
    if unit.rstrip("s") in ("month", "year", "common_year") and raw.calendar != "360_day":
        return _calendar_dates(raw, unit, where)
    try:
        points = cftime.num2date(raw.values, raw.units, raw.calendar)
        if raw.bounds is None:
            return list(points), None
        lows, highs = raw.bounds.min(axis=1), raw.bounds.max(axis=1)
        starts = cftime.num2date(lows, raw.units, raw.calendar)
        return list(starts), list(cftime.num2date(highs, raw.units, raw.calendar))
    except (ValueError, OverflowError) as cause:
        raise _unreadable(raw, where, cause) from cause


def _unreadable(raw: RawTime, where: str, cause: Exception | None = None) -> ValuesError:
    more = f": {cause}" if cause else ""
    return ValuesError(
        f"time is in {raw.units!r} (calendar {raw.calendar!r}), which is not read{more}",
        where=where,
        fix='units such as "days since 1990-01-01" and the true calendar, e.g. by '
        "cdo setreftime,1990-01-01,00:00:00,days IN OUT",
    )


def _calendar_dates(raw: RawTime, unit: str, where: str) -> tuple[list[Any], list[Any]]:
    """Months or years since a date, whose length varies: read by bounds of whole months."""
    per = 1 if unit.startswith("month") else 12
    start = cftime.num2date(0, f"days since {raw.units.split(' since ')[1]}", raw.calendar)
    whole = raw.bounds is not None and np.array_equal(raw.bounds * per, np.round(raw.bounds * per))
    if raw.bounds is None or not whole or start.day != 1:
        raise ValuesError(
            f"time is in {raw.units!r}: a {unit.rstrip('s')} has no fixed length in calendar "
            f"{raw.calendar!r}, and there are no bounds of whole months",
            where=where,
            fix="time bounds in the file, or cdo settaxis,1990-01-16,12:00:00,1mon IN OUT",
        )
    months = np.round(raw.bounds * per).astype(int) + (start.year * 12 + start.month - 1)
    lows, highs = months.min(axis=1), months.max(axis=1)
    return [_first_of(int(one), raw) for one in lows], [_first_of(int(one), raw) for one in highs]


def _first_of(month: int, raw: RawTime) -> Any:
    return cftime.datetime(month // 12, month % 12 + 1, 1, calendar=raw.calendar)


def _length(raw: RawTime, starts: list[Any], stops: list[Any] | None, where: str) -> Length:
    if stops is not None:
        days = np.median([_between(a, b) for a, b in zip(starts, stops, strict=True)])
    else:
        ordered = sorted(starts)
        gaps = [_between(a, b) for a, b in pairwise(ordered)]
        days = np.median([gap for gap in gaps if gap > 0] or [0.0])
    for name, low, high in (("day", 0.99, 1.01), ("month", 27.5, 31.5), ("year", 359.5, 366.5)):
        if low <= days <= high:
            return name  # type: ignore[return-value]
    raise ValuesError(
        f"steps of {raw.name!r} are {days:g} days long",
        where=where,
        fix="a daily, monthly or yearly mean, e.g. cdo daymean or cdo monmean IN OUT",
    )


def _between(start: Any, stop: Any) -> float:
    return float((stop - start).total_seconds() / 86_400.0)


def _step(index: int, date: Any, length: Length, calendar: str) -> Step:
    year_days = _year_days(date.year, calendar)
    if length == "year":
        return Step(index, year_days, date.year, 0, year_days)
    days = 1.0 if length == "day" else _month_days(date.year, date.month, calendar)
    return Step(index, days, date.year, date.month, year_days)


def _month_days(year: int, month: int, calendar: str) -> float:
    start = cftime.datetime(year, month, 1, calendar=calendar)
    stop = cftime.datetime(year + month // 12, month % 12 + 1, 1, calendar=calendar)
    return _between(start, stop)


def _year_days(year: int, calendar: str) -> float:
    start = cftime.datetime(year, 1, 1, calendar=calendar)
    return _between(start, cftime.datetime(year + 1, 1, 1, calendar=calendar))


def _position(step: Step, date: Any, length: Length) -> int:
    """A whole number that rises by one from step to step."""
    if length == "year":
        return step.year
    if length == "month":
        return step.year * 12 + step.month - 1
    return int(date.toordinal(fractional=False))


def _named(position: int, length: Length, like: Any) -> str:
    if length == "year":
        return str(position)
    if length == "month":
        return f"{position // 12}-{position % 12 + 1:02d}"
    return str(cftime.datetime.fromordinal(position, calendar=like.calendar).strftime("%Y-%m-%d"))


def _refuse_missing_years(
    steps: list[Step], starts: list[Any], years: tuple[int, int], where: str
) -> None:
    held = {step.year for step in steps}
    if years[0] in held and years[1] in held:
        return
    first, last = min(starts).year, max(starts).year
    raise ValuesError(
        f"years = {list(years)}, and the file holds {first} to {last}",
        where=where,
        fix=f"years = [{max(first, years[0])}, {min(last, years[1])}]"
        if first <= years[1] and last >= years[0]
        else f"years = [{first}, {last}]",
    )


def _refuse_gaps(steps: Sequence[Step], starts: list[Any], length: Length, where: str) -> None:
    positions = [_position(step, starts[step.index], length) for step in steps]
    twice = [at for at, count in Counter(positions).items() if count > 1]
    held = set(positions)
    missing = [at for at in range(positions[0], positions[-1] + 1) if at not in held]
    for found, what, fix in (
        (twice, "occur more than once", "drop the repeated steps"),
        (missing, "are missing", "a file without gaps, or years = [first, last] around them"),
    ):
        if found:
            names = [_named(at, length, starts[0]) for at in sorted(found)]
            raise ValuesError(f"{len(found)} {length}s {what}: {_few(names)}", where=where, fix=fix)


def _refuse_part_years(
    steps: Sequence[Step], starts: list[Any], length: Length, where: str
) -> None:
    """Refuse a series that weighs one season more than another."""
    if length == "year":
        return
    ends = [_position(one, starts[one.index], length) for one in (steps[0], steps[-1])]
    if length == "month":
        whole = (ends[1] - ends[0] + 1) % 12 == 0
    else:
        first = starts[steps[0].index]
        after = cftime.datetime.fromordinal(ends[1] + 1, calendar=first.calendar)
        whole = (after.month, after.day) == (first.month, first.day)
    if not whole:
        names = [_named(at, length, starts[0]) for at in ends]
        raise ValuesError(
            f"the {len(steps)} {length}s from {names[0]} to {names[1]} are not whole years",
            where=where,
            fix=_whole_years(steps, length),
        )


def _whole_years(steps: Sequence[Step], length: Length) -> str:
    days: dict[int, float] = {}
    for step in steps:
        days[step.year] = days.get(step.year, 0.0) + step.days
    whole = [step.year for step in steps if days[step.year] >= step.year_days - 0.5]
    if not whole:
        return f"a file of whole years: every {length} of each"
    return f"years = [{min(whole)}, {max(whole)}]"


def _few(names: list[str]) -> str:
    return ", ".join(names[:MOST_LISTED]) + (" ..." if len(names) > MOST_LISTED else "")


def _climatology(
    raw: RawTime, bounds: tuple[list[Any], list[Any] | None], years: Any, where: str
) -> Timeline:
    """Means of each month, or of the year, over a period that the bounds name."""
    starts, stops = bounds
    if stops is None or years is not None:
        raise ValuesError(
            "a climatology without climatology bounds"
            if stops is None
            else f"years = {list(years)}, and the file holds means over a period of its own",
            where=where,
            fix="remove years" if years is not None else "the attribute climatology and its bounds",
        )
    first, last = min(starts).year, max(stops).year
    if max(stops).month == 1 and max(stops).day == 1:
        last -= 1
    last = max(first, last)
    if len(starts) == 1:
        step = Step(0, 365.25, first, 0, 365.25)
        return Timeline("year", (step,), raw.calendar, f"mean of {first}..{last}")
    months = [date.month for date in starts]
    if sorted(months) != list(MONTHS):
        raise ValuesError(
            f"the climatology holds the months {sorted(months)}, and 1 to 12 are needed",
            where=where,
            fix="a file with every month once",
        )
    length = _mean_month_lengths(raw.calendar, first, last)
    steps = tuple(
        Step(months.index(month), float(length[month - 1]), first, month, float(length.sum()))
        for month in MONTHS
    )
    note = f"mean of the 12 months, each over {first}..{last}, calendar {raw.calendar}"
    return Timeline("month", steps, raw.calendar, note)
