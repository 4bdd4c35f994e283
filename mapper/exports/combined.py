"""One table of several runs: the rows of each run's regions, with the run's name before them."""

from __future__ import annotations

import csv
from collections.abc import Sequence
from pathlib import Path

from mapper.errors import RunFolderError
from mapper.exports.files import whole_file

OWN_COLUMNS = ("job", "title")


def write_combined(path: Path, runs: Sequence[tuple[str, str, Path]]) -> None:
    """Write the rows of several runs as one table.

    Parameters
    ----------
    path : the CSV to write.
    runs : name, title and folder of each run. A column that a run does not have is left empty.

    Raises
    ------
    RunFolderError where a run's table cannot be read or the file cannot be written.
    """
    rows: list[dict[str, str]] = []
    columns: dict[str, None] = {}
    for name, title, folder in runs:
        for row in _read(folder / "tables" / "regions.csv"):
            columns |= dict.fromkeys(row)
            rows.append({"job": name, "title": title, **row})
    with whole_file(path) as temporary, temporary.open("w", encoding="utf-8", newline="") as stream:
        writer = csv.DictWriter(stream, (*OWN_COLUMNS, *columns), restval="", lineterminator="\n")
        writer.writeheader()
        writer.writerows(rows)


def _read(path: Path) -> list[dict[str, str]]:
    try:
        with path.open(encoding="utf-8", newline="") as stream:
            return list(csv.DictReader(stream))
    except OSError as cause:
        raise RunFolderError(
            f"{path.name} cannot be read: {cause.strerror or cause}",
            where=str(path.parent),
            fix="run the jobs again",
        ) from cause
