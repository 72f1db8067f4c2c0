"""Strain, arms and antenna against published values and an independent contraction."""

import cmath
import math

import numpy as np
import pytest
import strategies as values
from hypothesis import given
from hypothesis import strategies as st
from published import close, published, records

from metro.kernel import strain
from metro.kernel.antenna import antenna_response, arm_direction_cosines, detector_response
from metro.kernel.arms import arm_response, null_frequency_hz
from metro.kernel.constants import SPEED_OF_LIGHT_M_S

angles = st.floats(-7.0, 7.0)


@published("strain", "gw.prop.0")
def test_exact_arm_and_what_first_order_leaves_out(record):
    h = record["inputs"]["h"]
    change = strain.exact_arm_change_m(h, 1.0)
    assert [change, 0.5 * h / change - 1] == close(record)
    assert strain.arm_excess(h) == pytest.approx(2 * change / h - 1, rel=1e-9)


def test_exact_arm_of_a_small_strain_keeps_its_digits():
    record = records("strain")["gw.prop.1e-6"]
    assert strain.exact_arm_change_m(1e-6, 1.0) == close(record)[0]
    assert strain.exact_arm_change_m(1e-21, 4000.0) == pytest.approx(2e-18, rel=1e-15)


def test_exact_differential():
    record = records("strain")["gw.prop.diff"]
    assert [strain.differential_excess(h) for h in (0.1, 0.01, 0.001)] == close(record)
    assert strain.exact_differential_m(0.1, 1.0) / 0.1 - 1 == close(record)[0]
    assert strain.differential_excess(1e-9) == pytest.approx(1e-18 / 8, rel=1e-12)


def test_exact_arm_under_a_sine():
    """Mean, fundamental and second harmonic of √(1+h sin ωt): an integral over one period."""
    record = records("strain")["gw.prop.sin"]
    turns = 2 * np.pi * np.arange(64) / 64
    length = np.array([1 + strain.exact_arm_change_m(0.1 * s, 1.0) for s in np.sin(turns)])
    second = 2 * np.mean(length * np.cos(2 * turns))
    found = [length.mean(), 2 * np.mean(length * np.sin(turns)), second]
    assert found == close(record)


@given(values.strain, values.arm_m)
def test_strain_is_the_inverse_of_the_differential(h, arm):
    assert strain.strain(strain.differential_m(h, arm), arm) == pytest.approx(h, rel=1e-15)
    exact = strain.exact_differential_m(h, arm)
    assert strain.strain_exact(exact, arm) == pytest.approx(h, rel=1e-14)


@given(st.floats(-1.0, 1.0), values.arm_m)
def test_arms_make_up_the_differential(h, arm):
    x, y = strain.exact_arm_change_m(h, arm), strain.exact_arm_change_m(-h, arm)
    assert x - y == pytest.approx(strain.exact_differential_m(h, arm), rel=1e-12, abs=1e-12 * arm)
    assert strain.arm_change_m(h, arm) == pytest.approx(0.5 * strain.differential_m(h, arm))


def test_one_arm_length_strain_is_another_quantity():
    assert strain.length_change_m(1e-6, 0.5) == 5e-7
    assert strain.length_strain(strain.arm_change_m(1e-21, 0.5), 0.5) == pytest.approx(5e-22)


@published("strain", "gw.D.")
def test_finite_arm(record):
    response = arm_response(float(record["inputs"]["f_Hz"]), float(record["inputs"]["L_m"]))
    assert [abs(response), cmath.phase(response)] == close(record)


def test_null_of_the_arm_at_normal_incidence_only():
    record = records("strain")["gw.null"]
    lengths = (4000.0, 3000.0, 1.0, 0.5)
    assert [null_frequency_hz(length) for length in lengths] == close(record)
    assert abs(arm_response(null_frequency_hz(4000.0), 4000.0)) < 1e-15
    assert abs(arm_response(null_frequency_hz(4000.0), 4000.0, 0.5)) > 0.1


