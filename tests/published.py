"""Check values from ``tests/published_values``, each with its source and tolerance."""

import tomllib
from functools import cache
from pathlib import Path

import pytest

__all__ = ["close", "published", "records"]

_FOLDER = Path(__file__).parent / "published_values"


@cache
def records(name):
    """Return the records of one file by their id."""
    text = (_FOLDER / f"{name}.toml").read_text(encoding="utf-8")
    return {record["id"]: record for record in tomllib.loads(text)["value"]}


def published(name, prefix):
    """Return a parametrisation over the records whose id begins so."""
    found = [r for key, r in records(name).items() if key.startswith(prefix)]
    assert found, f"no record {prefix}* in {name}.toml"
    return pytest.mark.parametrize("record", found, ids=lambda r: r["id"])


def close(record):
    """Return what a computed value must equal, to the record's tolerance."""
    value, tolerance = record["value"], record["tolerance"]
    if not isinstance(value, list):
        return pytest.approx(value, abs=tolerance, rel=0)
    tolerances = tolerance if isinstance(tolerance, list) else [tolerance] * len(value)
    return [pytest.approx(v, abs=t, rel=0) for v, t in zip(value, tolerances, strict=True)]
