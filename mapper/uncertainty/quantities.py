"""What is uncertain in a job: each quantity with its spread, source and grade."""

from __future__ import annotations

import difflib
import math
from collections.abc import Mapping
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtri

from mapper.accounting import drawdown_share
from mapper.doubts import KEPT_SHARE, LAYER_SPREADS, UncertaintySpec
from mapper.errors import JobError, LawError, MapperError, Problems
from mapper.job import Job
from mapper.laws import LAW_INPUTS, Grade, Parameter, Spread
from mapper.lawspec import ParameterSpec
from mapper.rocks import ROCKS, Rock
from mapper.scheme import Scheme

Floats = NDArray[np.float64]

SET_BY_JOB = "the job"
MOST_KEPT = 0.5
"""No more than half of what silicate rock takes up comes down as carbonate."""


KEPT_SHARE_SOURCE = (
    "this project's choice: sd 0.3 times the share of sodium and potassium in the charge (what is "
    "not calcium or magnesium varies most among rocks of one name; compositions are typical ones, "
    "from memory), and 0.3 more for rock that is part carbonate; reverse weathering, which would "
    "keep a part of the sodium and potassium too, is within it"
)


def kept_spread(rock: Rock) -> Spread:
    """The spread of the share that lasts where the job says none.

    Examples
    --------
    >>> round(kept_spread(ROCKS["basalt"]).sd, 3), round(kept_spread(ROCKS["granite"]).sd, 3)
    (0.044, 0.205)
    """
    of_cations = 0.3 * (1.0 - rock.calcium_magnesium_share)
    of_carbonate = 0.3 if 0.0 < rock.silicate_share < 1.0 else 0.0
    sd = math.hypot(of_cations, of_carbonate)
    return Spread(kind="lognormal", sd=round(sd, 4), per_rock=True)


@dataclass(frozen=True, kw_only=True)
class Quantity:
    """One thing that is drawn; ``rock`` is empty where all rocks share the draw."""

    key: str
    kind: Literal["parameter", "layer", "accounting"]
    name: str
    rock: str
    meaning: str
    unit: str
    spread: Spread
    source: str
    grade: Grade | Literal["job"]

    def spread_text(self) -> str:
        """The spread as a reader would write it."""
        one = self.spread
        unit = "" if self.unit == "1" else f" {self.unit}"
        if one.kind == "normal":
            return f"normal, sd {one.sd:g}{unit}"
        if one.kind == "lognormal":
            return f"lognormal, sd of the logarithm {one.sd:g}"
        return f"{one.kind} from {one.low:g} to {one.high:g}{unit}"


@dataclass(frozen=True, kw_only=True)
class Role:
    """How a quantity sets a parameter of one rock: its spread around that rock's central value."""

    key: str
    spread: Spread
    central: float
    low: float
    high: float


@dataclass(frozen=True, kw_only=True)
class Doubts:
    """All that is uncertain in a job, and all that was taken as certain."""

    quantities: tuple[Quantity, ...]
    parameters: Mapping[str, Mapping[str, Role]]
    layers: Mapping[str, Role]
    kept: Mapping[str, Role]
    certain: tuple[str, ...]

    @property
    def keys(self) -> tuple[str, ...]:
        """The name of each quantity."""
        return tuple(one.key for one in self.quantities)


def quantile(spread: Spread, central: float, u: Floats) -> Floats:
    """Values of a spread at the quantiles ``u``, within 0 and 1.

    Examples
    --------
    >>> import numpy as np
    >>> spread = Spread(kind="triangular", low=0.0, high=2.0)
    >>> quantile(spread, 1.0, np.array([0.125, 0.5, 1.0]))
    array([0.5, 1. , 2. ])
    """
    if spread.kind == "normal":
        return np.asarray(central + spread.sd * ndtri(u))
    if spread.kind == "lognormal":
        return np.asarray(central * np.exp(spread.sd * ndtri(u)))
    width = spread.high - spread.low
    if spread.kind == "uniform" or width == 0.0:
        return np.asarray(spread.low + width * u)
    rising = np.sqrt(u * width * (central - spread.low))
    falling = np.sqrt((1.0 - u) * width * (spread.high - central))
    top = (central - spread.low) / width
    return np.where(u <= top, spread.low + rising, spread.high - falling)


def is_certain(spread: Spread | None) -> bool:
    """Whether a spread has no width."""
    if spread is None:
        return True
    if spread.kind in ("normal", "lognormal"):
        return spread.sd == 0.0
    return spread.low == spread.high


def find_doubts(job: Job, scheme: Scheme) -> Doubts:
    """Gather what is uncertain in a job: what it says, and else what its laws say.

    Raises
    ------
    LawError, JobError, or ManyProblemsError with every spread that cannot be used.
    """
    spec = job.uncertainty or UncertaintySpec()
    problems = Problems()
    found = _Gathered(job, problems)
    for rock, one in scheme.by_rock.items():
        for parameter in one.law.parameters:
            found.add_parameter(rock, parameter, one.values[parameter.name])
        found.add_kept(rock, spec.kept_share)
    for name in scheme.input_names():
        found.add_layer(name, spec.layers.get(name))
    _check_layers(spec, scheme, job, problems)
    problems.raise_if_any()
    return found.doubts()


