"""Linear propagation against the library's own, GUM H.1, and hand-made derivatives."""

import math
import tomllib
from pathlib import Path

import numpy as np
import pytest
from uncertainties import correlated_values, ufloat, umath

from metro.model_input import Input
from metro.propagation import propagate, sensitivities

GUM = tomllib.loads(
    (Path(__file__).parents[1] / "published_values" / "gum_h1.toml").read_text(encoding="utf-8")
)


def test_gum_h1_from_its_model():
    """JCGM 100:2008, H.1: l = l_S + d − l_S(δα·θ + α_S·δθ), inputs of table H.1."""
    u = {c["name"]: (c["u"], c["dof"]) for c in GUM["contribution"]}

    def item(name, value, u, dof=math.inf):
        return Input(name, value, u, dof=dof)

    inputs = [
        item("l_S", 50.000623e-3, *u["length of the standard"]),
        item("d", 215e-9, *u["repeated observations"]),
        item("d1", 0.0, *u["comparator, random"]),
        item("d2", 0.0, *u["comparator, systematic"]),
        item("delta alpha", 0.0, *u["difference of expansion coefficients"]),
        item("theta", -0.1, 0.41),
        item("alpha_S", 11.5e-6, 1.2e-6),
        item("delta theta", 0.0, *u["difference of temperatures"]),
    ]

    def length(standard, d, d1, d2, delta_alpha, theta, alpha, delta_theta):
        return standard + d + d1 + d2 - standard * (delta_alpha * theta + alpha * delta_theta)

    found = propagate(length, inputs, unit="m")
    expected = GUM["expected"]
    assert found.value * 1e3 == pytest.approx(expected["length_mm"], abs=5e-7)
    assert found.measured.u_magnitude * 1e9 == pytest.approx(31.66, abs=0.01)
    wanted = expected["effective_dof"]
    assert found.measured.dof == pytest.approx(wanted["value"], abs=wanted["tolerance"])
    effects = {c.name: c.effect for c in found.budget.contributions}
    assert effects["theta"] == effects["alpha_S"] == 0.0  # of second order only
    assert abs(effects["delta theta"]) == pytest.approx(16.6e-9, abs=0.05e-9)
    assert abs(effects["delta alpha"]) == pytest.approx(2.9e-9, abs=0.05e-9)


def test_against_the_library_with_correlations():
    """The combined u equals that of uncertainties' own correlated values."""
    rng = np.random.default_rng(3)
    u, values = np.array([0.1, 0.02, 0.3]), np.array([1.0, 2.0, 3.0])
    mixing = rng.normal(size=(3, 3))
    covariance = mixing @ mixing.T
    r = covariance / np.sqrt(np.outer(np.diag(covariance), np.diag(covariance)))

    def model(a, b, c):
        return a * umath.sin(b) / c + b**2

    theirs = model(*correlated_values(values, r * np.outer(u, u)))
    inputs = [Input(n, v, s, group="g") for n, v, s in zip("abc", values, u, strict=True)]
    ours = propagate(model, inputs, {"g": r.tolist()}).measured
    assert ours.magnitude == pytest.approx(theirs.nominal_value, rel=1e-12)
    assert ours.u_magnitude == pytest.approx(theirs.std_dev, rel=1e-9)


def test_numerical_derivatives_agree_with_exact_ones():
    inputs = [Input("x", 0.7, 0.01), Input("y", 1e-9, 1e-12), Input("z", 3.0, 0.0)]

    def exact(x, y, z):
        return umath.sin(x) * umath.exp(1e9 * y) + z * x

    def plain(x, y, z):
        return np.sin(x) * np.exp(1e9 * y) + z * x

    value, slopes = sensitivities(exact, inputs)
    numerical, found = sensitivities(plain, inputs)
    assert numerical == pytest.approx(value, rel=1e-14)
    assert found == pytest.approx(slopes, rel=1e-8)


def test_a_model_that_ignores_its_inputs():
    assert sensitivities(lambda _x: 4.0, [Input("x", 1.0, 0.1)]) == (4.0, (0.0,))
    assert sensitivities(lambda x: x - x, [Input("x", 1.0, 0.1)])[1] == (0.0,)


def test_the_same_input_twice_is_fully_correlated():
    found = propagate(lambda x: x * x, [Input("x", 3.0, 0.1)]).measured
    assert found.u_magnitude == pytest.approx((ufloat(3.0, 0.1) ** 2).std_dev)
