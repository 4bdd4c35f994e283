"""Totals of every draw: each rock's law evaluated on its states, never cell by cell."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass
from functools import partial

import numpy as np
from numpy.typing import NDArray

from mapper.accounting import tonnes_per_mole
from mapper.doubts import LAYER_SPREADS
from mapper.errors import LawError
from mapper.rocks import ROCK_NAMES
from mapper.scheme import RockLaw, Scheme
from mapper.states import States
from mapper.uncertainty.quantities import Doubts, Role, quantile

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

DRAWS_AT_ONCE = 64
STATES_AT_ONCE = 1024

SHARES = ("vegetation", "soil_shielding")
"""Layers that stay within 0 and 1 however they are shifted."""

Work = Callable[[], Floats]
Apply = Callable[[list[Work]], Iterable[Floats]]
"""Does pieces of work and gives their results in order; `pipeline` brings dask's threads."""


def one_by_one(work: list[Work]) -> Iterable[Floats]:
    """Do pieces of work one after the other."""
    return (one() for one in work)


@dataclass(frozen=True, kw_only=True, eq=False)
class Samples:
    """Values of every quantity in every draw, the central run first.

    Each array is of shape (n_draws + 1, 1). ``held`` counts the draws that were held at a
    physical limit, by quantity.
    """

    parameters: Mapping[str, Mapping[str, Floats]]
    layers: Mapping[str, Floats]
    kept: Mapping[str, Floats]
    held: Mapping[str, int]
    n_draws: int


def draw_samples(doubts: Doubts, quantiles: Mapping[str, Floats], n_draws: int) -> Samples:
    """Turn quantiles into values, held within each parameter's physical limits."""
    held: dict[str, int] = {}

    def values(role: Role, rock: str = "") -> Floats:
        free = quantile(role.spread, role.central, quantiles[role.key])
        kept = np.clip(free, role.low, role.high)
        n_held = int((kept != free).sum())
        if n_held:
            name = role.key if not rock or role.key.endswith(f".{rock}") else f"{role.key}.{rock}"
            held[name] = n_held
        return np.concatenate([[role.central], kept])[:, None]

    return Samples(
        parameters={
            rock: {name: values(role, rock) for name, role in roles.items()}
            for rock, roles in doubts.parameters.items()
        },
        layers={name: values(role) for name, role in doubts.layers.items()},
        kept={rock: values(role, rock) for rock, role in doubts.kept.items()},
        held=held,
        n_draws=n_draws,
    )


@dataclass(frozen=True, eq=False)
class Drawn:
    """Totals of every draw by pair of region and rock, of shape (n_draws, n_pairs) [t yr-1].

    ``apart`` is how far the central run over states lies from the sum over cells, relative.
    """

    region: Ints
    rock: Ints
    consumption: Floats
    drawdown: Floats
    n_regions: int
    apart: Mapping[str, float]

    def by_region(self, values: Floats) -> Floats:
        """Sums over the rocks, (n_draws, n_regions); ``values`` is one of the two arrays."""
        return _sums(values, self.region, self.n_regions)

    def by_rock(self, values: Floats) -> Floats:
        """Sums over the regions, (n_draws, n_rocks)."""
        return _sums(values, self.rock, len(ROCK_NAMES))


def _sums(values: Floats, key: Ints, n: int) -> Floats:
    out = np.zeros((values.shape[0], n))
    for at in range(key.size):  # in order, so that the sum has the same bits in every run
        out[:, key[at]] += values[:, at]
    return out


def propagate(
    scheme: Scheme,
    states: States,
    samples: Samples,
    central: Floats,
    kept: Floats,
    *,
    apply: Apply = one_by_one,
) -> Drawn:
    """Evaluate every draw on the states, and scale to the exact central totals.

    Parameters
    ----------
    central : consumption added over cells, (n_regions, n_rocks) [t yr-1]. kept : the share that
        lasts, by rock. apply : does the pieces of work, for instance in threads.

    Notes
    -----
    A draw's total is the exact central total times the ratio of that draw to the central run over
    the same states: the error of binning cancels but for its change between the two, and a draw
    that changes nothing gives the central total to the last bit.
    """
    n_regions = central.shape[0]
    region, rock = np.nonzero(central)
    exact = central[region, rock]
    drawn = _evaluate(scheme, states, samples, (region, rock), apply) * tonnes_per_mole()
    first = drawn[0]
    ratio = np.ones_like(drawn)
    np.divide(drawn, first, out=ratio, where=first != 0.0)
    consumption = ratio[1:] * exact
    if not np.isfinite(consumption).all():
        raise _not_finite(consumption, rock)
    drawdown = consumption * kept[rock]
    for name, factor in samples.kept.items():
        drawdown[:, rock == ROCK_NAMES.index(name)] *= factor[1:]
    found = np.zeros_like(central)
    found[region, rock] = first
    return Drawn(region, rock, consumption, drawdown, n_regions, _apart(found, central))


