"""What several test files share: how hard hypothesis tries, and where the open data lies."""

from __future__ import annotations

import os
import subprocess
import sys
from pathlib import Path

import pytest
from hypothesis import HealthCheck, settings

from tests.making import ROOT

settings.register_profile(
    "dev", max_examples=15, deadline=None, suppress_health_check=[HealthCheck.too_slow]
)
settings.register_profile(
    "ci", max_examples=100, deadline=None, derandomize=True, print_blob=True,
    suppress_health_check=[HealthCheck.too_slow],
)  # fmt: skip
settings.load_profile(os.environ.get("HYPOTHESIS_PROFILE", "dev"))


@pytest.fixture(scope="session")
def open_data() -> Path:
    """The folder of real open data, fetched and prepared once where it is not there yet."""
    named = os.environ.get("SAPROLITE_OPEN_DATA") or "~/.cache/saprolite/open-data"
    folder = Path(named).expanduser()
    last = folder / "prepared" / "world_regions.gpkg"
    if not last.exists():
        script = ROOT / "demo_grids" / "get_open_data.py"
        made = subprocess.run(
            [sys.executable, str(script), "--into", str(folder)],
            capture_output=True,
            text=True,
            check=False,
        )
        if made.returncode or not last.exists():
            pytest.fail(
                f"the open data is not in {folder} and could not be fetched there; run "
                f"demo_grids/get_open_data.py by hand and set SAPROLITE_OPEN_DATA.\n"
                f"{made.stdout[-2000:]}{made.stderr[-2000:]}"
            )
    return folder
