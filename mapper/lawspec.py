"""The ``[law]`` table of a job: laws by rock, responses, parameters, laws of one's own."""

from __future__ import annotations

import difflib
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any

from mapper.doubts import spread_of
from mapper.laws import CAP, Spread
from mapper.rocks import ROCK_NAMES
from mapper.table import Table as _Table

RESPONSES = ("runoff", "temperature", "vegetation", "soil")


CAPS = ("none", CAP)


@dataclass(frozen=True, kw_only=True)
class ParameterSpec:
    """A parameter that the job sets: a value for all rocks, or one for each, and a spread.

    ``per_rock`` is None where the job does not say whether each rock is drawn for itself.
    """

    value: float | None = None
    by_rock: Mapping[str, float] = field(default_factory=dict)
    spread: Spread | None = None
    per_rock: bool | None = None


@dataclass(frozen=True, kw_only=True)
class AlternativeSpec:
    """One entry of ``[law] alternatives``: a law in place of the default, and its weight."""

    name: str
    weight: float = 1.0


@dataclass(frozen=True, kw_only=True)
class OwnLawSpec:
    """One ``[law.own.NAME]`` table, as written: its formula and units are checked later."""

    formula: str
    inputs: Mapping[str, Any]
    parameters: Mapping[str, Any]
    rocks: tuple[str, ...] = ()


@dataclass(frozen=True, kw_only=True)
class LawSpec:
    """The ``[law]`` table."""

    default: str = "product"
    by_rock: Mapping[str, str] = field(default_factory=dict)
    base: str = "amiotte-suchet-1995"
    responses: Mapping[str, str] = field(default_factory=dict)
    parameters: Mapping[str, ParameterSpec] = field(default_factory=dict)
    cap: str = "none"
    own: Mapping[str, OwnLawSpec] = field(default_factory=dict)
    alternatives: tuple[AlternativeSpec, ...] = ()
    weight: float = 1.0


def law_spec(table: _Table) -> LawSpec:
    """Read the ``[law]`` table; what is wrong is noted in the table's problems."""
    responses = table.table("responses")
    parameters = table.table("parameters")
    by_rock = table.table("by_rock")
    chosen = {key: responses.text(key, default="") for key in RESPONSES if key in responses.values}
    responses.known.extend(RESPONSES)
    return LawSpec(
        default=table.text("default", default="product"),
        base=table.text("base", default="amiotte-suchet-1995"),
        by_rock={key: by_rock.text(key, default="") for key in list(by_rock.values)},
        responses={key: value for key, value in chosen.items() if value},
        parameters={key: _parameter_spec(key, parameters) for key in list(parameters.values)},
        cap=table.choice("cap", CAPS, default="none"),
        own=_own_laws(table.table("own")),
        alternatives=_alternatives(table),
        weight=table.weight("weight"),
    )


def _own_laws(parent: _Table) -> dict[str, OwnLawSpec]:
    tables = {name: parent.table(name) for name in parent.values}
    return {
        name: OwnLawSpec(
            formula=table.needed_text("formula", '"a * runoff"'),
            inputs=table.raw("inputs", '{ runoff = "mm yr-1" }'),
            parameters=table.raw("parameters", '{ a = { value = 0.5, unit = "mmol L-1" } }'),
            rocks=_rock_list(table),
        )
        for name, table in tables.items()
    }


def _rock_list(table: _Table) -> tuple[str, ...]:
    example = '["basalt", "gabbro"]'
    listed = table.listed("rocks", example)
    if not all(isinstance(one, str) for one in listed):
        table.wrong("rocks", "names of rocks", f"rocks = {example}")
    return tuple(one for one in listed if isinstance(one, str))


def _alternatives(table: _Table) -> tuple[AlternativeSpec, ...]:
    example = '["west-2012", { name = "dessert-2003", weight = 2.0 }]'
    chosen: list[AlternativeSpec] = []
    for place, one in enumerate(table.listed("alternatives", example), start=1):
        if not isinstance(one, str | dict):
            table.wrong("alternatives", "names of laws", f"alternatives = {example}")
            continue
        values = {"name": one} if isinstance(one, str) else one
        where = f"{table.where}.alternatives, entry {place}"
        entry = _Table(values, where=where, problems=table.problems)
        table.children.append(entry)
        name = entry.needed_text("name", '"west-2012"')
        chosen.append(AlternativeSpec(name=name, weight=entry.weight("weight")))
    return tuple(chosen)


def _parameter_spec(name: str, parent: _Table) -> ParameterSpec:
    if not isinstance(parent.values[name], dict):
        return ParameterSpec(value=parent.number(name))
    table = parent.table(name)
    value = table.number("value")
    spread = spread_of(table, default="normal")
    per_rock = table.flag("per_rock")
    rocks = table.table("by_rock")
    for rock in rocks.values:
        if rock not in ROCK_NAMES:
            near = difflib.get_close_matches(rock, ROCK_NAMES, n=1, cutoff=0.0)[0]
            rocks.wrong(rock, f"{rock!r} is not a rock", f'"{near}" = ...')
    values = {key: rocks.number(key) for key in list(rocks.values)}
    return ParameterSpec(
        value=value,
        by_rock={key: one for key, one in values.items() if one is not None},
        spread=spread,
        per_rock=per_rock,
    )
