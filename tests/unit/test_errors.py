"""Errors carry the problem, the place and the fix, and several are shown at once."""

import pickle

import pytest

from mapper.errors import (
    FileFormatError,
    GridError,
    JobError,
    LegendError,
    ManyProblemsError,
    MapperError,
    MissingFileError,
    Problems,
    RunFolderError,
    UnitError,
)


def test_an_error_shows_problem_place_and_fix():
    error = UnitError("the unit is 'mm'", where="layers.runoff", fix='units = "mm yr-1"')
    assert str(error) == ("the unit is 'mm'\n  where: layers.runoff\n  fix:   units = \"mm yr-1\"")


@pytest.mark.parametrize(
    ("kind", "built_in"),
    [
        (JobError, ValueError),
        (UnitError, ValueError),
        (GridError, ValueError),
        (LegendError, LookupError),
        (MissingFileError, FileNotFoundError),
        (FileFormatError, OSError),
        (RunFolderError, OSError),
    ],
)
def test_each_error_is_also_the_built_in_it_resembles(kind, built_in):
    error = kind("p", where="w", fix="f")
    assert isinstance(error, built_in)
    assert str(error) == "p\n  where: w\n  fix:   f"


def test_one_problem_is_raised_as_itself():
    problems = Problems()
    problems.add(JobError("only one", where="w", fix="f"))
    with pytest.raises(JobError, match="only one"):
        problems.raise_if_any()


def test_several_problems_are_numbered_in_the_order_found():
    problems = Problems()
    with problems.gather():
        raise JobError("first", where="a", fix="x")
    with problems.gather():
        raise ManyProblemsError(
            (GridError("second", where="b", fix="y"), GridError("third", where="c", fix="z"))
        )
    with pytest.raises(ManyProblemsError) as caught:
        problems.raise_if_any()
    text = str(caught.value)
    assert [text.index(f"{n}. {one}") for n, one in ((1, "first"), (2, "second"), (3, "third"))]
    assert text.index("first") < text.index("second") < text.index("third")


def test_nothing_is_raised_without_problems():
    Problems().raise_if_any()


def test_our_own_bugs_are_not_gathered():
    problems = Problems()
    with pytest.raises(ZeroDivisionError), problems.gather():
        1 / 0  # noqa: B018
    assert problems.found == []


@pytest.mark.parametrize(
    "error",
    [
        MissingFileError("p", where="w", fix="f"),
        ManyProblemsError((JobError("p", where="w", fix="f"),)),
    ],
)
def test_errors_travel_between_processes(error: MapperError):
    back = pickle.loads(pickle.dumps(error))  # noqa: S301
    assert type(back) is type(error)
    assert str(back) == str(error)
