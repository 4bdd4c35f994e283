"""A law of one's own, from a plain arithmetic formula over layers and parameters with units."""

from __future__ import annotations

import difflib
import inspect
import keyword
import math
from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from mapper.dimensions import MASS_FLUX, UPTAKE, Dimension, Unit, read_unit
from mapper.errors import LawError, Problems
from mapper.expression import FUNCTIONS, Program, check_names, evaluate, names_in, read
from mapper.laws import LAW_INPUTS, Floats, Input, Law, Parameter, Spread, Values
from mapper.rocks import ROCKS

PARAMETER_KEYS = ("value", "by_rock", "unit", "sd", "low", "high", "meaning", "source")
N_DEVIATIONS = 4.0  # how far a draw may lie from the value, where no bounds are given

PLAUSIBLE: Mapping[str, tuple[float, float]] = {
    # what a layer may plausibly hold, in the units of LAW_INPUTS: this project's choice
    "runoff": (0.0, 5000.0),
    "temperature": (223.15, 313.15),
    "vegetation": (0.0, 1.0),
    "soil_shielding": (0.0, 1.0),
    "erosion": (0.0, 10000.0),
    "evapotranspiration": (0.0, 2500.0),
    "soil_co2": (1e-4, 0.2),
    "reference_consumption": (0.0, 20.0),
    "precipitation": (0.0, 12000.0),
}


@dataclass(frozen=True)
class Formula:
    """The function of a law from a formula: takes its steps, and never runs any text."""

    layers: tuple[str, ...]
    parameters: tuple[str, ...]
    program: Program

    def __post_init__(self) -> None:
        kinds = inspect.Parameter
        taken = [kinds(one, kinds.POSITIONAL_ONLY) for one in self.layers]
        taken += [kinds(one, kinds.KEYWORD_ONLY) for one in self.parameters]
        object.__setattr__(self, "__signature__", inspect.Signature(taken))

    def __call__(self, *layers: Floats, **parameters: Values) -> Floats:
        """Evaluate the formula; NaN where it has no finite answer [mol m-2 yr-1]."""
        if set(parameters) != set(self.parameters):
            raise TypeError(f"the formula takes the parameters {', '.join(self.parameters)}")
        values = {**dict(zip(self.layers, layers, strict=True)), **parameters}
        with np.errstate(all="ignore"):
            rate = evaluate(self.program, values)
        return np.where(np.isfinite(rate), rate, np.nan)


def formula_law(
    name: str,
    formula: str,
    inputs: Mapping[str, object],
    parameters: Mapping[str, Mapping[str, object]],
    rocks: tuple[str, ...] | None = None,
    *,
    where: str = "",
) -> Law:
    """Make a law from a formula such as "a * runoff * exp(-b / temperature)".

    Parameters
    ----------
    name : the law's name, as the job and the record call it.
    formula : arithmetic on the names below: + - * / ** brackets, exp log sqrt minimum maximum.
    inputs : for each layer its unit, or a table with ``unit``, ``low`` and ``high``, the range
        in which the law holds, in that unit.
    parameters : for each a table with ``unit`` and ``value`` or ``by_rock``; optional ``sd``,
        ``low``, ``high``, ``meaning`` and ``source``.
    rocks : the rocks it holds for; by default those that ``by_rock`` names, else every rock.
    where : the file and key, for messages.

    Returns
    -------
    A law whose result is turned to mol m-2 yr-1. Raises LawError (or UnitError) before any layer
    is read where the formula is not arithmetic, its units do not fit or it does not give CO2 for
    each area and time, as moles or as a mass of CO2 or C; many problems are raised together.

    Examples
    --------
    >>> law = formula_law("mine", "a * runoff", {"runoff": "mm yr-1"},
    ...     {"a": {"value": 0.5, "unit": "mmol L-1"}}, ("basalt",))
    >>> float(law.function(1000.0, a=0.5))
    0.5
    """
    where = where or f"law {name!r}"
    problems = Problems()
    layers: list[tuple[Input, Unit]] = []
    numbers: list[tuple[Parameter, Unit]] = []
    for key, given in inputs.items():
        with problems.gather():
            layers.append(_layer(key, given, f"{where}, layer {key!r}"))
    for key, table in parameters.items():
        with problems.gather():
            numbers.append(_parameter(key, table, f"{where}, parameter {key!r}", inputs))
    chosen = rocks or _rocks([one for one, _ in numbers])
    with problems.gather():
        _check_rocks(chosen, [one for one, _ in numbers], where)
    units = {one.name: unit for one, unit in layers}
    units |= {one.name: unit for one, unit in numbers}
    function: Formula | None = None
    names = (tuple(inputs), tuple(parameters))
    with problems.gather():
        if all(name in units for name in (*inputs, *parameters)):
            function = _function(formula, units, names, where)
        else:  # its units cannot be checked, its names can
            check_names(formula, (*inputs, *parameters), where=f"{where}, formula")
    problems.raise_if_any()
    if function is None:  # pragma: no cover - then a problem was raised
        raise AssertionError
    return Law(
        name=name,
        title=f"Formula of the user: {name}",
        summary=formula,
        year=0,
        function=function,
        inputs=tuple(one for one, _ in layers),
        parameters=tuple(one for one, _ in numbers),
        rocks=chosen,
        formula=formula,
        reference="a formula of the job file, not a published law",
        cautions=("a formula of the user: this project has not checked it against any source",),
    )


