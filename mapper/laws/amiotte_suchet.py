"""Runoff-linear uptake by rock, after Amiotte Suchet and Probst."""

from __future__ import annotations

from mapper.laws.law import CheckPoint, Floats, Input, Law, Parameter, Spread, Values
from mapper.laws.responses import pass_water

CONCENTRATIONS = {
    # mmol CO2 per litre of runoff; the table of the source, seven rock groups, grade "read"
    "plutonic and metamorphic": 0.095,
    "sandstone": 0.152,
    "acid volcanic": 0.222,
    "evaporite": 0.293,
    "basalt": 0.479,
    "shale": 0.627,
    "carbonate": 1.586,
}

# Which group each rock is read as. The groups are the source's; where it does not name the rock
# (gabbro; dolomite) the reading is this project's own.
GROUP_BY_ROCK = {
    "basalt": "basalt",
    "andesite": "acid volcanic",
    "rhyolite": "acid volcanic",
    "gabbro": "plutonic and metamorphic",
    "granite": "plutonic and metamorphic",
    "gneiss": "plutonic and metamorphic",
    "schist": "plutonic and metamorphic",
    "sandstone": "sandstone",
    "shale": "shale",
    "limestone": "carbonate",
    "dolomite": "carbonate",
    "evaporite": "evaporite",
}

# Rocks that are not in the table, as a mix of those that are: this project's own choice. The two
# mixes with carbonate are such that half of the uptake is by silicate, half by carbonate.
MIX_BY_ROCK = {
    "mixed sediment": {"carbonate": 1 / 5, "sandstone": 2 / 5, "shale": 2 / 5},
    "alluvium": {"sandstone": 1.0},
    "loess": {"carbonate": 1 / 11, "sandstone": 10 / 11},
}


def _mix(shares: dict[str, float]) -> float:
    return round(sum(CONCENTRATIONS[group] * share for group, share in shares.items()), 3)


CONCENTRATION = Parameter(
    name="concentration",
    symbol="a",
    unit="mmol L-1",
    meaning="CO2 taken from air and soil per litre of runoff, at the temperature of the basins",
    by_rock={
        **{rock: CONCENTRATIONS[group] for rock, group in GROUP_BY_ROCK.items()},
        **{rock: _mix(shares) for rock, shares in MIX_BY_ROCK.items()},
    },
    low=0.01,
    high=5.0,
    spread=Spread(kind="lognormal", sd=0.25, per_rock=True),
    source=(
        "Amiotte Suchet & Probst 1993 as reproduced in Drever & Clow 1995, table 4 (read). "
        "Gabbro, gneiss and schist as plutonic and metamorphic, dolomite as carbonate rock: this "
        "project's reading. Mixed sediment (1/5 carbonate, 2/5 sandstone, 2/5 shale), alluvium "
        "(sandstone) and loess (1/11 carbonate, 10/11 sandstone) are not in the table: project. "
        "The spread is the project's; the source gives correlations (0.71 to 0.99), no "
        "spread. Each rock is drawn for itself, as each was fitted on basins of its own."
    ),
    grade="read",
)


def take_up_by_runoff(runoff: Floats, *, concentration: Values) -> Floats:
    """Uptake that grows in proportion to runoff, with one concentration for each rock.

    Fitted on 232 small one-rock catchments in France, about 5 to 12 degC (from memory). It has
    no temperature, relief or vegetation: those of the French catchments are inside its numbers.

    Parameters
    ----------
    runoff : water that leaves the ground [mm yr-1].
    concentration : CO2 taken up per litre of runoff; 0.095 (granite) to 1.586 (limestone),
        Drever & Clow 1995, table 4 [mmol L-1].

    Returns
    -------
    CO2 taken up in the short term, per area of ground and year [mol m-2 yr-1].

    Notes
    -----
    F = 1000 a q in mol km-2 yr-1, with ``a`` the concentration and ``q`` the runoff. River
    bicarbonate is ``a`` for silicate rock and ``2 a`` for carbonate rock: ``a`` counts only what
    comes from the air. Below about 5 and above 12 degC the temperature is extrapolated unseen.

    References
    ----------
    Amiotte Suchet & Probst 1995, Tellus B 47:273-280, doi 10.3402/tellusb.v47i1-2.16047;
    1993, Chem. Geol. 107:205-210; table reproduced in Drever & Clow 1995, Reviews in
    Mineralogy 31, ch. 10, table 4.

    Examples
    --------
    >>> round(float(take_up_by_runoff(300.0, concentration=0.479)), 4)  # basalt
    0.1437
    """
    return concentration * pass_water(runoff)


def _check(rock: str, runoff: float, expected: float) -> CheckPoint:
    return CheckPoint(
        inputs={"runoff": runoff},
        expected=expected,
        relative_tolerance=1e-9,
        source="F = 1000 a q with the table's a",
        grade="computed",
        rock=rock,
    )


AMIOTTE_SUCHET_1995 = Law(
    name="amiotte-suchet-1995",
    title="Runoff-linear uptake by rock",
    summary="one concentration for each rock, times runoff; France, temperate",
    year=1995,
    function=take_up_by_runoff,
    inputs=(
        Input(
            name="runoff",
            low=0.0,
            high=2000.0,
            range_source="the range of the basins was not recovered; a bound for temperate basins",
            range_grade="project",
        ),
    ),
    parameters=(CONCENTRATION,),
    rocks=tuple(CONCENTRATION.by_rock),
    formula="F = a q",
    reference="Amiotte Suchet & Probst 1995, Tellus B 47:273-280",
    doi="10.3402/tellusb.v47i1-2.16047",
    cautions=(
        "fitted in a temperate climate, about 5 to 12 degC (from memory): it has no temperature",
        "ultramafic rock is not in the table: name another law for it, or give a concentration",
        "the French catchments were vegetated: a vegetation factor needs a reference cover",
    ),
    checks=(
        _check("limestone", 300.0, 0.4758),
        _check("basalt", 300.0, 0.1437),
        _check("granite", 300.0, 0.0285),
        _check("shale", 1000.0, 0.627),
    ),
    rises_with=("runoff",),
)