@given(st.floats(0.0, 1e5), st.floats(-1.0, 1.0))
def test_arm_response_is_the_integral_along_the_ray(frequency, cosine):
    """∫ over the way out and back of exp(iω(t' − ax/c)), by Gauss–Legendre."""
    length = 4000.0
    nodes, weights = np.polynomial.legendre.leggauss(60)
    x = 0.5 * length * (nodes + 1)
    omega, c = 2 * np.pi * frequency, SPEED_OF_LIGHT_M_S
    out = np.exp(1j * omega * (-2 * length / c + x / c - cosine * x / c))
    back = np.exp(1j * omega * (-x / c - cosine * x / c))
    expected = 0.25 * np.sum(weights * (out + back))
    assert arm_response(frequency, length, cosine) == pytest.approx(expected, abs=1e-13)


@published("strain", "gw.F.0")
def test_antenna(record):
    given_angles = record["inputs"]
    theta, phi, psi = (math.radians(given_angles[k]) for k in ("theta_deg", "phi_deg", "psi_deg"))
    assert list(antenna_response(theta, phi, psi)) == close(record)


def test_antenna_averages_over_the_sky():
    record = records("strain")["gw.F.avg"]
    cosines, weights = np.polynomial.legendre.leggauss(12)
    azimuths = 2 * np.pi * np.arange(16) / 16
    both = np.array([[antenna_response(math.acos(c), a, 0.0) for a in azimuths] for c in cosines])
    squares = np.einsum("i,ijk->k", weights / 2, both**2) / 16
    assert [squares[0], squares[1], squares.sum()] == close(record)


def test_antenna_nulls_whatever_the_polarisation():
    for phi in (45, 135, 225, 315):
        for psi in (0.0, 0.4, 1.1):
            both = antenna_response(math.pi / 2, math.radians(phi), psi)
            assert both == pytest.approx((0.0, 0.0), abs=1e-15)


def test_opening_angle():
    record = records("strain")["gw.opening"]
    plus, _ = antenna_response(0.0, 0.0, 0.0, math.radians(60))
    assert plus == close(record)


@given(angles, angles, angles, st.floats(0.01, math.pi))
def test_antenna_is_the_contraction_of_the_arms(theta, phi, psi, opening):
    """½(u⊗u − v⊗v) contracted with the polarisation tensors of axes turned by ψ."""
    m = np.array(
        [math.cos(theta) * math.cos(phi), math.cos(theta) * math.sin(phi), -math.sin(theta)]
    )
    n = np.array([-math.sin(phi), math.cos(phi), 0.0])
    half = opening / 2
    u, v = (
        np.array([math.cos(a), math.sin(a), 0.0]) for a in (math.pi / 4 - half, math.pi / 4 + half)
    )
    detector = 0.5 * (np.outer(u, u) - np.outer(v, v))
    plus = np.einsum("ij,ij", detector, np.outer(m, m) - np.outer(n, n))
    cross = -np.einsum("ij,ij", detector, np.outer(m, n) + np.outer(n, m))
    c, s = math.cos(2 * psi), math.sin(2 * psi)
    found = antenna_response(theta, phi, psi, opening)
    # axes m (southwards) and n (eastwards); the published form turns them clockwise
    assert found == pytest.approx((plus * c - cross * s, plus * s + cross * c), abs=1e-12)
    slow = detector_response(0.0, 1.0, theta, phi, psi, opening)
    assert slow == pytest.approx(found, abs=1e-12)


@given(angles, angles)
def test_direction_cosines(theta, phi):
    x, y = arm_direction_cosines(theta, phi)
    propagation = -np.array([math.sin(theta) * math.cos(phi), math.sin(theta) * math.sin(phi)])
    assert (x, y) == pytest.approx(tuple(propagation), abs=1e-14)
