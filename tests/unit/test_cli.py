"""The command's own parts; whole runs are in tests/runs."""

import io

import pytest

from mapper import cli
from mapper.cli import ProgressBar, main
from mapper.laws import LAWS


class Terminal(io.StringIO):
    def isatty(self):
        return True


def shown(stream, clock, monkeypatch, seconds):
    """What the bar writes for work on 100 cells that takes ``seconds`` in ten steps."""
    monkeypatch.setattr(cli.time, "monotonic", lambda: clock[0])
    bar = ProgressBar(stream)
    bar.update("blocks", 0, 100)
    for step in range(1, 11):
        clock[0] = seconds * step / 10
        bar.update("blocks", step * 10, 100)
    bar.close()
    return stream.getvalue()


def test_work_under_a_second_shows_no_progress(monkeypatch):
    assert shown(Terminal(), [0.0], monkeypatch, 0.9) == ""


def test_a_terminal_sees_one_line_that_is_overwritten(monkeypatch):
    text = shown(Terminal(), [0.0], monkeypatch, 20.0)
    assert "\n" not in text
    assert text.count("\r") == 11
    assert "50.0 %" in text
    assert "0:10 left" in text


def test_a_pipe_sees_plain_lines_now_and_then(monkeypatch):
    text = shown(io.StringIO(), [0.0], monkeypatch, 20.0)
    assert "\r" not in text
    assert "\x1b" not in text
    assert len(text.splitlines()) == 2


@pytest.mark.parametrize(("seconds", "text"), [(0, "0:00"), (75, "1:15"), (3725, "1:02:05")])
def test_time_left_is_a_clock(seconds, text):
    assert cli._clock(seconds) == text


def test_laws_lists_every_law(capsys):
    assert main(["laws"]) == 0
    text = capsys.readouterr().out
    assert all(name in text for name in LAWS)


@pytest.mark.parametrize("name", LAWS)
def test_a_law_is_shown_with_its_numbers_and_reference(capsys, name):
    assert main(["laws", name]) == 0
    text = capsys.readouterr().out
    assert LAWS[name].reference in text
    assert all(one.name in text for one in LAWS[name].parameters)


def test_a_law_that_is_not_there_is_the_users_input(capsys):
    assert main(["laws", "desert-2003"]) == 2
    assert "saprolite laws dessert-2003" in capsys.readouterr().err


def test_no_command_prints_the_help(capsys):
    assert main([]) == 0
    assert "usage: saprolite" in capsys.readouterr().out
