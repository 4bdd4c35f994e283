"""A table of a TOML file: each value checked, all problems gathered, unknown keys noted."""

from __future__ import annotations

import difflib
import json
import math
import tomllib
from collections.abc import Mapping
from pathlib import Path
from typing import Any

from mapper.errors import JobError, MissingFileError, Problems


def read_toml(path: Path) -> dict[str, Any]:
    """Read a TOML file as text in UTF-8, whatever its line ends.

    Raises
    ------
    MissingFileError, JobError with the line and column of what is wrong.
    """
    if not path.is_file():
        near = difflib.get_close_matches(path.name, _toml_names(path.parent), n=1)
        raise MissingFileError(
            f"there is no job file {path.name!r}",
            where=str(path.parent),
            fix=f"saprolite run {path.parent / near[0]}" if near else "the path of a .toml file",
        )
    try:
        return tomllib.loads(path.read_bytes().decode("utf-8-sig").replace("\r\n", "\n"))
    except tomllib.TOMLDecodeError as cause:
        raise JobError(
            f"the job file is not valid TOML: {cause}",
            where=str(path),
            fix="mend the line and column named; text goes in double quotes",
        ) from cause
    except UnicodeDecodeError as cause:
        raise JobError(
            f"the job file is not UTF-8 text (byte {cause.start})",
            where=str(path),
            fix="save it as UTF-8",
        ) from cause


def _toml_names(folder: Path) -> list[str]:
    return [one.name for one in folder.glob("*.toml")] if folder.is_dir() else []


class Table:
    """A TOML table that knows its place, checks each value, and notes keys nobody asked for."""

    def __init__(self, table: Mapping[str, Any], *, where: str, problems: Problems) -> None:
        self.values = table
        self.where = where
        self.problems = problems
        self.known: list[str] = []
        self.children: list[Table] = []

    def _take(self, key: str) -> Any:
        self.known.append(key)
        return self.values.get(key)

    def wrong(self, key: str, needed: str, fix: str) -> None:
        """Note that a value is wrong, and what is needed."""
        value = self.values.get(key)
        problem = f"{key} = {value!r}, and {needed} is needed" if key in self.values else needed
        self.problems.add(JobError(problem, where=f"{self.where}, {key}", fix=fix))

    def table(self, key: str) -> Table:
        """A table inside this one."""
        value = self._take(key)
        if value is not None and not isinstance(value, dict):
            self.wrong(key, "a table", f"[{key}] on a line of its own")
            value = {}
        separator = ", " if self.where.endswith(".toml") else "."
        child = Table(value or {}, where=f"{self.where}{separator}{key}", problems=self.problems)
        self.children.append(child)
        return child

    def text(self, key: str, *, default: str) -> str:
        """Text, or the default."""
        value = self._take(key)
        if value is None:
            return default
        if not isinstance(value, str) or not value.strip():
            self.wrong(key, "text", f'{key} = "..."')
            return default
        return value

    def optional_text(self, key: str) -> str | None:
        """Text, or None."""
        value = self.text(key, default="")
        return value or None

    def needed_text(self, key: str, example: str) -> str:
        """Text that must be there."""
        if key not in self.values:
            self.known.append(key)
            self.wrong(key, f"{key} is missing", f"{key} = {example}")
            return ""
        return self.text(key, default="")

    def choice(self, key: str, among: tuple[str, ...], *, default: str) -> str:
        """One of several words."""
        value = self.text(key, default=default)
        if value not in among:
            near = difflib.get_close_matches(value, among, n=1, cutoff=0.0)[0]
            self.wrong(key, "one of " + ", ".join(among), f'{key} = "{near}"')
            return default
        return value

    def choices(
        self, key: str, among: tuple[str, ...], *, default: tuple[str, ...]
    ) -> tuple[str, ...]:
        """Several of several words."""
        value = self._take(key)
        if value is None:
            return default
        listed = value if isinstance(value, list) else [value]
        if any(one not in among for one in listed):
            needed = "a list of " + ", ".join(among)
            self.wrong(key, needed, f"{key} = {json.dumps(list(among))}")
            return default
        return tuple(listed)

    def number(self, key: str) -> float | None:
        """A finite number, or None."""
        value = self._take(key)
        if value is None:
            return None
        if isinstance(value, bool) or not isinstance(value, int | float):
            self.wrong(key, "a number", f"{key} = 1.0, without quotes")
            return None
        if not math.isfinite(value):
            self.wrong(key, "a finite number", f"{key} = 1.0")
            return None
        return float(value)

    def flag(self, key: str) -> bool | None:
        """True or false, or None."""
        value = self._take(key)
        if value is None or isinstance(value, bool):
            return value
        self.wrong(key, "true or false", f"{key} = true")
        return None

    def whole(self, key: str, *, default: int, least: int) -> int:
        """A whole number of ``least`` or more."""
        value = self._take(key)
        if value is None:
            return default
        if isinstance(value, bool) or not isinstance(value, int) or value < least:
            self.wrong(key, f"a whole number of {least} or more", f"{key} = {max(default, least)}")
            return default
        return value

    def numbers(self, key: str, count: int | None, example: str) -> tuple[float, ...] | None:
        """A list of numbers, or None."""
        value = self._take(key)
        if value is None:
            return None
        listed = value if isinstance(value, list) else [value]
        good = all(isinstance(one, int | float) and not isinstance(one, bool) for one in listed)
        if not good or (count is not None and len(listed) != count):
            self.wrong(key, f"{count or 'some'} numbers", f"{key} = {example}")
            return None
        if key != "nodata" and not all(math.isfinite(one) for one in listed):
            self.wrong(key, "finite numbers", f"{key} = {example}")
            return None
        return tuple(float(one) for one in listed)

    def listed(self, key: str, example: str) -> list[Any]:
        """Take a list; an empty one where the key is absent."""
        value = self._take(key)
        if value is not None and not isinstance(value, list):
            self.wrong(key, "a list", f"{key} = {example}")
        return value if isinstance(value, list) else []

    def raw(self, key: str, example: str) -> dict[str, Any]:
        """Take a table whose keys somebody else checks."""
        value = self._take(key)
        if value is not None and not isinstance(value, dict):
            self.wrong(key, "a table", f"{key} = {example}")
        return value if isinstance(value, dict) else {}

    def weight(self, key: str) -> float:
        """Take a number above zero; 1 where the key is absent."""
        value = self.number(key)
        if value is not None and value <= 0:
            self.wrong(key, "a weight above zero", f"{key} = 1.0")
        return 1.0 if value is None else value

    def finish(self) -> None:
        """Note every key that was not asked for, with the nearest one that is known."""
        for key in self.values:
            if key in self.known:
                continue
            near = difflib.get_close_matches(key, self.known, n=1, cutoff=0.5)
            fix = f"{near[0]}" if near else "one of: " + ", ".join(sorted(set(self.known)))
            self.problems.add(
                JobError(f"unknown key {key!r}", where=f"{self.where}, {key}", fix=fix)
            )
        for child in self.children:
            child.finish()
