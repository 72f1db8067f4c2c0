"""Quadrature: the ellipse against a published model, phase and periodic error against the truth."""

import math

import numpy as np
import pytest
from published import close, records

from calibration.ellipse import Ellipse, conic_of, ellipse_of_conic, fit_ellipse
from calibration.errors import CalibrationError
from calibration.quadrature import quadrature_phase
from calibration.quadrature_reading import read_quadrature
from calibration.ruler import ruler_of
from firmware_bridge.trace import Trace

TABLE = records("quadrature")


ANGLE = math.radians(5.0)


def signals(phase, p=0.1, q=-0.2, r=1.15, alpha=ANGLE, radius=1.0):
    """Return the two signals after Heydemann's model."""
    x = radius * np.cos(phase) + p
    y = (
        radius * np.sin(phase) * math.cos(alpha) - radius * np.cos(phase) * math.sin(alpha)
    ) / r + q
    return x, y


def example():
    return signals(np.radians(7 + 30 * np.arange(12)))


def test_heydemanns_model_as_tabulated():
    x, y = example()
    assert [x[0], y[0]] == close(TABLE["heyd.ex.p0"])
    assert conic_of(x, y).tolist() == close(TABLE["heyd.ex.conic"])


@pytest.mark.parametrize(
    "way",
    [lambda x, y: ellipse_of_conic(conic_of(x, y)), lambda x, y: fit_ellipse(x, y).parameters],
)
def test_ellipse_of_the_example_to_1e_12(way):
    radius, p, q, r, alpha = TABLE["heyd.ex.true"]["value"]
    expected = [p, q, r, math.radians(alpha), radius]
    assert way(*example()).tolist() == pytest.approx(expected, abs=1e-12)


def test_uncorrected_errors_as_tabulated():
    flawed = [(0.01, 1.0, 0.0), (0.0, 1.01, 0.0), (0.0, 1.0, math.radians(1.0))]
    found = [Ellipse(p, 0.0, r, a, 1.0, np.eye(5)).periodic_error_rad() for p, r, a in flawed]
    assert found == close(TABLE["heyd.err"])


def test_pulls_of_the_ellipse_have_mean_0_and_width_1():
    rng = np.random.default_rng(0)
    pulls = []
    for start in range(200):
        x, y = signals(np.linspace(0, 15, 1000) + start)
        got = fit_ellipse(x + 0.02 * rng.normal(size=1000), y + 0.02 * rng.normal(size=1000))
        u = np.sqrt(np.diag(got.covariance))
        pulls.append((got.parameters - [0.1, -0.2, 1.15, math.radians(5.0), 1.0]) / u)
    # five standard errors of a mean and of a width over 200
    assert np.abs(np.mean(pulls, axis=0)).max() < 5 / math.sqrt(200)
    assert np.abs(np.std(pulls, axis=0) - 1).max() < 5 / math.sqrt(400)


def test_phase_is_unwrapped_with_its_sign_over_gaps():
    time = np.arange(4000) / 1000.0
    phase = 9.0 * np.sin(2 * np.pi * 1.7 * time) - 30.0 * time
    x, y = signals(phase)
    x[500:505] = np.nan
    got = quadrature_phase(x, y)
    error = got.phase_rad - phase
    assert np.nanmax(error) - np.nanmin(error) < 1e-9
    assert np.isnan(got.phase_rad[500:505]).all()
    assert not got.reasons


def test_a_step_near_pi_is_refused():
    phase = 2.9 * np.arange(2000)
    got = quadrature_phase(*signals(phase))
    assert got.largest_step_rad == pytest.approx(2.9, abs=1e-9)
    assert any("ambiguous at π" in reason for reason in got.reasons)


def test_a_clipped_detector_is_named():
    x, y = signals(np.linspace(0, 60, 5000))
    got = quadrature_phase(np.minimum(x, 0.9), y)
    assert any("clipped" in reason for reason in got.reasons)


def test_an_arc_is_not_enough():
    rng = np.random.default_rng(1)
    x, y = signals(np.linspace(0, 2.5, 3000))
    got = quadrature_phase(x + 0.001 * rng.normal(size=3000), y + 0.001 * rng.normal(size=3000))
    assert any("arc" in reason for reason in got.reasons)
    with pytest.raises(CalibrationError, match="does not change"):
        quadrature_phase(np.ones(100), np.arange(100.0))


def test_periodic_error_left_is_that_of_the_third_harmonic():
    phase = np.linspace(0, 200, 20_000)
    x, y = signals(phase)
    got = quadrature_phase(x + 0.004 * np.cos(3 * phase), y)
    # cos 3φ in one signal: ±0.002 at orders 2 and 4 of the radius; the ellipse takes up order 2
    assert got.periodic_error_rad == pytest.approx(0.002, rel=0.3)


def test_sine_approximation_of_iso_16063_11_in_metres():
    rate, time = 2000.0, np.arange(10_000) / 2000.0
    rng = np.random.default_rng(2)
    x, y = signals(5.0 * np.cos(2 * np.pi * 31.0 * time + 0.7) + 3.0 * time)
    x, y = (part + 0.005 * rng.normal(size=len(time)) for part in (x, y))
    traces = [Trace(name, "V", part, rate) for name, part in (("x", x), ("y", y))]
    got = read_quadrature(*traces, [31.0], ruler=ruler_of("632.81 nm"))
    depth = got.depths[0]
    assert abs(float(depth.magnitude) - 5.0) < 4 * float(depth.u_magnitude)
    # s = λ φ_M/(4π), ISO 16063-11:1999, clause 9 (from memory)
    metres = got.to_dict()["displacement_amplitude"][0]
    assert float(metres.magnitude) == pytest.approx(632.81e-9 * 5.0 / (4 * math.pi), rel=1e-3)
    assert not got.reasons
