"""The catalogue of laws as text: every number with its unit, source and grade."""

from __future__ import annotations

from mapper.laws import (
    CAP,
    CONSUMPTION_PER_TONNE,
    LAW_INPUTS,
    NOT_RECOVERED,
    UNLIMITED_ROCKS,
    WEATHERING_LIMIT,
    ZERO_CELSIUS,
    Input,
    Law,
    Parameter,
    Spread,
)
from mapper.rocks import ROCKS
from mapper.scheme import find_laws, unknown_law

_GRADE_MEANING = (
    "grades: read in the paper; quoted elsewhere from it; memory: not seen, an editable default; "
    "computed from the formula; project: our own choice"
)


_GIVES = {"consumption": "uptake", "relative": "rank"}
_SHORT = {
    # a layer's name where a line has to hold several of them
    "runoff": "runoff",
    "temperature": "T",
    "vegetation": "cover",
    "soil_shielding": "soil",
    "erosion": "erosion",
    "evapotranspiration": "ET",
    "soil_co2": "soil-CO2",
    "reference_consumption": "reference",
    "precipitation": "rain",
}


def laws_lines() -> list[str]:
    """One line a law: what it needs, what it gives, for which rocks, its range and year."""
    laws = find_laws()
    width = max(len(name) for name in laws)
    head = f"{'law':{width}} year {'needs':20} {'gives':6} {'rocks':20}"
    head += f" {'T, degC':>9} {'runoff, mm yr-1':>16}"
    lines = [head, "-" * len(head)]
    for name, law in laws.items():
        needs = " ".join(_SHORT[one] for one in law.input_names) or "nothing"
        temperature = _span(law, "temperature", ZERO_CELSIUS)
        lines.append(
            f"{name:{width}} {law.year} {needs:20} {_GIVES[law.output]:6} {_rocks(law):20} "
            f"{temperature:>9} {_span(law, 'runoff', 0.0):>16}"
        )
    lines += [
        "",
        "needs: T temperature; cover vegetation; soil soil_shielding; ET evapotranspiration;",
        "       soil-CO2 soil_co2; reference reference_consumption, a map of uptake to scale",
        "gives: uptake of CO2, short term, in mol m-2 yr-1; or a number that only ranks rocks",
        "T and runoff: range in which the law holds; cells beyond are computed and flagged",
        f'[law] cap = "{CAP}" holds any law at the supply of fresh rock',
        "",
        "left out:",
        *(f"  {text}" for text in NOT_RECOVERED),
        "",
        "saprolite laws NAME              a law in full: formula, numbers, sources, grades",
        "saprolite laws NAME --plot FILE  its response curves (.png, .svg or .pdf)",
        "saprolite laws --compare A B --at runoff=800 temperature=12C rock=basalt",
    ]
    return lines


def _span(law: Law, name: str, zero: float) -> str:
    for one in law.inputs:
        if one.name == name:
            return f"{one.low - zero:g}..{one.high - zero:g}"
    return "-"


def _rocks(law: Law) -> str:
    if len(law.rocks) <= 2:
        return ", ".join(law.rocks)
    kinds = [ROCKS[rock].kind for rock in law.rocks]
    if all(kind == "silicate" for kind in kinds):
        return f"{len(kinds)} silicate rocks"
    return f"{len(kinds)} rocks"


def _range(one: Input) -> str:
    if one.name == "temperature":
        return f"T {one.low - ZERO_CELSIUS:g}..{one.high - ZERO_CELSIUS:g} degC"
    unit = LAW_INPUTS[one.name]
    return f"{one.name} {one.low:g}..{one.high:g}" + ("" if unit == "1" else f" {unit}")


def law_lines(name: str) -> list[str]:
    """One law in full.

    Raises LawError where there is none of that name.
    """
    if name == CAP:
        return _cap_lines()
    law = find_named(name, where="saprolite laws")
    lines = [f"{law.name}: {law.title} ({law.year})", law.summary, "", f"  {law.formula}", ""]
    lines += ["inputs, with the range in which the law holds"]
    lines += [
        f"  {_range(one)}  ({one.range_source}; grade: {one.range_grade})" for one in law.inputs
    ] or ["  none"]
    lines += ["", "parameters"]
    for parameter in law.parameters:
        lines += _parameter_lines(parameter)
    lines += ["", "rocks", "  " + ", ".join(law.rocks)]
    if law.cautions:
        lines += ["", "cautions", *(f"  {text}" for text in law.cautions)]
    lines += _check_lines(law)
    doi = f" doi {law.doi}" if law.doi else ""
    lines += ["", "reference", f"  {law.reference}{doi}", "", _GRADE_MEANING]
    return lines


def find_named(name: str, *, where: str) -> Law:
    """Find a law of the catalogue or of another package.

    Raises LawError where there is none of that name.
    """
    laws = find_laws()
    if name not in laws:
        raise unknown_law(name, laws, where=where, fix="{}")
    return laws[name]


def _cap_lines() -> list[str]:
    """The supply limit, which is no law of its own but may hold any."""
    return [
        f"{CAP}: the most that the supply of fresh rock allows (2012)",
        f'holds any law: [law] cap = "{CAP}"; its numbers are set in [law.parameters]',
        "",
        "  F = min(F of the law; c W_max)",
        "",
        "parameters",
        *_parameter_lines(WEATHERING_LIMIT),
        *_parameter_lines(CONSUMPTION_PER_TONNE),
        "",
        f"not held: {', '.join(UNLIMITED_ROCKS)}, unless weathering_limit.by_rock names them",
        "cells that the limit holds carry a flag, and tables/flags.csv has their area",
        "",
        _GRADE_MEANING,
    ]


def _parameter_lines(one: Parameter) -> list[str]:
    default = "" if one.default is None else f" = {one.default:g}"
    unit = "" if one.unit == "1" else f" {one.unit}"
    head = f"  {one.name} ({one.symbol}){default}{unit}: {one.meaning}"
    spread = f"; spread {_spread(one.spread)}" if one.spread else ""
    lines = [
        head,
        f"      range {one.low:g}..{one.high:g}{spread}",
        f"      {one.source} (grade: {one.grade})",
    ]
    if one.by_rock:
        values = ", ".join(f"{rock} {value:g}" for rock, value in one.by_rock.items())
        lines.insert(1, f"      {values}")
    return lines


def _spread(spread: Spread) -> str:
    if spread.kind in ("normal", "lognormal"):
        return f"{spread.kind}, sd {spread.sd:g}"
    return f"{spread.kind} {spread.low:g}..{spread.high:g}"


def _check_lines(law: Law) -> list[str]:
    if not law.checks:
        return ["", "checks", "  no published value was at hand"]
    lines = ["", "checks"]
    for one in law.checks:
        given = ", ".join(f"{name} {value:g}" for name, value in one.inputs.items())
        lines.append(f"  {one.rock} at {given}: {one.expected:g}  ({one.source}; {one.grade})")
    return lines
