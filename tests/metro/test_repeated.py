"""Inputs observed together: GUM H.2 by both approaches, and coverage by simulation."""

import math
import tomllib
from pathlib import Path

import numpy as np
import pytest
from published import close, records

from metro.budget import BudgetError
from metro.propagation import propagate
from metro.repeated import Repeated

TOML = Path(__file__).parents[1] / "published_values" / "gum_h2.toml"
OBSERVED = tomllib.loads(TOML.read_text(encoding="utf-8"))["observations"]
MODELS = [
    lambda v, i, phi: v / i * np.cos(phi),
    lambda v, i, phi: v / i * np.sin(phi),
    lambda v, i, phi: v / i,
]


def test_gum_h2_means_and_correlations():
    inputs, correlations = Repeated(OBSERVED).inputs("set")
    assert [item.value for item in inputs] == close(records("gum_h2")["means"])
    assert [item.u for item in inputs] == close(records("gum_h2")["means.u"])
    matrix = np.array(correlations["set"])
    assert list(matrix[np.triu_indices(3, 1)]) == close(records("gum_h2")["correlations"])


def test_gum_h2_approach_1():
    inputs, correlations = Repeated(OBSERVED).inputs()
    results = [propagate(model, inputs, correlations, "ohm").measured for model in MODELS]
    assert [r.magnitude for r in results] == close(records("gum_h2")["results"])
    assert [r.u_magnitude for r in results] == close(records("gum_h2")["approach_1.u"])
    assert {r.dof for r in results} == {4}


def test_gum_h2_approach_2():
    results = [Repeated(OBSERVED).reduce(model, "ohm") for model in MODELS]
    assert [r.magnitude for r in results] == close(records("gum_h2")["results"])
    assert [r.u_magnitude for r in results] == close(records("gum_h2")["approach_2.u"])
    assert {r.dof for r in results} == {4}


def test_reduction_is_exact_for_a_linear_model():
    inputs, correlations = Repeated(OBSERVED).inputs()

    def model(v, i, phi):
        return 2 * v - 30 * i + 0.1 * phi

    one = propagate(model, inputs, correlations).measured
    two = Repeated(OBSERVED).reduce(model)
    assert one.magnitude == pytest.approx(two.magnitude, rel=1e-12)
    assert one.u_magnitude == pytest.approx(two.u_magnitude, rel=1e-9)


def test_coverage_with_correlated_inputs():
    """r = 0.9, four repetitions, 10 000 simulations of x + y.

    Reduced to one value a repetition the 95 % intervals cover; the naive formula (the right u, but
    degrees of freedom as if the inputs were independent) does not.
    """
    stats = pytest.importorskip("scipy.stats")
    rng = np.random.default_rng(20)
    trials, n, r = 10_000, 4, 0.9
    drawn = np.linalg.cholesky([[1, r], [r, 1]]) @ rng.standard_normal((trials, 2, n))
    reduced = [Repeated({"x": x, "y": y}).reduce(lambda x, y: x + y) for x, y in drawn.tolist()]
    inside = [abs(m.magnitude) < m.coverage_factor(0.95) * m.u_magnitude for m in reduced]
    assert 0.94 < np.mean(inside) < 0.96

    u = drawn.std(axis=2, ddof=1) / math.sqrt(n)
    combined = np.array([m.u_magnitude for m in reduced])
    dof = combined**4 / (u**4 / (n - 1)).sum(axis=1)
    naive = np.abs(drawn.mean(axis=2).sum(axis=1)) < stats.t.ppf(0.975, dof) * combined
    assert np.mean(naive) == pytest.approx(0.88, abs=0.01)


def test_a_group_in_a_budget_covers_too():
    rng = np.random.default_rng(21)
    trials, n, r = 1000, 4, 0.9
    drawn = np.linalg.cholesky([[1, r], [r, 1]]) @ rng.standard_normal((trials, 2, n))
    inside = 0
    for x, y in drawn.tolist():
        inputs, correlations = Repeated({"x": x, "y": y}).inputs()
        measured = propagate(lambda x, y: x + y, inputs, correlations).measured
        inside += abs(measured.magnitude) < measured.coverage_factor() * measured.u_magnitude
    assert inside / trials == pytest.approx(0.95, abs=0.021)  # three σ of the count


def test_a_constant_input_is_no_trouble():
    repeated = Repeated({"x": [1.0, 2.0, 3.0], "y": [5.0, 5.0, 5.0]})
    inputs, correlations = repeated.inputs()
    one = propagate(lambda x, y: x * y, inputs, correlations).measured
    assert one.u_magnitude == pytest.approx(5 / math.sqrt(3))
    assert repeated.reduce(lambda x, y: x * y).u_magnitude == pytest.approx(5 / math.sqrt(3))


@pytest.mark.parametrize(
    ("observations", "message"),
    [
        ({}, "inputs must be observed equally often, got none"),
        ({"a": [1, 2], "b": [1]}, "inputs must be observed equally often, got a: 2, b: 1"),
        ({"a": [1.0]}, "inputs must be observed at least twice, got 1"),
        ({"a": [1.0, math.nan]}, "observations of a must be finite"),
    ],
)
def test_refused(observations, message):
    with pytest.raises(BudgetError) as caught:
        Repeated(observations)
    assert str(caught.value) == message
