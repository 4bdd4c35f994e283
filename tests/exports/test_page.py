"""The page as text: harmless, self-contained, and true to the tables."""

from __future__ import annotations

import base64
import re
import zlib
from html.parser import HTMLParser
from pathlib import Path

import numpy as np
import pytest

from mapper.exports.colours import Stretch, stretch
from mapper.exports.contents import read_table
from mapper.exports.display import DISPLAY_CELLS, DisplayMap, display_shape
from mapper.exports.page.mapview import packed_values
from mapper.exports.words import about, clean, number, pretty_unit, script_json
from mapper.grid import Grid


class _Reader(HTMLParser):
    """Gathers tags, what they refer to, and text."""

    def __init__(self) -> None:
        super().__init__()
        self.tags: list[str] = []
        self.handlers: list[str] = []
        self.references: list[str] = []
        self.text: list[str] = []

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.tags.append(tag)
        self.handlers += [name for name, _ in attrs if name.startswith("on")]
        self.references += [
            value or "" for name, value in attrs if name in ("href", "src", "xlink:href", "action")
        ]

    def handle_data(self, data: str) -> None:
        self.text.append(data)


def _read(path: Path) -> _Reader:
    reader = _Reader()
    reader.feed(path.read_text(encoding="utf-8"))
    return reader


@pytest.mark.parametrize("which", ["island_run", "unkind_run"])
def test_the_page_asks_no_host_for_anything(which: str, request: pytest.FixtureRequest) -> None:
    path: Path = request.getfixturevalue(which) / "report.html"
    text = path.read_text(encoding="utf-8")
    assert not re.search(r"https?://", text)
    assert not re.search(r"@import|url\(", text)
    assert "default-src 'none'" in text
    reader = _read(path)
    assert all(one.startswith(("#", "data:image/png;base64,")) for one in reader.references)
    assert not {"link", "iframe", "object", "embed", "img", "form"} & set(reader.tags)


def test_unkind_names_add_no_element_to_the_page(unkind_run: Path, names: tuple[str]) -> None:
    reader = _read(unkind_run / "report.html")
    assert reader.tags.count("script") == 2
    assert reader.tags.count("title") == 1
    assert not reader.handlers
    text = "".join(reader.text)
    for name in names:
        assert name[:50].strip() in text


def test_the_page_says_that_no_interval_was_asked_for(unkind_run: Path) -> None:
    text = (unkind_run / "report.html").read_text(encoding="utf-8")
    assert "No interval was asked for" in text
    assert "draws = 1000" in text


def test_the_answer_carries_its_interval(island_run: Path) -> None:
    text = (island_run / "report.html").read_text(encoding="utf-8")
    row = read_table(island_run / "tables" / "regions.csv").by_region["all"]
    low, high = (about(row[f"drawdown_t_per_yr_{level}"]) for level in ("p05", "p95"))
    assert "No interval was asked for" not in text
    assert "79,500 t of CO<sub>2</sub> a year" in text
    assert f"(90\u00a0% interval {low}\u00a0to\u00a0{high})" in text


def test_the_page_says_what_drives_the_uncertainty(island_run: Path) -> None:
    text = (island_run / "report.html").read_text(encoding="utf-8")
    first = next(iter(read_table(island_run / "tables" / "sensitivity.csv").records()))
    assert str(first["what"]) in text
    assert "Rank, 90\u00a0%" in text


def test_every_region_of_the_table_is_on_the_page(island_run: Path) -> None:
    text = (island_run / "report.html").read_text(encoding="utf-8")
    table = read_table(island_run / "tables" / "regions.csv").by_region
    for name, row in table.items():
        assert number(row["drawdown_t_per_yr"]) in text, name
    assert len(re.findall(r'<tr data-r="', text)) == len(table) - 2
    assert len(re.findall(r'<path data-r="', text)) == len(table) - 2


def test_the_page_stays_small_whatever_the_grid(island_run: Path) -> None:
    assert (island_run / "report.html").stat().st_size < 2_000_000


def test_a_page_of_noise_on_a_large_grid_stays_under_ten_megabytes() -> None:
    shape = display_shape(Grid("EPSG:4326", -180.0, 90.0, 0.01, 0.01, 18_000, 36_000))
    assert max(shape) <= 1200
    assert shape[0] * shape[1] <= DISPLAY_CELLS
    noise = np.random.default_rng(3).lognormal(1.0, 2.0, shape).astype(np.float32)
    shown = DisplayMap("any", noise, "", "", stretch(noise))
    assert len(packed_values(shown)) < 2_000_000  # four such layers and their pictures fit


@pytest.mark.parametrize(
    ("value", "words"),
    [
        (0.0, "0"),
        (1234567.0, "1,234,567"),
        (0.1489944, "0.1490"),
        (99.851, "99.85"),
        (float("nan"), "–"),
        (-12.3456, "-12.35"),
        (1.5e-7, "1.5e-07"),
    ],
)
def test_numbers_are_written_to_be_read(value: float, words: str) -> None:
    assert number(value) == words


def test_a_number_in_a_sentence_is_rounded() -> None:
    assert about(79498.4) == "79,500"
    assert about(0.0061234) == "0.00612"


def test_units_have_raised_exponents() -> None:
    assert pretty_unit("t CO2 km-2 yr-1") == "t CO₂ km⁻² yr⁻¹"


def test_json_in_a_script_cannot_end_it() -> None:
    assert "<" not in script_json({"a": "</script><!--"})


def test_characters_that_xml_forbids_are_replaced() -> None:
    assert clean("a\x00b\x1b\ud800c\n") == "a\ufffdb\ufffd\ufffdc\n"


def test_values_packed_for_reading_are_right_to_one_in_four_thousand() -> None:
    values = np.array([[0.0, 1e-6, 3.3333], [-2.5, np.nan, 126.79626]], dtype=np.float32)
    shown = DisplayMap("any", values, "", "", Stretch(0.0, 1.0, 1.0))
    planes = np.frombuffer(zlib.decompress(base64.b64decode(packed_values(shown))), np.uint8)
    found = np.ascontiguousarray(planes.reshape(4, -1).T).view("<f4").reshape(values.shape)
    np.testing.assert_allclose(found, values, rtol=1 / 4000)
