"""Plain arithmetic over names with units: read into steps of our own, checked, evaluated.

Nothing of the text is ever executed: Python's parser reads it, only the nodes listed here are
taken over as steps, and numpy takes the steps one by one on a stack.
"""

from __future__ import annotations

import ast
import difflib
import math
import warnings
from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass
from fractions import Fraction
from types import MappingProxyType
from typing import Any

import numpy as np

from mapper.dimensions import NONE, Dimension, Unit
from mapper.errors import LawError, Problems

LONGEST = 2000  # characters
DEEPEST_BRACKETS = 40
MOST_OPERATORS = 150
LARGEST_EXPONENT = 10.0
WRITABLE = frozenset("abcdefghijklmnopqrstuvwxyzABCDEFGHIJKLMNOPQRSTUVWXYZ0123456789_.+-*/(), ")

Operation = Callable[..., Any]


class _NotDeclaredError(LawError):
    """A name that a formula uses and nobody declared."""


@dataclass(frozen=True)
class Number:
    """A number as written."""

    value: float


@dataclass(frozen=True)
class Name:
    """A layer or parameter, with what brings its unit to the base units."""

    name: str
    scale: float


@dataclass(frozen=True)
class Apply:
    """An operation on what the last ``count`` steps have left."""

    operation: str
    count: int


Program = tuple[Number | Name | Apply, ...]
"""Steps in the order in which they are taken; the last one leaves the result."""


@dataclass(frozen=True)
class Typed:
    """A program and the dimension of what it gives."""

    program: Program
    dimension: Dimension


def _divide(one: Any, other: Any) -> Any:
    return one / np.where(other == 0.0, np.nan, other)


def _raise(one: Any, power: Any) -> Any:
    raised = np.power(one, power)
    known = np.isfinite(raised) & np.isfinite(one) & np.isfinite(power)  # numpy has nan**0 = 1
    return np.where(known, raised, np.nan)


def _log(one: Any) -> Any:
    return np.log(np.where(one > 0.0, one, np.nan))


def _sqrt(one: Any) -> Any:
    return np.sqrt(np.where(one >= 0.0, one, np.nan))


OPERATIONS: Mapping[str, Operation] = MappingProxyType(
    {
        "+": np.add,
        "-": np.subtract,
        "*": np.multiply,
        "/": _divide,
        "**": _raise,
        "negative": np.negative,
        "exp": np.exp,
        "log": _log,
        "sqrt": _sqrt,
        "minimum": np.minimum,
        "maximum": np.maximum,
    }
)
FUNCTIONS: Mapping[str, int] = MappingProxyType(
    {"exp": 1, "log": 1, "sqrt": 1, "minimum": 2, "maximum": 2}
)
"""The functions that a formula may call, and how many arguments each takes."""

_SYMBOLS: Mapping[type[ast.operator], str] = MappingProxyType(
    {ast.Add: "+", ast.Sub: "-", ast.Mult: "*", ast.Div: "/"}
)


def evaluate(program: Program, values: Mapping[str, Any]) -> Any:
    """Take the steps with the values of their names; no data where a step has no answer."""
    stack: list[Any] = []
    for step in program:
        if isinstance(step, Number):
            stack.append(np.float64(step.value))
        elif isinstance(step, Name):
            stack.append(np.asarray(values[step.name], dtype=np.float64) * step.scale)
        else:
            parts = stack[-step.count :]
            del stack[-step.count :]
            stack.append(OPERATIONS[step.operation](*parts))
    return stack.pop()


def read(text: str, names: Mapping[str, Unit], *, where: str) -> Typed:
    """Read a formula over ``names`` and check its units.

    Raises
    ------
    LawError where it is too long or too deep, holds anything but arithmetic on declared names,
    or its units do not fit; the message gives the column.
    """
    plain = " ".join(text.splitlines()).strip()
    _check_text(plain, where)
    try:
        return _Reader(names=names, where=where).read(_parse(plain, where))
    except _NotDeclaredError as first:
        check_names(text, names, where=where)  # raises with every such name
        raise first from None  # pragma: no cover - for the reader's comfort


