"""Laws side by side at conditions that the user names."""

from __future__ import annotations

import difflib
import re
import textwrap
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from types import MappingProxyType

import numpy as np

from mapper.accounting import drawdown_share, to_rate
from mapper.errors import LawError, Problems, UnitError
from mapper.evaluation import Flag, RockResult, evaluate_rock
from mapper.exports.catalogue import find_named
from mapper.laws import LAW_INPUTS, ZERO_CELSIUS, Law
from mapper.layers.layer import QUANTITY
from mapper.rocks import ROCKS
from mapper.scheme import RockLaw
from mapper.units import conversion

WHERE = "saprolite laws --at"

USUAL: Mapping[str, float] = MappingProxyType(
    {
        # a temperate land of middling relief, in the units of LAW_INPUTS: this project's choice
        "runoff": 800.0,
        "temperature": 285.15,
        "vegetation": 0.8,
        "soil_shielding": 1.0,
        "erosion": 100.0,
        "evapotranspiration": 600.0,
        "soil_co2": 0.01,
        "reference_consumption": 0.2,
        "precipitation": 1400.0,
    }
)
"""Conditions at which laws are compared and drawn where the user names none."""

_SHORT_UNITS = {"C": "degC", "F": "degF"}


@dataclass(frozen=True)
class Conditions:
    """Layers' values in inner units, the names that the user gave, and the rock."""

    values: Mapping[str, float]
    given: tuple[str, ...]
    rock: str | None


def read_conditions(pairs: Sequence[str]) -> Conditions:
    """Read pairs such as ``runoff=800``, ``temperature=12C`` and ``rock=basalt``.

    Raises
    ------
    LawError or UnitError, or ManyProblemsError with all that is wrong.

    Examples
    --------
    >>> read_conditions(["temperature=12C", "vegetation=60%"]).values["temperature"]
    285.15
    """
    problems = Problems()
    values: dict[str, float] = {}
    rock: str | None = None
    for pair in pairs:
        name, _, text = (part.strip() for part in pair.partition("="))
        with problems.gather():
            if name == "rock":
                rock = _rock(text)
            else:
                values[name] = _value(name, text)
    problems.raise_if_any()
    return Conditions({**USUAL, **values}, tuple(values), rock)


def _rock(text: str) -> str:
    weathering = [name for name, rock in ROCKS.items() if rock.weathers]
    if text not in weathering:
        near = difflib.get_close_matches(text, weathering, n=1, cutoff=0.0)[0]
        raise LawError(f"{text!r} is not a rock that weathers", where=WHERE, fix=f'rock="{near}"')
    return text


def _value(name: str, text: str) -> float:
    if name not in LAW_INPUTS:
        near = difflib.get_close_matches(name, LAW_INPUTS, n=1, cutoff=0.0)[0]
        raise LawError(
            f"{name!r} is not a layer that a law can read",
            where=WHERE,
            fix=f"{near}=..., or one of: {', '.join(LAW_INPUTS)}, rock",
        )
    match = re.fullmatch(r"([-+]?(?:\d+\.?\d*|\.\d+)(?:[eE][-+]?\d+)?)\s*(.*)", text)
    if match is None:
        raise LawError(
            f"{name}={text!r} is no number", where=WHERE, fix=f"{name}={_spell(name, USUAL[name])}"
        )
    number, unit = float(match[1]), match[2].strip()
    if not unit and name == "temperature":
        raise LawError(
            f"temperature={text} does not say whether it is in degC or in K",
            where=WHERE,
            fix=f"temperature={text}C or temperature={text}K",
        )
    unit = _SHORT_UNITS.get(unit, unit) or LAW_INPUTS[name]
    try:
        found = conversion(unit, QUANTITY[name], where=WHERE)
    except UnitError as cause:
        raise LawError(
            f"{name}={text}: {cause.problem}",
            where=WHERE,
            fix=f"{name}={_spell(name, USUAL[name])}"
            + ("" if name == "temperature" else f", in {LAW_INPUTS[name]}"),
        ) from cause
    return number * found.factor + found.offset


def _spell(name: str, value: float) -> str:
    return f"{value - ZERO_CELSIUS:g}C" if name == "temperature" else f"{value:g}"


