"""Which law, with which numbers, serves each rock of a job."""

from __future__ import annotations

import difflib
from collections.abc import Mapping
from dataclasses import dataclass, replace

from mapper.errors import JobError, LawError, Problems
from mapper.formula import formula_law
from mapper.job import Job
from mapper.laws import (
    CAP,
    CONSUMPTION_PER_TONNE,
    RESPONSES,
    UNLIMITED_ROCKS,
    WEATHERING_LIMIT,
    Law,
    Parameter,
    cap_law,
    compose,
    load_laws,
)
from mapper.lawspec import AlternativeSpec, LawSpec, ParameterSpec
from mapper.rocks import ROCK_NAMES, ROCKS


@dataclass(frozen=True)
class RockLaw:
    """A law with its numbers for one rock; ``changed`` names what differs from the published."""

    law: Law
    values: Mapping[str, float]
    changed: tuple[str, ...] = ()


@dataclass(frozen=True)
class Alternative:
    """Another law in place of the job's default.

    ``replaced`` holds the rocks that it serves in place of the default; ``kept`` those that the
    default serves and this law does not, so that they keep the default.
    """

    name: str
    weight: float
    replaced: Mapping[str, RockLaw]
    kept: tuple[str, ...]


@dataclass(frozen=True)
class Scheme:
    """A law for each rock that weathers, and the laws to compare it with."""

    by_rock: Mapping[str, RockLaw]
    alternatives: tuple[Alternative, ...] = ()
    name: str = ""
    weight: float = 1.0

    def laws(self) -> tuple[Law, ...]:
        """Each law of the job's own choice once, in the order of the rocks."""
        return tuple({one.law.name: one.law for one in self.by_rock.values()}.values())

    def every_law(self) -> tuple[Law, ...]:
        """Each law once, alternatives among them."""
        others = [one.law for other in self.alternatives for one in other.replaced.values()]
        return tuple({law.name: law for law in (*self.laws(), *others)}.values())

    def input_names(self) -> tuple[str, ...]:
        """Every layer that some law of the job's own choice reads."""
        return _inputs_of(self.laws())

    def read_names(self) -> tuple[str, ...]:
        """Every layer that some law reads, alternatives among them."""
        return _inputs_of(self.every_law())


def _inputs_of(laws: tuple[Law, ...]) -> tuple[str, ...]:
    return tuple(dict.fromkeys(name for law in laws for name in law.input_names))


def find_laws() -> Mapping[str, Law]:
    """Find the laws of this package and of those that add to it.

    Raises
    ------
    LawError where another package adds something that cannot be used.
    """
    try:
        return load_laws()
    except (ValueError, TypeError, ImportError, AttributeError) as cause:
        raise LawError(
            f"a law that another package adds cannot be used: {cause}",
            where='entry points of the group "saprolite.laws"',
            fix="mend that package, or take it out of this Python",
        ) from cause


def unknown_law(name: str, known: Mapping[str, object], *, where: str, fix: str = "{}") -> LawError:
    """Make the error for a name that no law has; ``fix`` takes the nearest name."""
    near = difflib.get_close_matches(name, known, n=1, cutoff=0.0)[0]
    return LawError(
        f"there is no law {name!r}",
        where=where,
        fix=f"{fix.format(near)} (all: {', '.join(known)}; see saprolite laws)",
    )


def build_scheme(job: Job, rocks: tuple[str, ...]) -> Scheme:
    """Choose the law and its numbers for each rock that occurs.

    Raises
    ------
    LawError, JobError, or ManyProblemsError with all that is wrong in the ``[law]`` table.
    """
    problems = Problems()
    laws = _named_laws(job, problems)
    _check_rock_names(job, problems)
    _check_parameter_names(job, tuple(laws.values()), problems)
    chosen: dict[str, RockLaw] = {}
    for rock in rocks:
        name = job.law.by_rock.get(rock, job.law.default)
        if ROCKS[rock].weathers and name in laws:
            with problems.gather():
                chosen[rock] = _rock_law(laws[name], rock, job)
    free = tuple(rock for rock in rocks if ROCKS[rock].weathers and rock not in job.law.by_rock)
    others: list[Alternative] = []
    for one in job.law.alternatives:
        if one.name in laws:
            with problems.gather():
                others.append(_alternative(one, laws[one.name], free, job))
    _check_alternatives(job, problems)
    problems.raise_if_any()
    return Scheme(chosen, tuple(others), job.law.default, job.law.weight)


