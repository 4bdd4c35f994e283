"""Every error that a user can act on: the problem, where it is, and what to write instead."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass, field


class MapperError(Exception):
    """Something in the user's input that this tool refuses to guess about.

    Parameters
    ----------
    problem : what is wrong, with the wrong value.
    where : the file, key, layer or region it was found in.
    fix : what to write instead.
    """

    def __init__(self, problem: str, *, where: str, fix: str) -> None:
        super().__init__(problem)
        self.problem = problem
        self.where = where
        self.fix = fix

    def __str__(self) -> str:
        return f"{self.problem}\n  where: {self.where}\n  fix:   {self.fix}"

    def __reduce__(self) -> tuple[object, ...]:
        return (_rebuild, (type(self), self.problem, self.where, self.fix))


def _rebuild(kind: type[MapperError], problem: str, where: str, fix: str) -> MapperError:
    return kind(problem, where=where, fix=fix)


class JobError(MapperError, ValueError):
    """A key or a value in the job file."""


class MissingFileError(MapperError, FileNotFoundError):
    """A file that the job names and that is not there."""

    def __str__(self) -> str:
        return MapperError.__str__(self)


class FileFormatError(MapperError, OSError):
    """A file that is not what its place in the job needs, or is damaged."""

    def __str__(self) -> str:
        return MapperError.__str__(self)


class UnitError(MapperError, ValueError):
    """A unit that is missing, unknown, or of the wrong kind."""


class GridError(MapperError, ValueError):
    """Georeferencing that is missing, implausible, or does not fit the job's grid."""


class LegendError(MapperError, LookupError):
    """A code in the lithology that the legend does not know, or a rock that the law does not."""


class ValuesError(MapperError, ValueError):
    """Values that cannot be what the layer says they are."""


class RegionError(MapperError, ValueError):
    """A region that cannot be used as it is drawn or named."""


class LawError(MapperError, ValueError):
    """A law that is unknown, or parameters that do not fit it."""


class RunFolderError(MapperError, OSError):
    """A run folder that cannot be written, or belongs to another job."""

    def __str__(self) -> str:
        return MapperError.__str__(self)


class ManyProblemsError(MapperError):
    """All the problems of one job, in the order in which they were found."""

    def __init__(self, problems: tuple[MapperError, ...]) -> None:
        self.problems = problems
        first = problems[0]
        super().__init__(f"{len(problems)} problems", where=first.where, fix="each is listed")

    def __str__(self) -> str:
        return "\n".join(f"{n}. {one}" for n, one in enumerate(self.problems, start=1))

    def __reduce__(self) -> tuple[object, ...]:
        return (ManyProblemsError, (self.problems,))


@dataclass
class Problems:
    """Gathers problems so that a user sees all of them at once."""

    found: list[MapperError] = field(default_factory=list)

    @contextmanager
    def gather(self) -> Iterator[None]:
        """Keep a problem raised inside the block, and go on after it."""
        try:
            yield
        except ManyProblemsError as many:
            self.found.extend(many.problems)
        except MapperError as one:
            self.found.append(one)

    def add(self, problem: MapperError) -> None:
        """Note one problem."""
        self.found.append(problem)

    def raise_if_any(self) -> None:
        """Raise what was gathered: one problem as itself, several as one error."""
        if len(self.found) == 1:
            raise self.found[0]
        if self.found:
            raise ManyProblemsError(tuple(self.found))