def check_names(text: str, names: Iterable[str], *, where: str) -> None:
    """Check what needs no units: that a formula is arithmetic in form, on these names alone.

    Raises
    ------
    LawError, or ManyProblemsError with every name that is not declared.
    """
    plain = " ".join(text.splitlines()).strip()
    _check_text(plain, where)
    known = list(names)
    problems = Problems()
    used = {node.id: node.col_offset for node in reversed(_names_under(_parse(plain, where)))}
    for name, column in sorted(used.items(), key=lambda pair: pair[1]):
        if name not in known and name not in FUNCTIONS:
            problems.add(
                LawError(
                    f"{name!r} is not declared{_nearest(name, known)}",
                    where=f"{where}, column {column + 1}",
                    fix=f"declare it, or use one of: {', '.join(known)}",
                )
            )
    problems.raise_if_any()


def _names_under(node: ast.AST) -> list[ast.Name]:
    if isinstance(node, ast.Name):
        return [node]
    return [name for child in ast.iter_child_nodes(node) for name in _names_under(child)]


def names_in(program: Program) -> set[str]:
    """Gather the names that a program uses."""
    return {step.name for step in program if isinstance(step, Name)}


def _check_text(text: str, where: str) -> None:
    """Refuse, before any parser sees it, what could only waste its time."""
    if not text:
        raise LawError("the formula is empty", where=where, fix='formula = "a * runoff"')
    if len(text) > LONGEST:
        raise LawError(
            f"the formula has {len(text)} characters",
            where=where,
            fix=f"at most {LONGEST}; split it or write the law in Python",
        )
    for column, letter in enumerate(text, start=1):
        if letter not in WRITABLE:
            raise LawError(
                f"the formula holds {letter!r}",
                where=f"{where}, column {column}",
                fix="plain arithmetic: names, numbers, + - * / ** ( ) and " + ", ".join(FUNCTIONS),
            )
    _check_size(text, where)


def _check_size(text: str, where: str) -> None:
    depth = deepest = 0
    for letter in text:
        depth += (letter == "(") - (letter == ")")
        deepest = max(deepest, depth)
    if deepest > DEEPEST_BRACKETS:
        raise LawError(
            f"the formula nests brackets {deepest} deep",
            where=where,
            fix=f"at most {DEEPEST_BRACKETS}",
        )
    count = sum(text.count(one) for one in "+-*/")
    if count > MOST_OPERATORS:
        raise LawError(
            f"the formula has {count} operators", where=where, fix=f"at most {MOST_OPERATORS}"
        )


def _parse(text: str, where: str) -> ast.expr:
    try:
        with warnings.catch_warnings():
            warnings.simplefilter("error")
            return ast.parse(text, mode="eval").body
    except SyntaxError as error:
        column = f", column {error.offset}" if error.offset else ""
        raise LawError(
            f"the formula is not plain arithmetic: {error.msg}",
            where=f"{where}{column}",
            fix='write it as in "a * runoff * exp(-b / temperature)"',
        ) from None
    except (ValueError, MemoryError, RecursionError):
        raise LawError(
            "the formula cannot be read", where=where, fix="write it shorter and flatter"
        ) from None


