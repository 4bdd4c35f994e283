"""Maps and totals of the CO2 that rock weathering takes up, with error bars.

The doors are `load_job`, `run`, `inspect`, `open_layers`, `drawdown` and `LAWS`; each is imported
when it is first asked for, so that ``saprolite --help`` loads none of the libraries beneath.
"""

from __future__ import annotations

import importlib
import os
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from mapper.dataset import drawdown, open_layers
    from mapper.inspection import inspect
    from mapper.job import load_job
    from mapper.laws import LAWS
    from mapper.pipeline import run

__all__ = ["LAWS", "drawdown", "inspect", "load_job", "open_layers", "run"]

# Drivers that read or write files other than the one named are never needed, and GDAL reads these
# settings once, at its first import, in every thread.
_GDAL_SETTINGS = {
    "GDAL_SKIP": "MRF,WMS,WCS,WMTS,HTTP,GTI",
    "GDAL_VRT_ENABLE_PYTHON": "NO",
    "GDAL_CACHEMAX": "128",
    "GDAL_PAM_ENABLED": "NO",
}
for _name, _value in _GDAL_SETTINGS.items():
    os.environ.setdefault(_name, _value)

_HOMES = {
    "LAWS": "mapper.laws",
    "drawdown": "mapper.dataset",
    "inspect": "mapper.inspection",
    "load_job": "mapper.job",
    "open_layers": "mapper.dataset",
    "run": "mapper.pipeline",
}


def __getattr__(name: str) -> Any:
    if name not in _HOMES:
        raise AttributeError(f"module 'mapper' has no attribute {name!r}")
    return getattr(importlib.import_module(_HOMES[name]), name)
