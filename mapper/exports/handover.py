"""Hands over a run: every file beside maps, tables and record, in the order they need."""

from __future__ import annotations

import json
from collections.abc import Callable, Mapping
from pathlib import Path
from typing import Any

from mapper.exports.contents import Contents
from mapper.exports.crate import output_files, write_crate
from mapper.exports.display import Display, read_display
from mapper.exports.geopackage import write_geopackage, write_geoparquet
from mapper.exports.netcdf import write_netcdf
from mapper.exports.page.write import write_page
from mapper.exports.pictures import write_pictures
from mapper.exports.record import file_hash
from mapper.exports.styles import write_styles
from mapper.exports.workbook import write_parquet, write_workbook
from mapper.job import ALSO, WRITTEN

_FROM_DISPLAY: Mapping[str, Callable[[Contents, Display], None]] = {
    "styles": write_styles,
    "pictures": write_pictures,
    "page": write_page,
}
_FROM_TABLES: Mapping[str, Callable[[Contents], None]] = {
    "regions": write_geopackage,
    "parquet": write_parquet,
    "workbook": write_workbook,
    "netcdf": write_netcdf,
    "geoparquet": write_geoparquet,
}


def clear_earlier(folder: Path) -> None:
    """Remove what an earlier run left, so that none of it passes for this run's.

    Only files that the earlier record lists, and the record last; a user's own files stay.
    """
    record = folder / "run.json"
    try:
        listed = [str(one["name"]) for one in json.loads(record.read_text("utf-8"))["files"]]
    except (OSError, ValueError, KeyError, TypeError):
        return
    inside = folder.resolve()
    for name in listed:
        path = folder / name
        if path.resolve().is_relative_to(inside) and path.is_file():
            path.unlink()
    record.unlink()


def hand_over(contents: Contents, write: tuple[str, ...] = WRITTEN) -> None:
    """Write what the job asks for, then the description of the whole folder.

    Parameters
    ----------
    write : what to write, of `mapper.job.WRITTEN` and `mapper.job.ALSO`.
    """
    chosen = [name for name in (*WRITTEN, *ALSO) if name in write]
    display = read_display(contents) if any(name in _FROM_DISPLAY for name in chosen) else None
    for name in chosen:
        if name in _FROM_TABLES:
            _FROM_TABLES[name](contents)
        elif display is not None and name in _FROM_DISPLAY:
            _FROM_DISPLAY[name](contents, display)
    if "crate" in chosen:
        write_crate(contents)


def list_files(contents: Contents) -> list[dict[str, Any]]:
    """Name, size and hash of every file of the folder but the record itself."""
    folder = contents.folder
    return [
        {
            "name": path.relative_to(folder).as_posix(),
            "bytes": path.stat().st_size,
            "sha256": file_hash(str(path)),
        }
        for path in output_files(folder)
        if path.name != "run.json"
    ]
