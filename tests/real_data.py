"""Where tests find real recordings; without them the test skips and says so."""

import os
from pathlib import Path

import pytest

__all__ = ["real_data"]


def real_data(relative: str) -> Path:
    """Return the path of a real recording, or skip the test when it is not there."""
    root = os.environ.get("MIDFRINGE_REAL_DATA")
    folder = Path(root) if root else Path(__file__).resolve().parents[2] / "shared" / "real-data"
    path = folder / relative
    if not path.exists():
        pytest.skip(f"real data: no {relative} in {folder}")
    return path
