"""Which rocks a law that is not made for one rock is taken to hold for."""

from __future__ import annotations

SILICATE_ROCKS: tuple[str, ...] = (
    "basalt",
    "andesite",
    "rhyolite",
    "gabbro",
    "granite",
    "gneiss",
    "schist",
    "sandstone",
    "shale",
    "alluvium",
)
"""Rocks whose uptake is by silicate, without ultramafic rock: no law here was fitted on it."""

CARBONATE_ROCKS: tuple[str, ...] = ("limestone", "dolomite")

MIXED_ROCKS: tuple[str, ...] = ("mixed sediment", "loess")
"""Rocks of which half the uptake is taken to be by carbonate."""
