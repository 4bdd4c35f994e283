"""Job files as people write them."""

from __future__ import annotations

import pytest

import mapper
from mapper.errors import JobError, ManyProblemsError, MissingFileError


def load(bench, extra="", body=None):
    path = bench.job(extra=extra) if body is None else bench.text("job.toml", body)
    return mapper.load_job(path)


@pytest.mark.parametrize("text", ["nan", "inf", "-inf"])
def test_60_numbers_that_are_not_finite_are_refused(bench, text):
    with pytest.raises(JobError, match=f"{text}.*finite number"):
        load(bench, extra=f"[layers.vegetation]\npath = 'v.tif'\nscale = {text}")


@pytest.mark.parametrize("text", ["nan", "inf"])
def test_60_bounds_that_are_not_finite_are_refused(bench, text):
    with pytest.raises(JobError, match="finite numbers"):
        load(bench, extra=f"[grid]\nbounds = [0, 0, {text}, 1]")


def test_60_a_key_given_twice_is_refused_with_its_line(bench):
    with pytest.raises(JobError, match=r"not valid TOML.*line 3"):
        load(bench, body='title = "a"\n\ntitle = "b"\n')


def test_60_an_unknown_key_is_refused_with_the_nearest(bench):
    with pytest.raises(JobError, match="unknown key 'resoluton'") as refused:
        load(bench, extra="[grid]\nresoluton = 1")
    assert refused.value.fix == "resolution"


def test_60_a_byte_order_mark_and_dos_line_ends_are_read(bench):
    path = bench.job()
    path.write_bytes(b"\xef\xbb\xbf" + path.read_bytes().replace(b"\n", b"\r\n"))
    assert mapper.load_job(path).title == "bench"


def test_60_latin_1_text_is_refused_with_the_byte(bench):
    with pytest.raises(JobError, match=r"not UTF-8 text \(byte 9\)"):
        load(bench, body=b'title = "\xe9"\n')


def test_60_text_in_place_of_a_number_is_refused_and_never_run(bench):
    body = "__import__('os').system('touch trap')"
    with pytest.raises(JobError, match="a number"):
        load(bench, extra=f'[layers.vegetation]\npath = "v.tif"\nscale = "{body}"')
    assert not bench.path("trap").exists()


def test_60_a_number_as_yaml_misreads_it_is_a_number(bench):
    job = load(bench, extra="[layers.vegetation]\npath = 'v.tif'\nscale = 1e-3")
    assert job.layers["vegetation"].scale == 0.001


def test_60_all_that_is_wrong_in_a_file_is_told_at_once(bench):
    with pytest.raises(ManyProblemsError) as refused:
        load(bench, extra="[grid]\nresolution = -1\nbounds = [3, 0, 1, 1]\ncolour = 1")
    assert len(refused.value.problems) == 3


def test_a_variable_of_the_environment_that_is_not_set_is_named(bench):
    with pytest.raises(JobError, match="NO_SUCH_FOLDER"):
        load(bench, extra='[layers.vegetation]\npath = "${NO_SUCH_FOLDER}/v.tif"')


def test_a_job_file_that_is_not_there_gets_the_nearest_name(bench):
    bench.job()
    with pytest.raises(MissingFileError) as refused:
        mapper.load_job(bench.path("jobs.toml"))
    assert "job.toml" in refused.value.fix