def _function(
    formula: str,
    units: Mapping[str, Unit],
    names: tuple[tuple[str, ...], tuple[str, ...]],
    where: str,
) -> Formula:
    typed = read(formula, units, where=f"{where}, formula")
    _check_result(typed.dimension, where)
    layers, parameters = names
    if unused := sorted(set(units) - names_in(typed.program)):
        raise LawError(
            f"declared and not used: {', '.join(unused)}",
            where=f"{where}, formula",
            fix="use it in the formula, or take the declaration out",
        )
    if not layers:
        raise LawError(
            "the formula reads no layer", where=where, fix='inputs = { runoff = "mm yr-1" }'
        )
    return Formula(layers, parameters, typed.program)


def _check_result(dimension: Dimension, where: str) -> None:
    if dimension == UPTAKE:
        return
    fix = "the result must be CO2 for each area and time, such as mmol L-1 times mm yr-1"
    if dimension == MASS_FLUX:
        fix = "say what the mass is of: a parameter in 'mol t-1', or a mass in 'g CO2 L-1'"
    raise LawError(
        f"the formula gives {dimension}, and a law must give {UPTAKE}",
        where=f"{where}, formula",
        fix=fix,
    )


def _layer(name: str, given: object, where: str) -> tuple[Input, Unit]:
    if name not in LAW_INPUTS:
        near = difflib.get_close_matches(name, LAW_INPUTS, n=1, cutoff=0.0)[0]
        raise LawError(
            f"{name!r} is not a layer that a law can read",
            where=where,
            fix=f"{near}, or one of: {', '.join(LAW_INPUTS)}",
        )
    table = dict(given) if isinstance(given, Mapping) else {"unit": given}
    _check_keys(table, ("unit", "low", "high"), where)
    arrives = read_unit(LAW_INPUTS[name], where=where)
    unit = read_unit(_text(table, "unit", where), where=where)
    if unit.dimension != arrives.dimension:
        raise LawError(
            f"layer {name!r} is declared in {table['unit']!r}, which is {unit.dimension}",
            where=where,
            fix=f'unit = "{LAW_INPUTS[name]}"',
        )
    ratio = unit.scale / arrives.scale
    low, high = PLAUSIBLE[name]
    low = _number(table, "low", low / ratio, where) * ratio
    high = _number(table, "high", high / ratio, where) * ratio
    if low >= high:
        raise LawError(f"the range {low:g} to {high:g} is empty", where=where, fix="low < high")
    stated = "low" in table or "high" in table
    source = "the job file" if stated else "no range was given: what the layer may plausibly hold"
    one = Input(name=name, low=low, high=high, range_source=source, range_grade="project")
    return one, arrives


def _parameter(
    name: str, table: Mapping[str, object], where: str, layers: Mapping[str, object]
) -> tuple[Parameter, Unit]:
    _check_name(name, layers, where)
    if not isinstance(table, Mapping):
        raise LawError("the parameter is no table", where=where, fix='{ value = 1, unit = "1" }')
    _check_keys(table, PARAMETER_KEYS, where)
    unit = read_unit(_text(table, "unit", where), where=where)
    default, by_rock = _values(table, where)
    values = [*by_rock.values(), *([] if default is None else [default])]
    sd = _number(table, "sd", 0.0, where)
    low, high = _bounds(values, sd)
    low, high = _number(table, "low", low, where), _number(table, "high", high, where)
    if sd < 0 or not low <= min(values) <= max(values) <= high:
        raise LawError(
            f"value {values}, sd {sd:g}, low {low:g} and high {high:g} do not fit",
            where=where,
            fix="low <= value <= high, and sd of zero or more",
        )
    parameter = Parameter(
        name=name,
        symbol=name,
        unit=str(table["unit"]),
        meaning=_said(table, "meaning", "a parameter of the user's formula", where),
        default=default,
        by_rock=by_rock,
        low=low,
        high=high,
        spread=Spread(kind="normal", sd=sd) if sd else None,
        source=_said(table, "source", "the job file, no source given", where),
        grade="project",
    )
    return parameter, unit


