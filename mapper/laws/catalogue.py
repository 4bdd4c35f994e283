"""Every rate law there is, by name, and what was left out because it was not recovered."""

from __future__ import annotations

import difflib
from collections.abc import Mapping
from importlib.metadata import entry_points
from types import MappingProxyType

from mapper.laws.amiotte_suchet import AMIOTTE_SUCHET_1995
from mapper.laws.carbonate import WHITE_1984, WHITE_1984_BROOK
from mapper.laws.dessert import DESSERT_2003
from mapper.laws.feedback import BERNER_1994, BERNER_KOTHAVALA_2001, WALKER_1981
from mapper.laws.granite import OLIVA_2003, WHITE_BLUM_1995
from mapper.laws.hartmann import HARTMANN_2014_FORM
from mapper.laws.law import Law
from mapper.laws.maher import MAHER_CHAMBERLAIN_2014
from mapper.laws.minerals import PALANDRI_KHARAKA_2004
from mapper.laws.product import PRODUCT
from mapper.laws.romero_mujalli import ROMERO_MUJALLI_2019
from mapper.laws.west import WEST_2012

ENTRY_POINT_GROUP = "saprolite.laws"

LAWS: Mapping[str, Law] = MappingProxyType(
    {
        "product": PRODUCT,
        "amiotte-suchet-1995": AMIOTTE_SUCHET_1995,
        "hartmann-2014-form": HARTMANN_2014_FORM,
        "dessert-2003": DESSERT_2003,
        "white-blum-1995": WHITE_BLUM_1995,
        "oliva-2003": OLIVA_2003,
        "west-2012": WEST_2012,
        "maher-chamberlain-2014": MAHER_CHAMBERLAIN_2014,
        "white-1984": WHITE_1984,
        "white-1984-brook": WHITE_1984_BROOK,
        "romero-mujalli-2019": ROMERO_MUJALLI_2019,
        "walker-1981": WALKER_1981,
        "berner-1994": BERNER_1994,
        "berner-kothavala-2001": BERNER_KOTHAVALA_2001,
        "palandri-kharaka-2004": PALANDRI_KHARAKA_2004,
    }
)
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
