"""The catalogue of laws as text: every number with its unit, source and grade."""

from __future__ import annotations

import difflib

from mapper.errors import LawError
from mapper.laws import LAWS, NOT_RECOVERED, Law, Parameter
from mapper.laws.law import LAW_INPUTS, ZERO_CELSIUS, Input, Spread

_GRADE_MEANING = (
    "grades: read in the paper; quoted elsewhere from it; memory: not seen, an editable default; "
    "computed from the formula; project: our own choice"
)


def laws_lines() -> list[str]:
    """One line a law: what it needs, what it gives, for which rocks, its range and year."""
    width = max(len(name) for name in LAWS)
    lines = []
    for name, law in LAWS.items():
        needs = ", ".join(law.input_names) or "no layer"
        gives = "mol CO2 m-2 yr-1" if law.output == "consumption" else "a relative rate"
        rocks = ", ".join(law.rocks) if len(law.rocks) <= 3 else f"{len(law.rocks)} rocks"
        lines.append(f"{name:{width}}  {law.year}  {law.title}")
        ranges = "; ".join(_range(one) for one in law.inputs)
        lines.append(f"{'':{width}}        needs {needs}; gives {gives}; for {rocks}")
        if ranges:
            lines.append(f"{'':{width}}        fitted in {ranges}")
    lines += ["", "left out:", *(f"  {text}" for text in NOT_RECOVERED)]
    lines += ["", "saprolite laws NAME shows a law in full"]
    return lines


def _range(one: Input) -> str:
    if one.name == "temperature":
        return f"T {one.low - ZERO_CELSIUS:g}..{one.high - ZERO_CELSIUS:g} degC"
    unit = LAW_INPUTS[one.name]
    return f"{one.name} {one.low:g}..{one.high:g}" + ("" if unit == "1" else f" {unit}")


def law_lines(name: str) -> list[str]:
    """One law in full.

    Raises LawError where there is none of that name.
    """
    if name not in LAWS:
        near = difflib.get_close_matches(name, LAWS, n=1, cutoff=0.0)[0]
        raise LawError(
            f"there is no law {name!r}", where="saprolite laws", fix=f"saprolite laws {near}"
        )
    law = LAWS[name]
    lines = [f"{law.name}: {law.title} ({law.year})", law.summary, "", f"  {law.formula}", ""]
    lines += ["inputs"]
    lines += [
        f"  {_range(one)}  ({one.range_source}; {one.range_grade})" for one in law.inputs
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


def _parameter_lines(one: Parameter) -> list[str]:
    default = "" if one.default is None else f" = {one.default:g}"
    unit = "" if one.unit == "1" else f" {one.unit}"
    head = f"  {one.name} ({one.symbol}){default}{unit}: {one.meaning}"
    spread = f"; spread {_spread(one.spread)}" if one.spread else ""
    lines = [
        head,
        f"      range {one.low:g}..{one.high:g}{spread}",
        f"      {one.source} ({one.grade})",
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
