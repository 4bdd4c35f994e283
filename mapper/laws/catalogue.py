"""Every rate law there is, by name, and what was left out because it was not recovered."""

from __future__ import annotations

import difflib
import importlib
import pkgutil
from collections.abc import Mapping
from importlib.metadata import entry_points
from pathlib import Path
from types import MappingProxyType

from mapper.laws.law import Law

ENTRY_POINT_GROUP = "saprolite.laws"
FIRST = "product"  # the law that a job takes where it names none


def collect_laws(folder: Path, package: str) -> Mapping[str, Law]:
    """Collect every `Law` that a module of a folder holds at its top level.

    Nothing registers itself: a module states its laws, and they are read from it here. The law
    that is a job's default comes first, the others by year and name; a name that two laws have
    raises ValueError.
    """
    found: dict[str, Law] = {}
    for info in pkgutil.iter_modules([str(folder)]):
        if f"{package}.{info.name}" == __name__:
            continue
        module = importlib.import_module(f"{package}.{info.name}")
        for law in vars(module).values():
            if isinstance(law, Law) and found.setdefault(law.name, law) is not law:
                raise ValueError(f"two laws are called {law.name!r}, one in {module.__name__}")
    order = sorted(found.values(), key=lambda law: (law.name != FIRST, law.year, law.name))
    return MappingProxyType({law.name: law for law in order})


LAWS: Mapping[str, Law] = collect_laws(Path(__file__).parent, __package__ or "mapper.laws")
"""The laws that come with this package, by name."""

NOT_RECOVERED: tuple[str, ...] = (
    "Bluth & Kump 1994: coefficients not recovered, so the law is left out",
    "Goll et al. 2014: coefficients not recovered, so the law is left out",
    "Moosdorf et al. 2011: coefficients not recovered, so the law is left out",
    "Hartmann et al. 2014: base rate b for each rock not recovered; the form stands on other rates",
    "White & Blum 1995: prefactor not confirmed; only the temperature response is used",
)
"""What this catalogue does not hold, and why."""


def load_laws() -> Mapping[str, Law]:
    """Gather the laws of this package and those that installed packages add.

    A package adds a law with an entry point of the group "saprolite.laws" that names a `Law`.
    A name that is taken raises ValueError; something that is not a `Law` raises TypeError.
    """
    laws = dict(LAWS)
    for point in entry_points(group=ENTRY_POINT_GROUP):
        law = point.load()
        if not isinstance(law, Law):
            raise TypeError(f"entry point {point.name!r} of {point.value!r} is not a Law")
        if law.name in laws:
            raise ValueError(f"law {law.name!r} of {point.value!r} has a name that is taken")
        laws[law.name] = law
    return MappingProxyType(laws)


def find_law(name: str, laws: Mapping[str, Law] = LAWS) -> Law:
    """Find the law called ``name``; a KeyError names the nearest and lists all.

    Examples
    --------
    >>> find_law("dessert-2003").rocks
    ('basalt',)
    """
    try:
        return laws[name]
    except KeyError:
        near = difflib.get_close_matches(name, laws, n=1)
        hint = f"; did you mean {near[0]!r}?" if near else ""
        raise KeyError(f"no law is called {name!r}{hint} There are: {', '.join(laws)}") from None
