"""The styles against the OGC schema of SLD 1.0.0, by mappings that were compiled from it."""

from __future__ import annotations

import os
import shutil
import subprocess
import xml.etree.ElementTree as ET
from pathlib import Path

import pytest

SCRIPT = Path(__file__).with_name("through_schema.js")


def through_schema(style: Path) -> list[tuple[str, frozenset[str]]]:
    """The elements of a style and their attributes' names after the mappings read and wrote it."""
    node = shutil.which("node")
    modules = os.environ.get("OGC_MODULES", "")
    if node is None or not (Path(modules) / "ogc-schemas").is_dir():
        _missing("npm install ogc-schemas jsonix w3c-schemas, and OGC_MODULES=.../node_modules")
    done = subprocess.run(
        [node, str(SCRIPT), str(style)],
        env={**os.environ, "NODE_PATH": modules},
        capture_output=True,
        text=True,
        check=True,
        timeout=60,
    )
    return outline(done.stdout)


def _missing(what: str) -> None:
    if os.environ.get("CI"):
        pytest.fail(f"needed in CI: {what}")
    pytest.skip(what)


def outline(text: str) -> list[tuple[str, frozenset[str]]]:
    return [(one.tag, frozenset(one.attrib)) for one in ET.fromstring(text).iter()]


@pytest.mark.parametrize("name", ["consumption", "drawdown", "flags"])
def test_every_element_and_attribute_of_a_style_is_one_of_the_schema(
    unkind_run: Path, name: str
) -> None:
    path = unkind_run / "maps" / f"{name}.sld"
    assert through_schema(path) == outline(path.read_text(encoding="utf-8"))


@pytest.mark.parametrize(
    ("right", "wrong"),
    [
        ("<Opacity>1.0</Opacity>", "<Opaque>1.0</Opaque>"),
        (' opacity="1.0"', ' opaque="1.0"'),
        ("<IsDefault>1</IsDefault>", ""),
    ],
)
def test_the_check_sees_what_the_schema_does_not_know(
    unkind_run: Path, tmp_path: Path, right: str, wrong: str
) -> None:
    text = (unkind_run / "maps" / "drawdown.sld").read_text(encoding="utf-8")
    assert right in text
    bad = text.replace(right, wrong)
    if not wrong:  # the same element in a wrong place
        bad = bad.replace("</FeatureTypeStyle>", f"</FeatureTypeStyle>{right}")
    path = tmp_path / "bad.sld"
    path.write_text(bad, encoding="utf-8")
    assert through_schema(path) != outline(bad)
