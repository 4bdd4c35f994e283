"""The picture of what drives the spread: which rows get a bar, and that the run leaves it."""

from types import SimpleNamespace

import numpy as np
import pytest
from PIL import Image

from mapper.exports import drivers


def row(name, long_term, short_term, kind="parameter"):
    return {
        "quantity": name, "rock": "all", "kind": kind, "more_of_it": "raises",
        "spread": "normal, sd 1 K", "source": "made up",
        "share_of_drawdown_variance": long_term, "share_of_consumption_variance": short_term,
    }  # fmt: skip


def test_bars_are_in_order_of_the_drawdown_and_the_rest_comes_last():
    rows = [row("rest", 0.5, 0.5, "rest"), row("a", 0.1, 0.6), row("b", 0.3, 0.0)]
    rows.append(row("tiny", 0.001, 0.004))
    assert [one["quantity"] for one in drivers.drawn_rows(rows)] == ["b", "a", "rest"]


def test_of_many_the_largest_by_either_total_get_a_bar():
    rows = [row(f"q{at}", 0.02 + 0.001 * at, 0.0) for at in range(20)] + [row("short", 0.0, 0.9)]
    names = [one["quantity"] for one in drivers.drawn_rows(rows)]
    assert len(names) == drivers.MOST_BARS
    assert names[0] == "q19"
    assert names[-1] == "short"


def test_too_few_draws_to_tell_leave_no_picture(tmp_path):
    nan = float("nan")
    table = SimpleNamespace(
        columns=tuple(row("a", nan, nan)), records=lambda: iter([row("a", nan, nan)])
    )
    drivers.write_drivers(
        SimpleNamespace(folder=tmp_path, title="T", tables={"sensitivity": table})
    )
    assert not list(tmp_path.rglob("*.png"))


def test_the_length_of_a_bar_is_its_share(tmp_path):
    rows = [row("a", 0.8, 0.4), row("b", 0.2, 0.6)]
    table = SimpleNamespace(columns=tuple(rows[0]), records=lambda: iter(rows))
    drivers.write_drivers(
        SimpleNamespace(folder=tmp_path, title="T", tables={"sensitivity": table})
    )
    picture = np.asarray(Image.open(tmp_path / "tables" / "sensitivity.png").convert("RGB"))
    length = {}
    for name, colour in (("long", drivers.LONG_TERM), ("short", drivers.SHORT_TERM)):
        wanted = [int(colour[at : at + 2], 16) for at in (1, 3, 5)]
        per_line = (picture == wanted).all(axis=2).sum(axis=1)
        per_line = per_line[per_line > 60]  # without the legend's patch
        length[name] = sorted({int(one) for one in np.unique(per_line)})
    assert length["long"][-1] / length["long"][0] == pytest.approx(4.0, rel=0.05)
    assert length["short"][-1] / length["short"][0] == pytest.approx(1.5, rel=0.05)
