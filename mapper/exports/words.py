"""Text made harmless for where it goes: HTML, XML, script, file names."""

from __future__ import annotations

import html
import json
import math
import re
from typing import Any

_CONTROL = re.compile(r"[\x00-\x08\x0b\x0c\x0e-\x1f\x7f-\x9f\ud800-\udfff\ufffe\uffff]")


def clean(text: Any) -> str:
    """Text without characters that XML forbids."""
    return _CONTROL.sub("\ufffd", str(text))


def escape(text: Any) -> str:
    """Text for HTML, in elements and in quoted attributes."""
    return html.escape(clean(text), quote=True)


def isolate(text: Any) -> str:
    """A user's name for HTML, kept from turning the direction of what stands beside it."""
    return f"<bdi>{escape(text)}</bdi>"


def script_json(value: Any) -> str:
    """JSON that cannot end the script element it stands in."""
    text = json.dumps(value, ensure_ascii=True, allow_nan=False, separators=(",", ":"))
    return text.replace("<", "\\u003c").replace(">", "\\u003e").replace("&", "\\u0026")


def shorten(text: Any, length: int) -> str:
    """Text of at most ``length`` characters."""
    plain = " ".join(clean(text).split())
    return plain if len(plain) <= length else plain[: length - 1].rstrip() + "…"


def slug(text: Any) -> str:
    """A name fit for files and ids."""
    return re.sub(r"[^a-z0-9]+", "-", str(text).lower()).strip("-")[:60] or "run"


def about(value: float, digits: int = 3) -> str:
    """A number rounded to ``digits`` significant digits, for a sentence."""
    rounded = float(f"{value:.{digits}g}")
    for size, word in ((1e9, "billion"), (1e6, "million")):
        if size <= abs(rounded) < 1000.0 * size:
            return f"{rounded / size:.{digits}g}\u00a0{word}"
    return number(rounded, digits)


def pretty_unit(unit: str) -> str:
    """A unit with raised exponents and a lowered 2 in CO2."""
    raised = str.maketrans("-0123456789", "⁻⁰¹²³⁴⁵⁶⁷⁸⁹")
    text = re.sub(r"(?<=[a-z])(-?\d+)\b", lambda found: found[1].translate(raised), unit)
    return text.replace("CO2", "CO₂")


def number(value: float, digits: int = 4) -> str:
    """A number to read: about ``digits`` significant digits, thousands parted."""
    if not math.isfinite(value):
        return "–"
    if value == 0:
        return "0"
    size = math.floor(math.log10(abs(value)))
    if size >= digits - 1:
        return f"{value:,.0f}"
    if size < -4:
        return f"{value:.{digits - 1}g}"
    return f"{value:,.{digits - 1 - size}f}"
