"""Small worlds whose answers can be done in the head."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np

from mapper.accounting import tonnes_per_mole
from mapper.doubts import UncertaintySpec
from mapper.engine import KEPT
from mapper.job import Job, load_job
from mapper.laws import LAWS, Spread
from mapper.lawspec import LawSpec, ParameterSpec
from mapper.rocks import ROCK_NAMES
from mapper.scheme import RockLaw, Scheme
from mapper.states import States
from mapper.uncertainty.draws import draw_quantiles
from mapper.uncertainty.propagate import Drawn, draw_samples, propagate
from mapper.uncertainty.quantities import Doubts, find_doubts

ISLAND = Path(__file__).parents[2] / "configs" / "island.toml"
NO_KEPT_SPREAD = Spread(kind="lognormal", sd=0.0)
LINEAR = LAWS["amiotte-suchet-1995"]


def job(spec: UncertaintySpec, **parameters: ParameterSpec) -> Job:
    """The island's job with other spreads."""
    return replace(load_job(ISLAND), uncertainty=spec, law=LawSpec(parameters=parameters))


def linear_scheme(**concentration: float) -> Scheme:
    return Scheme(
        {rock: RockLaw(LINEAR, {"concentration": a}) for rock, a in concentration.items()}
    )


def wet(scheme: Scheme, areas: dict[str, list[float]], runoff: float = 500.0) -> States:
    """One state for each region and rock, all under the same runoff; areas [m2] by region."""
    rows = [
        (region, ROCK_NAMES.index(rock), area)
        for rock in scheme.by_rock
        for region, area in enumerate(areas[rock])
    ]
    rows.sort()
    region, rock, area = (np.array(one) for one in zip(*rows, strict=True))
    return States(region, rock, area.astype(float), {"runoff": np.full(len(rows), runoff)})


def central_totals(scheme: Scheme, states: States) -> np.ndarray:
    """Consumption by region and rock [t yr-1], worked out without the module under test."""
    out = np.zeros((states.region.max() + 1, len(ROCK_NAMES)))
    for at, (region, rock) in enumerate(zip(states.region, states.rock, strict=True)):
        law = scheme.by_rock[ROCK_NAMES[rock]]
        read = [states.inputs[name][at] for name in law.law.input_names]
        out[region, rock] += law.law.function(*read, **law.values) * states.area[at]
    return out * tonnes_per_mole()


def draw(scheme: Scheme, states: States, the_job: Job) -> tuple[Drawn, Doubts]:
    doubts = find_doubts(the_job, scheme)
    spec = the_job.uncertainty
    assert spec is not None
    quantiles = draw_quantiles(spec, doubts.keys, where="job")
    samples = draw_samples(doubts, quantiles, spec.draws)
    return propagate(scheme, states, samples, central_totals(scheme, states), KEPT), doubts