def _named_laws(job: Job, problems: Problems) -> dict[str, Law]:
    """Every law that the job names, where it can be used; what is wrong is noted."""
    known: dict[str, Law] = {}
    with problems.gather():
        known.update(find_laws())
    if not known:
        return {}
    own = _own_laws(job, known, problems)
    spec = job.law
    named = [spec.default, *spec.by_rock.values(), *(one.name for one in spec.alternatives)]
    laws: dict[str, Law] = {}
    for name in dict.fromkeys(named):
        if name in own or name not in spec.own:  # else its own problems are noted already
            with problems.gather():
                laws[name] = _law(name, job, {**known, **own})
    return laws


def _own_laws(job: Job, known: Mapping[str, Law], problems: Problems) -> dict[str, Law]:
    """The laws that the job itself writes down, those in no use checked too."""
    laws: dict[str, Law] = {}
    for name, spec in job.law.own.items():
        where = f"{job.path}, law.own.{name}"
        if name in known:
            problems.add(
                LawError(
                    f"{name!r} is a law of the catalogue",
                    where=where,
                    fix=f"another name, such as [law.own.my-{name}]",
                )
            )
            continue
        with problems.gather():
            for taken in (WEATHERING_LIMIT.name, CONSUMPTION_PER_TONNE.name):
                if taken in spec.parameters:
                    raise LawError(
                        f"parameter {taken!r} belongs to the supply limit",
                        where=f"{where}.parameters",
                        fix=f"my_{taken}",
                    )
            laws[name] = formula_law(
                name, spec.formula, spec.inputs, spec.parameters, spec.rocks or None, where=where
            )
    return laws


def _law(name: str, job: Job, known: Mapping[str, Law]) -> Law:
    where = f"{job.path}, law"
    if name not in known:
        raise unknown_law(name, known, where=where, fix='"{}"')
    law = _composed(job) if name == "product" else known[name]
    if law.output != "consumption":
        raise LawError(
            f"law {name!r} only ranks: its result is not CO2 per area and time",
            where=where,
            fix="another law; see saprolite laws",
        )
    return law


def _composed(job: Job) -> Law:
    """The product law with the responses that the job asks for.

    A response that the job does not name is on where its layer is given.
    """
    given = job.layers
    names = {
        "runoff": "linear",
        "temperature": "arrhenius",
        "vegetation": "cover" if "vegetation" in given else "none",
        "soil": "shielding" if "soil_shielding" in given else "none",
    }
    names.update(job.law.responses)
    _check_responses(job.law, f"{job.path}, law.responses")
    try:
        return compose(base=job.law.base, **names)
    except KeyError as cause:
        raise LawError(
            str(cause.args[0]), where=f"{job.path}, law.base", fix='base = "amiotte-suchet-1995"'
        ) from cause


def _check_responses(spec: LawSpec, where: str) -> None:
    for driver, name in spec.responses.items():
        known = [one for kind, one in RESPONSES if kind == driver]
        if name not in known:
            raise LawError(
                f"there is no response to {driver} called {name!r}",
                where=f"{where}.{driver}",
                fix="one of: " + ", ".join(known),
            )


def _check_rock_names(job: Job, problems: Problems) -> None:
    for rock in job.law.by_rock:
        if rock not in ROCK_NAMES:
            near = difflib.get_close_matches(rock, ROCK_NAMES, n=1, cutoff=0.0)[0]
            problems.add(
                JobError(
                    f"{rock!r} is not a rock",
                    where=f"{job.path}, law.by_rock",
                    fix=f'"{near}" = ...',
                )
            )


def _check_parameter_names(job: Job, laws: tuple[Law, ...], problems: Problems) -> None:
    known = {one.name for law in laws for one in law.parameters}
    if job.law.cap == CAP:
        known |= {WEATHERING_LIMIT.name, CONSUMPTION_PER_TONNE.name}
    for name in job.law.parameters:
        if laws and name not in known:
            near = difflib.get_close_matches(name, known, n=1, cutoff=0.0)
            problems.add(
                LawError(
                    f"no law of this job has a parameter {name!r}",
                    where=f"{job.path}, law.parameters",
                    fix=f"{near[0]} (there are: {', '.join(sorted(known))})" if near else "drop it",
                )
            )


