"""Which law, with which numbers, serves each rock of a job."""

from __future__ import annotations

import difflib
from collections.abc import Mapping
from dataclasses import dataclass, replace

from mapper.errors import JobError, LawError, Problems
from mapper.job import Job, LawSpec, ParameterSpec
from mapper.laws import LAWS, RESPONSES, Law, Parameter, compose
from mapper.rocks import ROCK_NAMES, ROCKS


@dataclass(frozen=True)
class RockLaw:
    """A law with its numbers for one rock; ``changed`` names what differs from the published."""

    law: Law
    values: Mapping[str, float]
    changed: tuple[str, ...] = ()


@dataclass(frozen=True)
class Scheme:
    """A law for each rock that weathers."""

    by_rock: Mapping[str, RockLaw]

    def laws(self) -> tuple[Law, ...]:
        """Each law once, in the order of the rocks."""
        return tuple({one.law.name: one.law for one in self.by_rock.values()}.values())

    def input_names(self) -> tuple[str, ...]:
        """Every layer that some law reads."""
        names = [name for law in self.laws() for name in law.input_names]
        return tuple(dict.fromkeys(names))


def build_scheme(job: Job, rocks: tuple[str, ...]) -> Scheme:
    """Choose the law and its numbers for each rock that occurs.

    Raises
    ------
    LawError, JobError, or ManyProblemsError with all that is wrong in the ``[law]`` table.
    """
    problems = Problems()
    chosen: dict[str, RockLaw] = {}
    laws: dict[str, Law] = {}
    for name in dict.fromkeys([job.law.default, *job.law.by_rock.values()]):
        with problems.gather():
            laws[name] = _law(name, job)
    _check_rock_names(job, problems)
    _check_parameter_names(job, tuple(laws.values()), problems)
    for rock in rocks:
        name = job.law.by_rock.get(rock, job.law.default)
        if ROCKS[rock].weathers and name in laws:
            with problems.gather():
                chosen[rock] = _rock_law(laws[name], rock, job)
    problems.raise_if_any()
    return Scheme(chosen)


def _law(name: str, job: Job) -> Law:
    where = f"{job.path}, law"
    if name not in LAWS:
        near = difflib.get_close_matches(name, LAWS, n=1, cutoff=0.0)[0]
        raise LawError(
            f"there is no law {name!r}",
            where=where,
            fix=f'"{near}" (all: {", ".join(LAWS)}; see saprolite laws)',
        )
    law = _composed(job) if name == "product" else LAWS[name]
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


def _rock_law(law: Law, rock: str, job: Job) -> RockLaw:
    values: dict[str, float] = {}
    changed: list[str] = []
    for one in law.parameters:
        published = one.value(rock)
        asked = _asked(job.law.parameters.get(one.name), rock)
        if asked is None and published is None:
            raise _serves_not(law, one, rock, job)
        if asked is not None and asked != published:
            _check_range(one, asked, job)
            was = "none for this rock" if published is None else f"{published:g}"
            changed.append(f"{one.name} = {asked:g} {one.unit} (published: {was})")
        values[one.name] = asked if asked is not None else float(published or 0.0)
    if rock not in law.rocks and not any(one.by_rock for one in law.parameters):
        raise _serves_not(law, None, rock, job)
    return RockLaw(law, values, tuple(changed))


def _serves_not(law: Law, parameter: Parameter | None, rock: str, job: Job) -> LawError:
    own = (
        "" if parameter is None else f", or {parameter.name} = {{ by_rock = {{ {rock!r} = ... }} }}"
    )
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


def with_values(one: RockLaw, values: Mapping[str, float]) -> RockLaw:
    """The same law with some numbers replaced, for a draw."""
    return replace(one, values={**one.values, **values})
