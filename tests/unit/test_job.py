"""The job file: read, checked, every problem at once."""

import pytest

from mapper.errors import JobError, ManyProblemsError, MissingFileError
from mapper.job import load_job
from tests.making import small_job, write_job

LAYERS = {"lithology": {"path": "rock.tif", "legend": "legend.csv"}}


def loaded(tmp_path, **table):
    return load_job(write_job(tmp_path, {"layers": LAYERS, **table}))


def test_paths_are_relative_to_the_job_file(tmp_path):
    job = load_job(small_job(tmp_path))
    assert job.layers["lithology"].path == str(tmp_path / "rock.tif")
    assert job.regions.path == str(tmp_path / "regions.gpkg")
    assert job.folder == str(tmp_path / "out")


def test_what_is_not_said_has_a_default(tmp_path):
    job = loaded(tmp_path)
    assert job.title == "job"
    assert job.law.default == "product"
    assert job.water_method == "turc-1954"
    assert job.regions is None
    assert job.folder == str(tmp_path / "out" / "job")


def test_a_variable_of_the_environment_is_filled_in(tmp_path, monkeypatch):
    monkeypatch.setenv("SOME_FOLDER", str(tmp_path / "there"))
    job = loaded(tmp_path, output={"folder": "${SOME_FOLDER}/x"})
    assert job.folder == str(tmp_path / "there" / "x")


def test_a_variable_that_is_not_set_is_a_problem(tmp_path, monkeypatch):
    monkeypatch.delenv("SOME_FOLDER", raising=False)
    with pytest.raises(JobError, match="names the variable SOME_FOLDER, which is not set") as c:
        loaded(tmp_path, output={"folder": "${SOME_FOLDER}/x"})
    assert "export SOME_FOLDER" in c.value.fix


@pytest.mark.parametrize(
    ("table", "problem", "fix"),
    [
        ({"titel": "x"}, "unknown key 'titel'", "title"),
        ({"grid": {"form": "lithology"}}, "unknown key 'form'", "from"),
        ({"law": {"defualt": "product"}}, "unknown key 'defualt'", "default"),
        ({"output": {"foldr": "x"}}, "unknown key 'foldr'", "folder"),
        ({"title": 3}, "title = 3, and text is needed", 'title = "..."'),
        ({"grid": 3}, "grid = 3, and a table is needed", "[grid] on a line of its own"),
        ({"grid": {"bounds": [0, 0, 1]}}, r"bounds = \[0, 0, 1\], and 4 numbers", "bounds = ["),
        ({"grid": {"bounds": [1, 0, 0, 1]}}, "left < right and bottom < top", "bounds = ["),
        ({"grid": {"resolution": -1}}, "one or two positive numbers", "resolution = 0.1"),
        ({"grid": {"resolution": []}}, "one or two positive numbers", "resolution = 0.1"),
        ({"grid": {"resolution": [1, 2, 3]}}, "one or two positive numbers", "resolution = 0.1"),
        ({"water": {"method": "turk"}}, "one of turc-1954, turc-pike", 'method = "turc-'),
        ({"law": {"parameters": {"x": {"sd": -1}}}}, "a spread of zero or more", "sd = 8.0"),
        ({"law": {"parameters": {"x": True}}}, "x = True, and a number is needed", "x = 1.0"),
        (
            {"law": {"parameters": {"x": {"by_rock": {"bassalt": 1}}}}},
            "'bassalt' is not a rock",
            '"basalt" = ...',
        ),
        ({"regions": {"path": "r.gpkg"}}, "id is missing", "id = "),
        (
            {"layers": {**LAYERS, "temprature": {"path": "t.tif"}}},
            "unknown key 'temprature'",
            "temperature",
        ),
        (
            {"layers": {**LAYERS, "vegetation": {"path": "v.tif", "kind": "nvdi"}}},
            "kind = 'nvdi', and one of cover, ndvi, ndvi-squared, class is needed",
            'kind = "ndvi"',
        ),
        ({"layers": {}}, "the job has no lithology layer", "[layers.lithology]"),
        ({"layers": {"lithology": {"path": "r.tif"}}}, "legend is missing", "legend = "),
    ],
)
def test_a_wrong_entry_is_refused_with_its_value_and_what_to_write(tmp_path, table, problem, fix):
    with pytest.raises(JobError, match=problem) as caught:
        loaded(tmp_path, **table)
    assert fix in caught.value.fix
    assert "job.toml" in caught.value.where


@pytest.mark.parametrize("value", ["nan", "inf"])
@pytest.mark.parametrize("key", ["resolution = {}", "bounds = [0.0, 0.0, {}, 1.0]"])
def test_numbers_that_are_not_finite_are_no_grid(tmp_path, key, value):
    path = small_job(tmp_path)
    path.write_text(path.read_text() + f"[grid]\n{key.format(value)}\n")
    with pytest.raises(JobError, match="positive numbers|finite numbers"):
        load_job(path)


def test_every_problem_of_the_file_is_found_at_once(tmp_path):
    with pytest.raises(ManyProblemsError) as caught:
        loaded(tmp_path, titel="x", water={"method": "turk"}, regions={"path": "r.gpkg"})
    assert len(caught.value.problems) == 3


def test_text_that_is_not_toml_is_refused_with_its_line(tmp_path):
    (tmp_path / "job.toml").write_text("title = Small\n")
    with pytest.raises(JobError, match=r"not valid TOML: .*line 1"):
        load_job(tmp_path / "job.toml")


def test_a_file_in_another_encoding_is_refused(tmp_path):
    (tmp_path / "job.toml").write_bytes(b'title = "Z\xfcrich"\n')
    with pytest.raises(JobError, match=r"not UTF-8 text \(byte 10\)"):
        load_job(tmp_path / "job.toml")


def test_line_ends_and_byte_order_mark_of_another_system_are_no_trouble(tmp_path):
    path = small_job(tmp_path)
    text = path.read_text().replace("\n", "\r\n")
    path.write_bytes(text.encode("utf-8-sig"))
    assert load_job(path).title == "Small"


def test_a_job_that_is_not_there_is_named_with_the_nearest(tmp_path):
    write_job(tmp_path, {"title": "x"}, name="island.toml")
    with pytest.raises(MissingFileError, match=r"there is no job file 'iland\.toml'") as caught:
        load_job(tmp_path / "iland.toml")
    assert caught.value.fix.endswith("island.toml")
