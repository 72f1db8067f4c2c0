"""Student's t against a published table and a general library."""

import math
import tomllib
from pathlib import Path

import pytest

from metro.kernel.student import incomplete_beta, t_quantile, t_two_sided

TABLE = tomllib.loads(
    (Path(__file__).parents[2] / "published_values" / "student_t.toml").read_text()
)["entry"]


@pytest.mark.parametrize("entry", TABLE, ids=lambda e: f"p={e['p']} dof={e['dof']}")
def test_published_table(entry):
    assert t_quantile(entry["p"], entry["dof"]) == pytest.approx(entry["t"], abs=entry["tolerance"])


@pytest.mark.parametrize("dof", [0.3, 1, 1.5, 2, 3, 4.7, 16.74, 99, 1e3, 1e5, 1e7, math.inf])
@pytest.mark.parametrize("p", [0.01, 0.5, 0.6827, 0.95, 0.9545, 0.99, 0.9999])
def test_quantile_against_scipy(p, dof):
    stats = pytest.importorskip("scipy.stats")
    expected = stats.norm.ppf(0.5 + p / 2) if dof == math.inf else stats.t.ppf(0.5 + p / 2, dof)
    # 1e-9: lgamma of large arguments loses digits to cancellation; coverage factors need four
    assert t_quantile(p, dof) == pytest.approx(expected, rel=1e-9 if dof < 1e6 else 2e-7)


@pytest.mark.parametrize(("a", "b"), [(0.5, 0.5), (0.5, 8.37), (2, 3), (30, 0.5), (500, 500)])
@pytest.mark.parametrize("x", [0.0, 1e-9, 0.1, 0.5, 0.9, 1 - 1e-9, 1.0])
def test_incomplete_beta_against_scipy(x, a, b):
    special = pytest.importorskip("scipy.special")
    assert incomplete_beta(x, a, b) == pytest.approx(
        special.betainc(a, b, x), rel=1e-11, abs=1e-300
    )


def test_probability_and_quantile_are_inverse():
    for dof in (1, 3.3, 20, math.inf):
        assert t_two_sided(t_quantile(0.95, dof), dof) == pytest.approx(0.95, abs=1e-12)


@pytest.mark.parametrize(("p", "dof"), [(0, 3), (1, 3), (math.nan, 3), (0.95, 0), (0.95, math.nan)])
def test_refused(p, dof):
    with pytest.raises(ValueError, match="must be"):
        t_quantile(p, dof)
