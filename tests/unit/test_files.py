"""Files, tables and the journal: whole or not at all."""

import numpy as np
import pytest

from mapper.errors import RunFolderError
from mapper.exports.files import safe_cell, whole_file, write_csv, write_json
from mapper.journal import open_journal


def test_a_file_appears_when_it_is_whole(tmp_path):
    final = tmp_path / "deep" / "t.txt"
    with whole_file(final) as temporary:
        temporary.write_text("whole")
        assert not final.exists()
    assert final.read_text() == "whole"
    assert [one.name for one in final.parent.iterdir()] == ["t.txt"]


@pytest.mark.parametrize("error", [RuntimeError("bug"), OSError(28, "No space left on device")])
def test_a_file_that_failed_leaves_the_old_one(tmp_path, error):
    final = tmp_path / "t.txt"
    final.write_text("old")
    kind = RunFolderError if isinstance(error, OSError) else RuntimeError
    with pytest.raises(kind, match="bug|t.txt cannot be written: No space"), whole_file(final) as t:
        t.write_text("half")
        raise error
    assert final.read_text() == "old"
    assert [one.name for one in tmp_path.iterdir()] == ["t.txt"]


@pytest.mark.parametrize("text", ["=1+1", "+1", "-1", "@x", "\tx"])
def test_text_that_a_spreadsheet_would_run_is_quoted(text):
    assert safe_cell(text) == f"'{text}"


def test_numbers_stay_numbers_and_nan_is_empty(tmp_path):
    write_csv(tmp_path / "t.csv", ("a", "b", "c"), [["Z\u00fcrich, south", -1.5, float("nan")]])
    assert (tmp_path / "t.csv").read_text(encoding="utf-8") == 'a,b,c\n"Z\u00fcrich, south",-1.5,\n'


def test_nan_is_no_json(tmp_path):
    with pytest.raises(ValueError, match="JSON"):
        write_json(tmp_path / "t.json", {"a": float("nan")})
    assert not (tmp_path / "t.json").exists()


def test_a_finished_block_is_found_again(tmp_path):
    journal = open_journal(tmp_path, {"job": 1}, fresh=False)
    journal.save(3, {"a": np.arange(4)})
    again = open_journal(tmp_path, {"job": 1}, fresh=False)
    assert again.is_done(3)
    assert not again.is_done(2)
    assert again.load(3, "a").tolist() == [0, 1, 2, 3]


def test_blocks_of_another_job_are_refused_by_what_changed(tmp_path):
    open_journal(tmp_path, {"job": 1, "layers.runoff.units": "mm", "same": 1}, fresh=False)
    with pytest.raises(RunFolderError, match=r"changed since: job, layers\.runoff\.units$|units\n"):
        open_journal(tmp_path, {"job": 2, "layers.runoff.units": "m", "same": 1}, fresh=False)


def test_fresh_forgets_the_blocks(tmp_path):
    open_journal(tmp_path, {"job": 1}, fresh=False).save(0, {"a": np.zeros(1)})
    assert not open_journal(tmp_path, {"job": 2}, fresh=True).is_done(0)


def test_a_torn_note_of_a_killed_run_does_not_stop_the_next(tmp_path):
    journal = open_journal(tmp_path, {"job": 1}, fresh=False)
    (journal.folder / "fingerprint.json").write_text('{"job":')
    with pytest.raises(RunFolderError, match="cannot be read") as caught:
        open_journal(tmp_path, {"job": 1}, fresh=False)
    assert "--fresh" in caught.value.fix


def test_a_closed_journal_leaves_nothing(tmp_path):
    open_journal(tmp_path, {"job": 1}, fresh=False).clear()
    assert list(tmp_path.iterdir()) == []
