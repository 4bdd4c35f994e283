"""Rock classes by plain petrographic name: what dissolves, and what share of it lasts."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType
from typing import Literal

RockKind = Literal["silicate", "carbonate", "mixed", "evaporite", "barren"]

OXIDE_CHARGE_PER_GRAM = MappingProxyType(
    # equivalents per gram of oxide: charge / molar mass (g mol-1), masses as in `accounting`
    {"CaO": 2 / 56.077, "MgO": 2 / 40.304, "Na2O": 2 / 61.979, "K2O": 2 / 94.196}
)


@dataclass(frozen=True, kw_only=True)
class Rock:
    """One rock class.

    ``silicate_share`` is the part of the short-term uptake that silicate minerals cause (the
    rest is carbonate). ``oxides`` holds typical CaO, MgO, Na2O, K2O in mass percent of the
    silicate part; from it follows the share of calcium and magnesium in the charge released.
    """

    name: str
    kind: RockKind
    silicate_share: float
    oxides: tuple[float, float, float, float]
    cgi_term: str
    note: str = ""

    @property
    def calcium_magnesium_share(self) -> float:
        """Share of Ca and Mg in the charge of the base cations of the silicate part [1]."""
        charges = [
            mass * charge
            for mass, charge in zip(self.oxides, OXIDE_CHARGE_PER_GRAM.values(), strict=True)
        ]
        total = sum(charges)
        return sum(charges[:2]) / total if total else 0.0

    @property
    def weathers(self) -> bool:
        """Whether this class takes up CO2 at all."""
        return self.kind != "barren"


def _rock(
    name: str,
    kind: RockKind,
    silicate_share: float,
    oxides: tuple[float, float, float, float],
    cgi_term: str,
    note: str = "",
) -> Rock:
    return Rock(
        name=name,
        kind=kind,
        silicate_share=silicate_share,
        oxides=oxides,
        cgi_term=cgi_term,
        note=note,
    )


_SILICATE_OXIDES = "oxide values are rounded typical compositions, from memory"
_MIXED = "the silicate share of mixed rock is this project's own choice, to be edited"

_ALL = (
    _rock("basalt", "silicate", 1.0, (9.5, 7.0, 3.0, 1.0), "basalt"),
    _rock("andesite", "silicate", 1.0, (6.8, 3.3, 3.5, 1.6), "andesite"),
    _rock("rhyolite", "silicate", 1.0, (1.1, 0.4, 3.6, 4.3), "rhyolite"),
    _rock("gabbro", "silicate", 1.0, (9.5, 7.5, 2.6, 0.9), "gabbro"),
    _rock("granite", "silicate", 1.0, (1.8, 0.7, 3.7, 4.1), "granite"),
    _rock("gneiss", "silicate", 1.0, (3.0, 1.8, 3.4, 3.2), "gneiss"),
    _rock("schist", "silicate", 1.0, (2.1, 2.5, 1.9, 3.3), "schist"),
    _rock("sandstone", "silicate", 1.0, (1.5, 0.8, 1.0, 1.5), "clastic_sandstone"),
    _rock("shale", "silicate", 1.0, (1.3, 2.2, 1.2, 3.7), "shale"),
    _rock("limestone", "carbonate", 0.0, (0.0, 0.0, 0.0, 0.0), "limestone"),
    _rock("dolomite", "carbonate", 0.0, (0.0, 0.0, 0.0, 0.0), "dolostone"),
    _rock("mixed sediment", "mixed", 0.5, (1.6, 1.5, 1.3, 2.2), "sedimentary_rock", _MIXED),
    _rock("alluvium", "silicate", 1.0, (2.6, 1.8, 1.8, 2.4), "unconsolidated_material"),
    _rock("loess", "mixed", 0.5, (1.5, 1.3, 1.7, 2.2), "silt", _MIXED),
    _rock("evaporite", "evaporite", 0.0, (0.0, 0.0, 0.0, 0.0), "evaporite"),
    _rock("ultramafic rock", "silicate", 1.0, (1.0, 42.0, 0.2, 0.0), "ultramafic_igneous_rock"),
    _rock("ice", "barren", 0.0, (0.0, 0.0, 0.0, 0.0), ""),
    _rock("water", "barren", 0.0, (0.0, 0.0, 0.0, 0.0), ""),
)

ROCKS: Mapping[str, Rock] = MappingProxyType({one.name: one for one in _ALL})
"""Every rock class by name, in the order in which tables list them."""

ROCK_NAMES: tuple[str, ...] = tuple(ROCKS)
OXIDE_SOURCE = _SILICATE_OXIDES
