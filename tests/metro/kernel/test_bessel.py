"""Bessel functions against a published table and a general library."""

import math

import pytest
from published import close, published, records

from metro.kernel.bessel import bessel, bessels, jinc


@published("bessel", "j14.x")
def test_published_harmonics(record):
    x = record["inputs"]["x"]
    assert [bessel(n, x) for n in range(1, 5)] == close(record)


@pytest.mark.parametrize(("order", "key"), [(0, "iso.zeros.j0"), (1, "iso.zeros.j1")])
def test_published_zeros(order, key):
    for zero in records("bessel")[key]["value"]:
        # the printed zero is good to 5e-14 and the slope there is below 0.55
        assert bessel(order, zero) == pytest.approx(0.0, abs=5e-14)


@pytest.mark.parametrize(("order", "key"), [(0, "iso.m2.j0"), (1, "iso.m2.j1")])
def test_displacements_of_the_minimum_point_method(order, key):
    """ISO 16063-11 method 2: the displacements at which the line's Bessel function vanishes."""
    for nanometres in records("bessel")[key]["value"]:
        depth = 4 * math.pi * nanometres / 632.81
        # printed to 0.01 nm, which is 2e-4 rad
        assert bessel(order, depth) == pytest.approx(0.0, abs=2e-4 * 0.6)


@pytest.mark.parametrize("order", [0, 1, 2, 3, 7, 20])
@pytest.mark.parametrize(
    "x", [0.0, 1e-300, 1e-9, 0.01, 1.0, 1.9999999, 2.0, 3.83, 50.0, 314.159, 1000.0]
)
def test_against_scipy(order, x):
    special = pytest.importorskip("scipy.special")
    assert bessel(order, x) == pytest.approx(special.jv(order, x), abs=2e-15, rel=1e-13)
    assert bessel(order, -x) == pytest.approx(special.jv(order, -x), abs=2e-15, rel=1e-13)


@pytest.mark.parametrize("x", [0.3, 2.5, 17.0, 250.0])
def test_power_is_conserved(x):
    """Abramowitz and Stegun 9.1.76: J0² + 2ΣJn² = 1."""
    values = bessels(400, x)
    assert values[0] ** 2 + 2 * sum(v * v for v in values[1:]) == pytest.approx(1.0, abs=1e-14)


def test_identity_of_four_harmonics():
    """Sudarshanam and Srinivasan, Opt. Lett. 14 (1989) 140 (from memory): x² = 24·J2J3/…"""
    for x in (0.1, 1.0, 3.5):
        j = bessels(4, x)
        assert 24 * j[2] * j[3] / ((j[1] + j[3]) * (j[2] + j[4])) == pytest.approx(x * x, rel=1e-12)


def test_small_signal_limit():
    assert jinc(0.0) == 1.0
    assert jinc(1e-9) == 1.0
    assert jinc(0.2) == pytest.approx(1 - 0.2**2 / 8 + 0.2**4 / 192, abs=1e-8)


def test_first_zeros_of_the_harmonics():
    """Where a spectrum analyser's magnitudes J1 … J4 lose their sign."""
    for order, zero in enumerate(records("bessel")["j14.range"]["value"], 1):
        # printed to 5e-9; the slopes are below 0.4
        assert bessel(order, zero) == pytest.approx(0.0, abs=2e-9 * 2)