def _check_layers(spec: UncertaintySpec, scheme: Scheme, job: Job, problems: Problems) -> None:
    read = scheme.input_names()
    for name in spec.layers:
        if name in read:
            continue
        near = difflib.get_close_matches(name, read, n=1, cutoff=0.0)
        problems.add(
            JobError(
                f"a spread is given for {name}, which no law of this job reads",
                where=f"{job.path}, uncertainty.layers.{name}",
                fix=f"{near[0]} (read are: {', '.join(read)})" if near else "drop it",
            )
        )


class _Gathered:
    """Collects quantities, each once, and the part that each plays for a rock."""

    def __init__(self, job: Job, problems: Problems) -> None:
        self.job = job
        self.problems = problems
        self.quantities: dict[str, Quantity] = {}
        self.parameters: dict[str, dict[str, Role]] = {}
        self.layers: dict[str, Role] = {}
        self.kept: dict[str, Role] = {}
        self.certain: dict[str, None] = {}

    def add_parameter(self, rock: str, parameter: Parameter, central: float) -> None:
        spread, said = _spread_for(self.job.law.parameters.get(parameter.name), parameter)
        if spread is None or is_certain(spread):
            self.certain[parameter.name] = None
            return
        problem = _misplaced(spread, parameter.name, rock, central, self.job)
        if problem is not None:
            self.problems.add(problem)
            return
        key = f"{parameter.name}.{rock}" if spread.per_rock else parameter.name
        quantity = Quantity(
            key=key,
            kind="parameter",
            name=parameter.name,
            rock=rock if spread.per_rock else "",
            meaning=parameter.meaning,
            unit=parameter.unit,
            spread=spread,
            source=SET_BY_JOB if said else parameter.source,
            grade="job" if said else parameter.grade,
        )
        self.quantities.setdefault(key, quantity)
        self.parameters.setdefault(rock, {})[parameter.name] = Role(
            key=key, spread=spread, central=central, low=parameter.low, high=parameter.high
        )

    def add_kept(self, rock: str, said: Spread | None) -> None:
        share = drawdown_share(ROCKS[rock])
        spread = kept_spread(ROCKS[rock]) if said is None else said
        if share == 0.0 or is_certain(spread):
            return
        key = f"{KEPT_SHARE}.{rock}" if spread.per_rock else KEPT_SHARE
        quantity = Quantity(
            key=key,
            kind="accounting",
            name=KEPT_SHARE,
            rock=rock if spread.per_rock else "",
            meaning="factor on the share of the uptake that lasts",
            unit="1",
            spread=spread,
            source=KEPT_SHARE_SOURCE if said is None else SET_BY_JOB,
            grade="project" if said is None else "job",
        )
        self.quantities.setdefault(key, quantity)
        self.kept[rock] = Role(key=key, spread=spread, central=1.0, low=0.0, high=MOST_KEPT / share)

    def add_layer(self, name: str, spread: Spread | None) -> None:
        if spread is None or is_certain(spread):
            self.certain[f"layers.{name}"] = None
            return
        acts = LAYER_SPREADS[name]
        centre, low = (0.0, -np.inf) if acts == "bias" else (1.0, 0.0)
        key = f"layers.{name}"
        self.quantities[key] = Quantity(
            key=key,
            kind="layer",
            name=name,
            rock="",
            meaning=f"{acts} of the whole {name} map",
            unit=LAW_INPUTS[name] if acts == "bias" else "1",
            spread=spread,
            source=SET_BY_JOB,
            grade="job",
        )
        self.layers[name] = Role(key=key, spread=spread, central=centre, low=low, high=np.inf)

    def doubts(self) -> Doubts:
        return Doubts(
            quantities=tuple(self.quantities.values()),
            parameters=self.parameters,
            layers=self.layers,
            kept=self.kept,
            certain=tuple(self.certain),
        )


def _spread_for(spec: ParameterSpec | None, parameter: Parameter) -> tuple[Spread | None, bool]:
    """The spread of a parameter, and whether the job said it."""
    spread = parameter.spread
    said = spec is not None and spec.spread is not None
    if spec is not None and spec.spread is not None:
        spread = spec.spread
    if spread is not None and spec is not None and spec.per_rock is not None:
        spread = replace(spread, per_rock=spec.per_rock)
    return spread, said


def _misplaced(
    spread: Spread, name: str, rock: str, central: float, job: Job
) -> MapperError | None:
    bounded = spread.kind in ("uniform", "triangular")
    where = f"{job.path}, law.parameters.{name}"
    if bounded and not spread.low <= central <= spread.high:
        return LawError(
            f"{name} of {rock} is {central:g}, and its spread runs from {spread.low:g} to "
            f"{spread.high:g}",
            where=where,
            fix='low and high around the value, or kind = "lognormal" with sd for every rock',
        )
    if spread.kind == "lognormal" and central <= 0.0:
        return LawError(
            f"{name} of {rock} is {central:g}, and a lognormal spread needs more than zero",
            where=where,
            fix='kind = "normal"',
        )
    return None