def _check_alternatives(job: Job, problems: Problems) -> None:
    names = [job.law.default, *(one.name for one in job.law.alternatives)]
    for name in dict.fromkeys(names):
        if names.count(name) > 1:
            problems.add(
                LawError(
                    f"law {name!r} is named {names.count(name)} times, and one is enough",
                    where=f"{job.path}, law.alternatives",
                    fix="each law once; the default law is always part of the comparison",
                )
            )


def _alternative(spec: AlternativeSpec, law: Law, free: tuple[str, ...], job: Job) -> Alternative:
    """Put a law in place of the default for the rocks that it serves."""
    served = [rock for rock in free if _missing(law, rock, job) is None]
    if not served:
        raise LawError(
            f"alternative {law.name!r} serves none of the rocks of the default law: "
            f"{', '.join(free) or 'there are none'}",
            where=f"{job.path}, law.alternatives; it serves {', '.join(law.rocks)}",
            fix="take it out, or take its rocks out of [law.by_rock]",
        )
    replaced = {rock: _rock_law(law, rock, job) for rock in served}
    kept = tuple(rock for rock in free if rock not in replaced)
    return Alternative(spec.name, spec.weight, replaced, kept)


def _missing(law: Law, rock: str, job: Job) -> str | None:
    """Name a number that a rock outside the law's own needs from the job and does not get.

    None where nothing is missing; empty where no number could make the law serve the rock.
    """
    if rock in law.rocks:
        return None
    needed = [one.name for one in law.parameters if one.by_rock and one.default is None]
    given = [name for name in needed if _asked(job.law.parameters.get(name), rock) is not None]
    if needed and given == needed:
        return None
    return next((name for name in needed if name not in given), "")


def _rock_law(law: Law, rock: str, job: Job) -> RockLaw:
    missing = _missing(law, rock, job)
    if missing is not None:
        raise _serves_not(law, missing, rock, job)
    changed: list[str] = []
    if _is_capped(rock, job):
        law = cap_law(law if rock in law.rocks else replace(law, rocks=(*law.rocks, rock)))
        changed.append(f"held at the supply limit of {CAP}")
    values: dict[str, float] = {}
    for one in law.parameters:
        published = one.value(rock)
        asked = _asked(job.law.parameters.get(one.name), rock)
        if asked is None and published is None:
            raise _serves_not(law, one.name, rock, job)
        if asked is not None and asked != published:
            _check_range(one, asked, job)
            changed.append(_change(one, asked, published))
        values[one.name] = asked if asked is not None else float(published or 0.0)
    return RockLaw(law, values, tuple(changed))


def _is_capped(rock: str, job: Job) -> bool:
    """Whether the supply limit holds a rock: one that dissolves whole only by the job's number."""
    if job.law.cap != CAP:
        return False
    limit = job.law.parameters.get(WEATHERING_LIMIT.name)
    return rock not in UNLIMITED_ROCKS or (limit is not None and rock in limit.by_rock)


def _change(one: Parameter, asked: float, published: float | None) -> str:
    unit = "" if one.unit == "1" else f" {one.unit}"
    was = "none for this rock" if published is None else f"{published:g}"
    return f"{one.name} = {asked:g}{unit} (published: {was})"


def _serves_not(law: Law, parameter: str, rock: str, job: Job) -> LawError:
    own = f", or {parameter} = {{ by_rock = {{ {rock!r} = ... }} }}" if parameter else ""
    return LawError(
        f"law {law.name!r} has no numbers for {rock}, and the legend holds it",
        where=f"{job.path}, law; the law serves {', '.join(law.rocks)}",
        fix=f'[law.by_rock] with "{rock}" = a law that serves it (see saprolite laws){own}',
    )


def _asked(spec: ParameterSpec | None, rock: str) -> float | None:
    if spec is None:
        return None
    return spec.by_rock.get(rock, spec.value)


def _check_range(parameter: Parameter, value: float, job: Job) -> None:
    if parameter.low <= value <= parameter.high:
        return
    raise LawError(
        f"{parameter.name} = {value:g} {parameter.unit} lies outside "
        f"{parameter.low:g} to {parameter.high:g}",
        where=f"{job.path}, law.parameters.{parameter.name}",
        fix=f"a value in that range ({parameter.meaning})",
    )