@dataclass(frozen=True)
class _Reader:
    """Takes over the nodes that arithmetic needs, with their dimensions; refuses all others."""

    names: Mapping[str, Unit]
    where: str

    def read(self, node: ast.expr) -> Typed:
        if isinstance(node, ast.Constant):
            return Typed((Number(self._number(node)),), NONE)
        if isinstance(node, ast.Name):
            return self._name(node)
        if isinstance(node, ast.UnaryOp) and isinstance(node.op, ast.USub | ast.UAdd):
            return self._signed(node)
        if isinstance(node, ast.BinOp):
            return self._pair(node)
        if isinstance(node, ast.Call):
            return self._call(node)
        raise self._refuse(node, f"{_kind(node)} is not arithmetic", "take it out")

    def _refuse(self, node: ast.expr, problem: str, fix: str) -> LawError:
        return LawError(problem, where=f"{self.where}, column {node.col_offset + 1}", fix=fix)

    def _number(self, node: ast.Constant) -> float:
        if type(node.value) not in {int, float}:
            raise self._refuse(node, f"{node.value!r} is not a number", "write a plain number")
        try:
            value = float(node.value)  # type: ignore[arg-type]
        except OverflowError:
            value = math.inf
        if not math.isfinite(value):
            raise self._refuse(node, "the number is too large", "write it below 1e308")
        return value

    def _name(self, node: ast.Name) -> Typed:
        unit = self.names.get(node.id)
        if unit is None:
            raise _NotDeclaredError(
                f"{node.id!r} is not declared{_nearest(node.id, self.names)}",
                where=f"{self.where}, column {node.col_offset + 1}",
                fix=f"declare it, or use one of: {', '.join(self.names)}",
            )
        return Typed((Name(node.id, unit.scale),), unit.dimension)

    def _signed(self, node: ast.UnaryOp) -> Typed:
        part = self.read(node.operand)
        if isinstance(node.op, ast.UAdd):
            return part
        return Typed((*part.program, Apply("negative", 1)), part.dimension)

    def _pair(self, node: ast.BinOp) -> Typed:
        if isinstance(node.op, ast.Pow):
            return self._power(node)
        symbol = _SYMBOLS.get(type(node.op))
        if symbol is None:
            raise self._refuse(node, f"{_kind(node.op)} is not plain arithmetic", "use + - * / **")
        left, right = self.read(node.left), self.read(node.right)
        program = (*left.program, *right.program, Apply(symbol, 2))
        if symbol == "*":
            return Typed(program, left.dimension * right.dimension)
        if symbol == "/":
            return Typed(program, left.dimension / right.dimension)
        self._check_same(node, left, right, "adds" if symbol == "+" else "subtracts")
        return Typed(program, left.dimension)

    def _check_same(self, node: ast.expr, left: Typed, right: Typed, verb: str) -> None:
        if left.dimension != right.dimension:
            raise self._refuse(
                node,
                f"the formula {verb} {left.dimension} and {right.dimension}",
                "give both the same unit: a number with a unit must be a parameter",
            )

    def _power(self, node: ast.BinOp) -> Typed:
        base = self.read(node.left)
        exponent = self._exponent(node.right)
        program = (*base.program, *exponent.program, Apply("**", 2))
        constant = exponent.program[0]
        if base.dimension == NONE:
            return Typed(program, NONE)
        if not isinstance(constant, Number):
            raise self._refuse(
                node,
                f"a quantity in {base.dimension} is raised to a parameter",
                "divide it by a reference in the same unit first",
            )
        power = Fraction(constant.value).limit_denominator(1000)
        return Typed(program, base.dimension**power)

    def _exponent(self, node: ast.expr) -> Typed:
        """Read a plain number within bounds, signed or not, or a name without unit."""
        sign, inner = 1.0, node
        if isinstance(node, ast.UnaryOp) and isinstance(node.op, ast.USub):
            sign, inner = -1.0, node.operand
        if isinstance(inner, ast.Constant):
            value = sign * self._number(inner)
            if abs(value) > LARGEST_EXPONENT:
                raise self._refuse(
                    node, f"the exponent {value:g} is too large", f"at most {LARGEST_EXPONENT:g}"
                )
            return Typed((Number(value),), NONE)
        if isinstance(node, ast.Name):
            part = self._name(node)
            self._check_plain(node, part, "an exponent")
            return part
        raise self._refuse(
            node, "an exponent must be a number or one name", "work it out, or make it a parameter"
        )

    def _check_plain(self, node: ast.expr, part: Typed, what: str) -> None:
        if part.dimension != NONE:
            raise self._refuse(
                node,
                f"{what} is in {part.dimension}, and must have no unit",
                "divide it by a parameter in the same unit",
            )

    def _call(self, node: ast.Call) -> Typed:
        name = node.func.id if isinstance(node.func, ast.Name) else ""
        if name not in FUNCTIONS:
            raise self._refuse(
                node,
                f"{name or _kind(node.func)!r} is not a function a formula may call",
                f"use: {', '.join(FUNCTIONS)}",
            )
        if node.keywords or len(node.args) != FUNCTIONS[name]:
            raise self._refuse(
                node,
                f"{name} is called with the wrong arguments",
                f"{name} takes {FUNCTIONS[name]} plain values",
            )
        parts = [self.read(one) for one in node.args]
        program = (*(step for one in parts for step in one.program), Apply(name, len(parts)))
        return Typed(program, self._dimension_of_call(node, name, parts))

    def _dimension_of_call(self, node: ast.Call, name: str, parts: list[Typed]) -> Dimension:
        if name == "sqrt":
            return parts[0].dimension ** Fraction(1, 2)
        if len(parts) == 1:
            self._check_plain(node.args[0], parts[0], f"what {name} is taken of")
        else:
            self._check_same(node, parts[0], parts[1], f"compares, by {name},")
        return parts[0].dimension


def _kind(node: ast.AST) -> str:
    return f"{type(node).__name__.lower()}"


def _nearest(name: str, known: Iterable[str]) -> str:
    near = difflib.get_close_matches(name, list(known), n=1)
    return f"; did you mean {near[0]!r}?" if near else ""
