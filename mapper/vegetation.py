"""Plant cover from a vegetation index."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]


def cover_from_ndvi(ndvi: Floats, *, bare: float, dense: float, squared: bool) -> Floats:
    """Fraction of ground that plants cover [1].

    Parameters
    ----------
    ndvi : normalised difference vegetation index [1].
    bare, dense : the index of bare soil and of full cover; they depend on the sensor; 0.05 and
        0.86 are usual for modern data (from memory).
    squared : Carlson & Ripley (1997) where true, Gutman & Ignatov (1998) where false; both
        quoted from later texts.

    Examples
    --------
    >>> import numpy as np
    >>> cover_from_ndvi(np.array([0.3, 0.7]), bare=0.05, dense=0.86, squared=False).round(3)
    array([0.309, 0.802])
    """
    share = np.clip((ndvi - bare) / (dense - bare), 0.0, 1.0)
    return share**2 if squared else share
