"""Legends: codes to rocks."""

import pytest

from mapper.errors import LegendError, ManyProblemsError, MissingFileError
from mapper.legend import find_rock, normal_code, read_legend
from tests.making import write_legend


def legend_of(tmp_path, text):
    return read_legend(str(write_legend(tmp_path / "legend.csv", text)), where="layers.lithology")


def test_a_code_stands_for_a_rock(tmp_path):
    legend = legend_of(tmp_path, "code,rock\n1,granite\n2,basalt\n")
    assert legend.mixtures == {"1": (("granite", 1.0),), "2": (("basalt", 1.0),)}


def test_rocks_come_in_the_order_of_the_classes(tmp_path):
    assert legend_of(tmp_path, "code,rock\n1,water\n2,basalt\n").rocks() == ("basalt", "water")


def test_a_code_on_several_lines_is_a_mixture(tmp_path):
    legend = legend_of(tmp_path, "code,rock,share\n7,shale,0.25\n7,sandstone,0.75\n")
    assert legend.mixtures == {"7": (("shale", 0.25), ("sandstone", 0.75))}


def test_shares_that_do_not_add_up_are_refused(tmp_path):
    with pytest.raises(LegendError, match=r"the shares of code '7' add up to 0\.9"):
        legend_of(tmp_path, "code,rock,share\n7,shale,0.4\n7,sandstone,0.5\n")


def test_a_code_given_twice_without_shares_is_refused(tmp_path):
    with pytest.raises(LegendError, match="the shares of code '7' add up to 2"):
        legend_of(tmp_path, "code,rock\n7,shale\n7,sandstone\n")


@pytest.mark.parametrize("share", ["0", "-0.5", "1.5", "half", "nan"])
def test_a_share_outside_0_to_1_is_refused_with_its_line(tmp_path, share):
    with pytest.raises(LegendError, match=f"share '{share}' is not above 0") as caught:
        legend_of(tmp_path, f"code,rock,share\n7,shale,{share}\n")
    assert caught.value.where.endswith("line 2")


def test_an_unknown_rock_is_one_problem_with_the_nearest_name(tmp_path):
    with pytest.raises(LegendError, match="'bassalt' is not a rock class") as caught:
        legend_of(tmp_path, "code,rock\n1,granite\n2,bassalt\n")
    assert "one of basalt" in caught.value.fix
    assert caught.value.where.endswith("line 3")


def test_all_unknown_rocks_are_found_at_once(tmp_path):
    with pytest.raises(ManyProblemsError) as caught:
        legend_of(tmp_path, "code,rock\n1,bassalt\n2,granit\n3,shale\n")
    assert [one.problem for one in caught.value.problems] == [
        "'bassalt' is not a rock class",
        "'granit' is not a rock class",
    ]


def test_a_missing_column_is_named(tmp_path):
    with pytest.raises(LegendError, match="'rock' is missing"):
        legend_of(tmp_path, "code,name\n1,granite\n")


def test_a_missing_legend_is_named(tmp_path):
    with pytest.raises(MissingFileError, match=r"there is no legend 'legend\.csv'"):
        read_legend(str(tmp_path / "legend.csv"), where="layers.lithology")


def test_a_byte_order_mark_of_a_spreadsheet_is_no_trouble(tmp_path):
    (tmp_path / "legend.csv").write_bytes("code,rock\n1,granite\n".encode("utf-8-sig"))
    assert read_legend(str(tmp_path / "legend.csv"), where="x").rocks() == ("granite",)


def test_a_legend_in_another_encoding_is_refused_with_what_to_do(tmp_path):
    (tmp_path / "legend.csv").write_bytes(
        "code,rock,label\n1,granite,Z\xfcrich\n".encode("latin-1")
    )
    with pytest.raises(LegendError, match="is not UTF-8 text") as caught:
        read_legend(str(tmp_path / "legend.csv"), where="x")
    assert "UTF-8" in caught.value.fix


@pytest.mark.parametrize(
    ("text", "code"),
    [("7", "7"), ("7.0", "7"), (" 07 ", "7"), ("-3", "-3"), ("7.5", "7.5"), ("Qa", "Qa"),
     ("nan", "nan"), ("inf", "inf")],
)  # fmt: skip
def test_whole_numbers_have_one_spelling_and_names_are_left(text, code):
    assert normal_code(text) == code


@pytest.mark.parametrize(
    "text", ["mixed sediment", "Mixed_Sediment", "sedimentary_rock", "http://x/y/sedimentary_rock"]
)
def test_a_rock_is_found_by_name_or_by_its_linked_term(text):
    assert find_rock(text, where="here") == "mixed sediment"