def _values(table: Mapping[str, object], where: str) -> tuple[float | None, dict[str, float]]:
    rocks = table.get("by_rock", {})
    if not isinstance(rocks, Mapping) or not ("value" in table or rocks):
        raise LawError(
            "the parameter has no value",
            where=where,
            fix="value = 1.0, or by_rock = { basalt = 1.0 }",
        )
    default = _number(table, "value", 0.0, where) if "value" in table else None
    return default, {str(rock): _number(rocks, rock, 0.0, where) for rock in rocks}


def _bounds(values: list[float], sd: float) -> tuple[float, float]:
    """Bounds where none are given: four deviations, or a factor of ten, never across zero."""
    least, most = min(values), max(values)
    low = least - N_DEVIATIONS * sd if sd else min(least / 10.0, least * 10.0)
    high = most + N_DEVIATIONS * sd if sd else max(most / 10.0, most * 10.0)
    return (max(low, 0.0) if least > 0 else low), (min(high, 0.0) if most < 0 else high)


def _check_name(name: str, layers: Mapping[str, object], where: str) -> None:
    plain = name.isascii() and name.isidentifier() and not name.startswith("_")
    if not plain or keyword.iskeyword(name):
        raise LawError(
            f"{name!r} cannot be a parameter's name", where=where, fix="letters, digits and _"
        )
    if name in FUNCTIONS or name in LAW_INPUTS or name in layers:
        raise LawError(
            f"{name!r} is already a layer or a function", where=where, fix=f"{name}_parameter"
        )


def _check_keys(table: Mapping[str, object], known: tuple[str, ...], where: str) -> None:
    for key in table:
        if key not in known:
            near = difflib.get_close_matches(str(key), known, n=1, cutoff=0.0)[0]
            raise LawError(
                f"unknown key {key!r}", where=where, fix=f"{near}, or one of: {', '.join(known)}"
            )


def _text(
    table: Mapping[str, object], key: str, where: str, fix: str = 'unit = "mmol L-1", or "1"'
) -> str:
    text = table.get(key)
    if not isinstance(text, str) or not text.strip():
        raise LawError(f"no {key} is given", where=where, fix=fix)
    return text


def _said(table: Mapping[str, object], key: str, default: str, where: str) -> str:
    return _text(table, key, where, f'{key} = "..."') if key in table else default


def _number(table: Mapping[str, object], key: str, default: float, where: str) -> float:
    number = table.get(key, default)
    if isinstance(number, bool) or not isinstance(number, int | float) or not math.isfinite(number):
        raise LawError(f"{key} is {number!r}, no finite number", where=where, fix=f"{key} = 1.0")
    return float(number)


def _rocks(parameters: list[Parameter]) -> tuple[str, ...]:
    """Rocks that every table by rock names; without such a table, every rock that weathers."""
    tables = [set(one.by_rock) for one in parameters if one.default is None]
    weathering = {name for name, rock in ROCKS.items() if rock.weathers}
    common = set.intersection(*tables) if tables else weathering
    return tuple(name for name in ROCKS if name in common)


def _check_rocks(rocks: tuple[str, ...], parameters: list[Parameter], where: str) -> None:
    named = {*rocks, *(rock for one in parameters for rock in one.by_rock)}
    if unknown := sorted(named - set(ROCKS)):
        near = difflib.get_close_matches(unknown[0], ROCKS, n=1, cutoff=0.0)[0]
        raise LawError(f"{unknown[0]!r} is not a rock", where=where, fix=f'"{near}"')
    if not rocks:
        raise LawError(
            "no rock has a value of every parameter", where=where, fix="by_rock = { basalt = 1.0 }"
        )
    for one in parameters:
        if missing := [rock for rock in rocks if one.value(rock) is None]:
            raise LawError(
                f"parameter {one.name!r} has no value for {', '.join(missing)}",
                where=where,
                fix=f"value = ... for all rocks, or by_rock with {missing[0]!r}",
            )
