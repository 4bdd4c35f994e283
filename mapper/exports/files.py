"""Files that appear under their final name only when they are whole."""

from __future__ import annotations

import csv
import json
import math
import os
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from pathlib import Path
from typing import Any

from mapper.errors import RunFolderError

_FORMULA_STARTS = ("=", "+", "-", "@", "\t", "\r")


@contextmanager
def whole_file(path: Path) -> Iterator[Path]:
    """Give a temporary name beside ``path``, and rename to it when the block ends well.

    Raises RunFolderError where the folder cannot be written or the disk is full.
    """
    temporary = path.with_name(f".part-{path.name}")
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
        yield temporary
        with temporary.open("rb+") as stream:
            os.fsync(stream.fileno())
        temporary.replace(path)
    except OSError as cause:
        if isinstance(cause, RunFolderError):
            raise
        raise RunFolderError(
            f"{path.name} cannot be written: {cause.strerror or cause}",
            where=str(path.parent),
            fix="a folder with room that may be written, with --out DIR",
        ) from cause
    finally:
        temporary.unlink(missing_ok=True)


def write_json(path: Path, content: Any) -> None:
    """Write JSON, keys in the order given; NaN becomes null."""
    with whole_file(path) as temporary:
        text = json.dumps(content, indent=2, ensure_ascii=False, allow_nan=False)
        temporary.write_text(text + "\n", encoding="utf-8")


def write_csv(path: Path, columns: Sequence[str], rows: Sequence[Sequence[Any]]) -> None:
    """Write a table: numbers as they are, nothing for NaN, text safe in a spreadsheet."""
    with whole_file(path) as temporary, temporary.open("w", encoding="utf-8", newline="") as stream:
        writer = csv.writer(stream, lineterminator="\n")
        writer.writerow(columns)
        for row in rows:
            writer.writerow([safe_cell(one) for one in row])


def safe_cell(value: Any) -> Any:
    """A cell that no spreadsheet runs as a formula; NaN becomes empty."""
    if isinstance(value, str):
        return f"'{value}" if value.startswith(_FORMULA_STARTS) else value
    if isinstance(value, float):
        return "" if math.isnan(value) else f"{value:.10g}"
    return value
