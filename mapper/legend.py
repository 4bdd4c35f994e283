"""Legends: which rocks the codes or names of a geological map stand for."""

from __future__ import annotations

import csv
import difflib
import io
import math
from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from pathlib import Path

from mapper.errors import LegendError, MissingFileError, Problems
from mapper.rocks import ROCK_NAMES, ROCKS

SHARE_TOLERANCE = 1e-6


@dataclass(frozen=True)
class Legend:
    """For each code or name, the rocks that it stands for and their shares, which add up to 1."""

    path: str
    mixtures: Mapping[str, tuple[tuple[str, float], ...]]

    def rocks(self) -> tuple[str, ...]:
        """Every rock that occurs, in the order of the rock classes."""
        used = {rock for mixture in self.mixtures.values() for rock, _ in mixture}
        return tuple(name for name in ROCK_NAMES if name in used)

    def unknown(self, codes: Iterable[str]) -> list[str]:
        """The codes that the legend does not hold."""
        return [code for code in codes if code not in self.mixtures]


def read_legend(path: str, *, where: str) -> Legend:
    """Read a legend: a CSV with columns code, rock and, for mixed classes, share.

    A code on several lines is a mixture; its shares must add up to 1. A rock is one of the rock
    classes or the CGI Simple Lithology term linked to it.

    Raises
    ------
    MissingFileError, LegendError or ManyProblemsError with all that is wrong in the file.
    """
    file = Path(path)
    if not file.is_file():
        raise MissingFileError(
            f"there is no legend {file.name!r}", where=where, fix="a CSV with columns code,rock"
        )
    problems = Problems()
    mixtures: dict[str, list[tuple[str, float]]] = {}
    spoilt: set[str] = set()
    for line, row in _read_rows(file):
        code = normal_code(row["code"] or "")
        n_before = len(problems.found)
        with problems.gather():
            mixtures.setdefault(code, []).append(_entry(row, f"{path}, line {line}"))
        if len(problems.found) > n_before:
            spoilt.add(code)
    for code, mixture in mixtures.items():
        total = sum(share for _, share in mixture)
        if abs(total - 1.0) > SHARE_TOLERANCE and code not in spoilt:
            problems.add(
                LegendError(
                    f"the shares of code {code!r} add up to {total:g}",
                    where=path,
                    fix="shares that add up to 1, or one line a code",
                )
            )
    problems.raise_if_any()
    return Legend(path, {code: tuple(mixture) for code, mixture in mixtures.items()})


def _read_rows(file: Path) -> list[tuple[int, dict[str, str | None]]]:
    """The lines of a legend below its first, with their numbers."""
    try:
        text = file.read_text(encoding="utf-8-sig")
    except UnicodeDecodeError as cause:
        raise LegendError(
            f"the legend is not UTF-8 text (byte {cause.start})",
            where=str(file),
            fix="save it as UTF-8",
        ) from cause
    reader = csv.DictReader(io.StringIO(text, newline=""))
    missing = [name for name in ("code", "rock") if name not in (reader.fieldnames or ())]
    if missing:
        raise LegendError(
            f"the legend has columns {reader.fieldnames}, and {missing[0]!r} is missing",
            where=str(file),
            fix="a first line code,rock (and share for mixed classes)",
        )
    return list(enumerate(reader, start=2))


def normal_code(text: str) -> str:
    """Spell whole numbers one way, so that "7.0", "07" and 7 are one code."""
    text = text.strip()
    try:
        number = float(text)
    except ValueError:
        return text
    return str(int(number)) if math.isfinite(number) and number == int(number) else text


def _entry(row: Mapping[str, str | None], where: str) -> tuple[str, float]:
    rock = find_rock((row["rock"] or "").strip(), where=where)
    text = (row.get("share") or "1").strip()
    try:
        share = float(text)
    except ValueError:
        share = float("nan")
    if not 0 < share <= 1:
        raise LegendError(f"share {text!r} is not above 0 and up to 1", where=where, fix="0.5")
    return rock, share


def suggest_rock(text: str) -> str:
    """The rock whose name stands in ``text`` or is most like it; nothing where none is near."""
    plain = " ".join(text.lower().replace("_", " ").split())
    for rock in ROCK_NAMES:
        if rock in plain:
            return rock
    near = difflib.get_close_matches(plain, ROCK_NAMES, n=1, cutoff=0.6)
    return near[0] if near else ""


def find_rock(text: str, *, where: str) -> str:
    """The rock class that ``text`` names, directly or by its CGI Simple Lithology term.

    Raises LegendError with the nearest names where there is none.
    """
    plain = text.lower().replace("_", " ")
    if plain in ROCKS:
        return plain
    for rock in ROCKS.values():
        if rock.cgi_term and text.rsplit("/", 1)[-1] == rock.cgi_term:
            return rock.name
    near = difflib.get_close_matches(plain, ROCK_NAMES, n=3, cutoff=0.0)
    raise LegendError(
        f"{text!r} is not a rock class",
        where=where,
        fix=f"one of {', '.join(near)} (all: {', '.join(ROCK_NAMES)})",
    )