def spell_condition(name: str, value: float) -> str:
    """A layer's value with its unit, as a reader writes it: temperature in degC.

    Examples
    --------
    >>> spell_condition("temperature", 285.15), spell_condition("vegetation", 0.6)
    ('temperature 12 degC', 'vegetation 0.6')
    """
    if name == "temperature":
        return f"temperature {value - ZERO_CELSIUS:g} degC"
    unit = LAW_INPUTS[name]
    return f"{name} {value:g}" + ("" if unit == "1" else f" {unit}")


def evaluate_at(law: Law, rock: str, values: Mapping[str, float]) -> RockResult:
    """Evaluate a law for a rock at one place, by the same door as a map."""
    layers = {name: np.array([values[name]]) for name in law.input_names}
    return evaluate_rock(RockLaw(law, law.central_values(rock)), layers)


def comparison_lines(names: Sequence[str], pairs: Sequence[str]) -> list[str]:
    """Laws side by side at the same conditions, given as pairs, and the same rock.

    Raises
    ------
    LawError, or ManyProblemsError, with every law that is unknown and every bad pair.
    """
    problems = Problems()
    conditions = Conditions(USUAL, (), None)
    with problems.gather():
        conditions = read_conditions(pairs)
    laws: list[Law] = []
    for name in dict.fromkeys(names):
        with problems.gather():
            laws.append(find_named(name, where="saprolite laws --compare"))
    problems.raise_if_any()
    rock = conditions.rock or _common_rock(laws)
    read = [name for name in USUAL if any(name in law.input_names for law in laws)]
    at = [
        spell_condition(name, conditions.values[name])
        + ("" if name in conditions.given else " (usual)")
        for name in read
    ]
    lines = [
        *textwrap.wrap(f"{rock} at {', '.join(at)}", 100),
        "",
        f"{'':24} {'consumption, short term':>27}  {'drawdown,':>13}  {'over':>6}",
        f"{'law':24} {'mol m-2 yr-1':>12} {'t km-2 yr-1':>14}  {'t km-2 yr-1':>13}  {'first':>6}",
    ]
    first: float | None = None
    for law in laws:
        found = evaluate_at(law, rock, conditions.values) if rock in law.rocks else None
        rate = None if found is None or law.output == "relative" else float(found.rate[0])
        first = rate if first is None else first
        lines.append(_row(law, rock, rate, first))
        lines += [f"{'':26}{text}" for text in _remarks(law, rock, conditions.values, found)]
    unused = [name for name in conditions.given if name not in read]
    lines += ["", "t are tonnes of CO2; drawdown is what of the uptake lasts, by the rock"]
    lines += [f"no law here reads {', '.join(unused)}"] if unused else []
    lines += ["(usual): not given with --at, and taken as this project's usual value"]
    return lines


def _common_rock(laws: Sequence[Law]) -> str:
    """The rock that most of the laws serve; the first of them where several are."""
    served = {rock: sum(rock in law.rocks for law in laws) for rock in ROCKS}
    return max(served, key=lambda rock: served[rock])


def _row(law: Law, rock: str, rate: float | None, first: float | None) -> str:
    if rate is None:
        return f"{law.name:24} {'-':>12} {'-':>14}  {'-':>13}  {'-':>6}"
    tonnes = to_rate(rate)
    kept = tonnes * drawdown_share(ROCKS[rock])
    ratio = f"{rate / first:6.2f}" if first else f"{'-':>6}"
    return f"{law.name:24} {rate:12.4g} {tonnes:14.4g}  {kept:13.4g}  {ratio}"


def _remarks(
    law: Law, rock: str, values: Mapping[str, float], found: RockResult | None
) -> list[str]:
    if found is None:
        return [f"has no numbers for {rock}; serves {', '.join(law.rocks[:4])}"]
    remarks = []
    for one in law.inputs:
        if not one.low <= values[one.name] <= one.high:
            low, high = spell_condition(one.name, one.low), spell_condition(one.name, one.high)
            remarks.append(f"outside its range: {low} to {high.removeprefix(one.name).strip()}")
    if law.output == "relative":
        remarks.append(f"only ranks, no flux: relative rate {float(found.rate[0]):.4g}")
    if found.flags[0] & int(Flag.NOT_FINITE):
        remarks.append("gives no finite number here")
    return remarks