def over_states(scheme: Scheme, states: States, central: Floats) -> float:
    """Largest relative distance of the central totals over states from those over cells."""
    none = Samples(parameters={}, layers={}, kept={}, held={}, n_draws=0)
    region, rock = np.nonzero(central)
    found = np.zeros_like(central)
    totals = _evaluate(scheme, states, none, (region, rock), one_by_one)[0]
    found[region, rock] = totals * tonnes_per_mole()
    return max(_apart(found, central).values())


def _not_finite(values: Floats, rock: Ints) -> LawError:
    bad = ~np.isfinite(values)
    name = ROCK_NAMES[int(rock[int(np.flatnonzero(bad.any(axis=0))[0])])]
    return LawError(
        f"{int(bad.any(axis=1).sum())} draws give no finite total, first for {name}",
        where="law.parameters, the spreads of that rock's law",
        fix="a smaller spread (run.json of a run without [uncertainty] lists each parameter)",
    )


def _apart(found: Floats, central: Floats) -> dict[str, float]:
    """Largest relative distance of totals over states from totals over cells."""
    return {
        "all": _largest(found.sum(keepdims=True), central.sum(keepdims=True)),
        "regions": _largest(found.sum(axis=1), central.sum(axis=1)),
        "rocks": _largest(found.sum(axis=0), central.sum(axis=0)),
        "regions_by_rock": _largest(found, central),
    }


def _largest(one: Floats, other: Floats) -> float:
    some = other != 0.0
    return float((np.abs(one - other)[some] / np.abs(other)[some]).max()) if some.any() else 0.0


def _evaluate(
    scheme: Scheme, states: States, samples: Samples, pairs: tuple[Ints, Ints], apply: Apply
) -> Floats:
    """Totals over states of the central run and every draw, (n_draws + 1, n_pairs)."""
    region, rock = pairs
    n_rows, n_regions = samples.n_draws + 1, int(max(region.max(initial=0), 0)) + 1
    out = np.zeros((n_rows, region.size))
    work: list[Work] = []
    place: list[tuple[slice, Ints]] = []
    for name, law in scheme.by_rock.items():
        mine = np.flatnonzero(rock == ROCK_NAMES.index(name))
        own = states.of_rock(ROCK_NAMES.index(name))
        if not own.region.size or not mine.size:
            continue
        n_regions = max(n_regions, int(own.region.max()) + 1)
        for start in range(0, n_rows, DRAWS_AT_ONCE):
            rows = slice(start, min(start + DRAWS_AT_ONCE, n_rows))
            values = {one: v[rows] for one, v in samples.parameters.get(name, {}).items()}
            shifts = {one: v[rows] for one, v in samples.layers.items()}
            work.append(partial(_evaluate_draws, law, own, values, shifts, n_regions))
            place.append((rows, mine))
    for (rows, mine), part in zip(place, apply(work), strict=True):
        out[rows, mine] = part[:, region[mine]]
    return out


def _evaluate_draws(
    law: RockLaw,
    states: States,
    values: Mapping[str, Floats],
    shifts: Mapping[str, Floats],
    n_regions: int,
) -> Floats:
    """Totals by region of one rock under some draws, (n_draws, n_regions)."""
    n_draws = next(iter({**values, **shifts}.values())).shape[0] if values or shifts else 1
    out = np.zeros((n_draws, n_regions))
    parameters = {**law.values, **values}
    for start in range(0, states.region.size, STATES_AT_ONCE):
        part = slice(start, start + STATES_AT_ONCE)
        read = [
            shifted(name, states.inputs[name][None, part], shifts.get(name))
            for name in law.law.input_names
        ]
        with np.errstate(all="ignore"):  # what is not finite is refused for the whole draw
            rate = law.law.function(*read, **parameters) * states.area[part]
        rate = np.broadcast_to(rate, (n_draws, rate.shape[-1]))
        region = states.region[part]
        first = np.flatnonzero(np.diff(region, prepend=-1))
        out[:, region[first]] += np.add.reduceat(rate, first, axis=1)
    return out


def shifted(name: str, values: Floats, shift: Floats | None) -> Floats:
    """A layer under a draw: moved by a bias or multiplied by a factor, and still possible."""
    if shift is None:
        return values
    moved = values + shift if LAYER_SPREADS[name] == "bias" else values * shift
    return np.clip(moved, 0.0, 1.0) if name in SHARES else moved
