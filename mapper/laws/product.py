"""A law composed of a base concentration by rock and one response to each driver."""

from __future__ import annotations

import inspect
from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType

import numpy as np

from mapper.laws.amiotte_suchet import AMIOTTE_SUCHET_1995, CONCENTRATION
from mapper.laws.law import Floats, Law, Parameter, Values
from mapper.laws.responses import Response, find_response

BASES: Mapping[str, Parameter] = MappingProxyType({AMIOTTE_SUCHET_1995.name: CONCENTRATION})
"""Tables of base concentration by rock, by the law that they come from."""


@dataclass(frozen=True)
class Product:
    """A function made of responses: the base concentration times each of them in turn."""

    responses: tuple[Response, ...]

    def __post_init__(self) -> None:
        object.__setattr__(self, "__signature__", _signature(self.responses))

    def __call__(self, *layers: Floats, concentration: Values, **parameters: Values) -> Floats:
        """Multiply the concentration by the responses [mol m-2 yr-1]."""
        _check_names(parameters, self.responses)
        remaining = iter(layers)
        rate: Values = concentration
        for one in self.responses:
            read = (next(remaining),) if one.layer else ()
            own = {each.name: parameters[each.name] for each in one.parameters}
            rate = rate * one.function(*read, **own)
        return np.asarray(rate, dtype=np.float64)


def _signature(responses: tuple[Response, ...]) -> inspect.Signature:
    layers = [one.layer.name for one in responses if one.layer]
    names = ["concentration", *(each.name for one in responses for each in one.parameters)]
    return inspect.Signature(
        [inspect.Parameter(one, inspect.Parameter.POSITIONAL_ONLY) for one in layers]
        + [inspect.Parameter(one, inspect.Parameter.KEYWORD_ONLY) for one in names]
    )


def _check_names(parameters: Mapping[str, Values], responses: tuple[Response, ...]) -> None:
    known = {each.name for one in responses for each in one.parameters}
    if unknown := sorted(set(parameters) - known):
        raise TypeError(f"the product law takes no parameter {', '.join(unknown)}")


def compose(
    *,
    base: str = "amiotte-suchet-1995",
    runoff: str = "linear",
    temperature: str = "arrhenius",
    vegetation: str = "none",
    soil: str = "none",
) -> Law:
    """Compose a law from a base concentration by rock and a named response to each driver.

    Parameters
    ----------
    base : the law whose table of concentrations is the base rate.
    runoff : "linear", "power" or "saturating".
    temperature : "arrhenius", "exponential" or "none".
    vegetation : "cover" or "none".
    soil : "shielding" or "none".

    Returns
    -------
    A law called "product", which reads only the layers that its responses need. A name that is
    not known raises KeyError with the names there are.

    Notes
    -----
    F = a r(q) g(T) h(v) s(soil); each response is 1, or the runoff itself, at the reference at
    which the base concentration was gauged. The combination is this project's own.

    Examples
    --------
    >>> law = compose(vegetation="cover")
    >>> law.input_names
    ('runoff', 'temperature', 'vegetation')
    >>> rate = law.function(1000.0, 284.15, 0.8, **law.central_values("basalt"))
    >>> round(float(rate), 3)
    0.479
    """
    concentration = _find_base(base)
    responses = (
        find_response("runoff", runoff),
        find_response("temperature", temperature),
        find_response("vegetation", vegetation),
        find_response("soil", soil),
    )
    chosen = ", ".join(f"{one.driver} {one.name}" for one in responses)
    return Law(
        name="product",
        title="Base concentration by rock, times responses",
        summary=f"base of {base}; {chosen}",
        year=2026,
        function=Product(responses),
        inputs=tuple(one.layer for one in responses if one.layer),
        parameters=(concentration, *(each for one in responses for each in one.parameters)),
        rocks=tuple(concentration.by_rock),
        formula="F = a x " + " x ".join(one.formula for one in responses if one.layer),
        reference=f"this project's combination, on the base rates of {base}",
        cautions=(
            "a combination of this project, not a published law",
            *(text for one in responses for text in one.cautions),
        ),
        rises_with=tuple(one.layer.name for one in responses if one.layer and one.rises),
    )


def _find_base(name: str) -> Parameter:
    try:
        return BASES[name]
    except KeyError:
        known = ", ".join(BASES)
        raise KeyError(f"no base rates are called {name!r}; there are: {known}") from None


PRODUCT = compose(vegetation="cover", soil="shielding")
