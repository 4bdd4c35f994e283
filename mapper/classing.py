"""What a job says about classes: further layers by which its totals are split."""

from __future__ import annotations

import re
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from itertools import pairwise

from mapper.errors import JobError
from mapper.table import Table

NO_CLASS = "no class"
EVERYTHING = "all"
UNKNOWN = ("error", "nodata")

_NAME = re.compile(r"[a-z0-9][a-z0-9_-]{0,23}")
_EXAMPLE = '[classes.landcover] with path = "landcover.tif" and legend = "landcover.csv"'


@dataclass(frozen=True, kw_only=True)
class ClassesSpec:
    """One ``[classes.NAME]`` table: a raster of codes with a legend, or of numbers with bands.

    ``bands`` are the edges, ascending, in the file's own unit: what lies below the first edge and
    from the last one up are bands too.
    """

    name: str
    path: str
    legend: str | None = None
    bands: tuple[float, ...] = ()
    variable: str | None = None
    crs: str | None = None
    nodata: tuple[float, ...] = ()
    unknown: str = UNKNOWN[0]

    @property
    def where(self) -> str:
        """How an error names these classes."""
        return f"classes.{self.name}, {self.path}"


def classes_specs(table: Table, absolute: Callable[[str, Table], str]) -> Mapping[str, ClassesSpec]:
    """Read ``[classes]``; problems are noted in the table.

    Parameters
    ----------
    absolute : makes a path of the job absolute.
    """
    found: dict[str, ClassesSpec] = {}
    for name in table.values:
        child = table.table(name)
        if not _NAME.fullmatch(name):
            table.problems.add(
                JobError(
                    f"{name!r} cannot be the name of a table by_{name}.csv",
                    where=f"{table.where}.{name}",
                    fix="up to 24 small letters, digits, _ and -, as in [classes.landcover]",
                )
            )
        found[name] = _classes_spec(name, child, absolute)
    return found


def _classes_spec(name: str, table: Table, absolute: Callable[[str, Table], str]) -> ClassesSpec:
    legend = table.optional_text("legend")
    bands = table.numbers("bands", None, "[0, 500, 1000]")
    if (legend is None) == (bands is None) and "bands" not in table.values:
        table.problems.add(
            JobError("classes need a legend or bands", where=table.where, fix=_EXAMPLE)
        )
    elif legend is not None and bands is not None:
        table.wrong("bands", "either a legend or bands", "one of the two")
    elif bands is not None and not (bands and all(a < b for a, b in pairwise(bands))):
        table.wrong("bands", "edges that ascend", "bands = [0, 500, 1000]")
        bands = None
    return ClassesSpec(
        name=name,
        path=absolute(table.needed_text("path", '"landcover.tif"'), table),
        legend=None if legend is None else absolute(legend, table),
        bands=bands or (),
        variable=table.optional_text("variable"),
        crs=table.optional_text("crs"),
        nodata=table.numbers("nodata", None, "-9999") or (),
        unknown=table.choice("unknown", UNKNOWN, default=UNKNOWN[0]),
    )
