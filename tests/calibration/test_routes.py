"""Routes to metres: the same depth by independent ways, each within its own range."""

import math
import tomllib
from pathlib import Path

import numpy as np
import pytest
from scipy import special

from calibration.bessel_recurrence import recurrence_depth, signed_harmonics
from calibration.bessel_table import bessel_rows, bessel_table
from calibration.driven_fringe import fit_driven_fringe_si
from calibration.route import Agreement, Route, agreement_of
from calibration.routes import fringe_routes, ratio_depth
from calibration.ruler import ruler_of
from metro.measured import Measured

PUBLISHED = tomllib.loads(
    (Path(__file__).parents[1] / "published_values" / "driven_fringe.toml").read_text("utf-8")
)
RATE_HZ = 1000.0


def record(depths, frequencies, working, seed=0):
    rng = np.random.default_rng(seed)
    t = np.arange(12_000) / RATE_HZ
    phase = working + sum(
        m * np.cos(2 * np.pi * f * t + 0.4 * f) for m, f in zip(depths, frequencies, strict=True)
    )
    return 1.2 + np.cos(phase) + 0.01 * rng.normal(size=len(t))


def test_bessel_rows_against_scipy():
    depths = np.concatenate([np.linspace(0, 5, 23), [10.1, 77.7, 330.0]])
    rows = bessel_rows(depths, 60)
    expected = special.jv(np.arange(61)[None, :], depths[:, None])
    np.testing.assert_allclose(rows, expected, atol=1e-13)
    grid, table = bessel_table(12, 20)
    np.testing.assert_allclose(table, special.jv(np.arange(21)[None, :], grid[:, None]), atol=1e-13)


@pytest.mark.parametrize("order", [0, 1])
def test_bessel_nulls_as_tabulated(order):
    zeros = np.array(PUBLISHED["zeros"][f"j{order}"]["value"])
    np.testing.assert_allclose(bessel_rows(zeros, 1)[:, order], 0.0, atol=1e-12)
    assert special.jn_zeros(order, len(zeros)) == pytest.approx(zeros, abs=1e-12)


def test_minimum_points_of_iso_16063_11():
    # displacement at the nulls of J1 is j_{1,n}·λ/(4π): the ruler must give the table's nanometres
    table = PUBLISHED["minimum_points"]
    ruler = ruler_of(f"{table['wavelength_nm']} nm")
    nanometres = 1e9 * ruler.metres_per_rad * special.jn_zeros(1, len(table["value"]))
    assert nanometres == pytest.approx(table["value"], abs=table["tolerance"])
    assert nanometres[0] == pytest.approx(193.0, abs=0.1)


def test_a_line_at_the_first_null_of_j1_is_193_nm():
    # The first harmonic vanishes there; the driven fringe must not mind.
    null = PUBLISHED["zeros"]["j1"]["value"][0]
    volts = record([null], [31.0], 1.1)
    fit = fit_driven_fringe_si(volts, RATE_HZ, [31.0], ruler=ruler_of("632.81 nm"))
    assert fit.displacement_amplitude is not None
    assert float(fit.displacement_amplitude[0].magnitude) == pytest.approx(192.955e-9, rel=1e-3)


@pytest.mark.parametrize("case", PUBLISHED["j1_to_j4"])
def test_harmonic_ratio_identity(case):
    assert ratio_depth(*case["value"]) == pytest.approx(case["x"], rel=1e-9)


def test_routes_agree_where_they_are_valid():
    f = [31.0]
    volts = record([0.9], f, 0.95)
    fit = fit_driven_fringe_si(volts, RATE_HZ, f, low=0.2, high=2.2)
    routes = fringe_routes(volts, RATE_HZ, f, fit, ruler_of("632.99 nm"))
    assert [route.route for route in routes] == [
        "driven fringe",
        "mid-fringe slope",
        "harmonic ratios",
        "Bessel recurrences",
        "fringe counting",
    ]
    for route in routes[:3]:
        assert not route.reasons
        assert route.valid_range
        assert float(route.phase_amplitude[0].magnitude) == pytest.approx(0.9, rel=0.02)
        assert float(route.displacement_amplitude[0].magnitude) == pytest.approx(
            0.9 * 632.99e-9 / (4 * math.pi), rel=0.02
        )
    agreement = agreement_of(routes)
    assert agreement is not None
    assert agreement.agree
    assert agreement.compared == ("mid-fringe slope", "harmonic ratios")


@pytest.mark.slow
def test_slope_counts_the_other_lines():
    # Six lines at 0.2 rad lose 5.4 % (product of J0 and J1): a rule without Bessel functions is wrong.
    f = [31.0, 37.7, 44.1, 52.9, 61.3, 70.7]
    volts = record([0.2] * 6, f, math.pi / 2)
    fit = fit_driven_fringe_si(volts, RATE_HZ, f, low=0.2, high=2.2)
    slope = fringe_routes(volts, RATE_HZ, f, fit)[1]
    assert not slope.reasons
    for depth in slope.phase_amplitude:
        assert float(depth.magnitude) == pytest.approx(0.2, abs=5e-4)
    naive = special.jv(1, 0.2) * 2 * special.jv(0, 0.2) ** 5
    assert naive / 0.2 == pytest.approx(1 - 0.054, abs=1e-3)


@pytest.mark.slow
def test_slope_follows_the_clock():
    # 9 ppm over 60 s turn 233.9 Hz by 0.8 rad: a fit at the nominal frequency loses 2.5 %, and the
    # scatter of its blocks grows with the frequency
    f, off = [31.7, 233.9], 9e-6
    rng = np.random.default_rng(3)
    t = np.arange(60_000) / RATE_HZ
    phase = 1.7 + sum(0.2 * np.cos(2 * np.pi * g * (1 + off) * t + g) for g in f)
    volts = 1.2 + np.cos(phase) + 0.01 * rng.normal(size=len(t))
    fit = fit_driven_fringe_si(volts, RATE_HZ, f, low=0.2, high=2.2)
    assert float(fit.clock_offset.magnitude) == pytest.approx(off, rel=0.02)
    slope = fringe_routes(volts, RATE_HZ, f, fit)[1]
    assert not slope.reasons
    # √(2/N)·σ/sin φ0: the white-noise bound of an amplitude (S/T with one-sided S = 2σ²/rate)
    bound = math.sqrt(2 / len(t)) * 0.01 / math.sin(1.7)
    for depth in slope.phase_amplitude:
        assert abs(float(depth.magnitude) - 0.2) < 4 * float(depth.u_magnitude)
        assert 0.7 * bound < float(depth.u_magnitude) < 1.6 * bound


@pytest.mark.parametrize(
    ("depth", "working", "place", "words"),
    [
        (2.0, 0.8, 1, "1 rad is the limit"),
        (0.5, 0.4, 1, "off mid-fringe"),
        (9.0, 0.8, 2, "deeper than 3.8 rad"),
        (0.9, math.pi / 2, 2, "not all seen"),
    ],
)
def test_each_route_keeps_to_its_range(depth, working, place, words):
    volts = record([depth], [31.0], working)
    fit = fit_driven_fringe_si(volts, RATE_HZ, [31.0], low=0.2, high=2.2)
    route = fringe_routes(volts, RATE_HZ, [31.0], fit)[place]
    assert any(words in reason for reason in route.reasons), route


def test_agreement_needs_two_routes():
    one = Route("driven fringe", "", [Measured.of(1.0, "rad", 0.01)], None)
    two = Route("other", "", [Measured.of(1.1, "rad", 0.02)], None)
    bad = Route("third", "", [Measured.of(1.1, "rad", 0.02)], None, ["no"])
    assert agreement_of([one]) is None
    assert agreement_of([one, bad]) is None
    got = agreement_of([one, two, bad])
    # u² of the difference: 0.02² − 0.01² (Hausman 1978)
    assert got == Agreement(pytest.approx(0.1 / (2 * math.sqrt(3e-4))), False, ("other",))


@pytest.mark.slow
@pytest.mark.parametrize("depth", [2.7, 5.0, 31.0, 100 * math.pi])
def test_bessel_recurrences_cover(depth):
    # noise of 20 dB; pulls of mean 0 and width 1 within five standard errors
    pulls, rate, count = [], 1000.0, 8 if depth > 100 else 24
    for seed in range(count):
        rng = np.random.default_rng(seed)
        f = rate / (2.7 * (depth + 6))
        angle = 2 * np.pi * f * np.arange(20_000) / rate + rng.uniform(0, 6)
        volts = 2 + np.cos(rng.uniform(0.3, 2.8) + depth * np.cos(angle))
        volts += rng.normal(size=len(volts)) / np.sqrt(200)
        highest = min(math.ceil(depth) + 8, int(0.49 * rate / f))
        got, u, misfit = recurrence_depth(*signed_harmonics(volts, angle, highest))
        assert misfit < 12  # few harmonics: noise, too, is known from few
        pulls.append((got - depth) / u)
    assert abs(np.mean(pulls)) < 5 / math.sqrt(count)
    assert 0.4 < np.std(pulls) < 1.7


def test_recurrences_of_scipys_bessel_functions():
    for depth in (2.6, 11.0, 77.0):
        harmonics = special.jv(np.arange(math.ceil(depth) + 9), depth)
        got, _, misfit = recurrence_depth(harmonics, 1e-9)
        assert got == pytest.approx(depth, rel=1e-7)
        assert misfit < 1.0
    assert math.isnan(recurrence_depth(np.zeros(4), 1e-3)[0])


def test_deep_routes_keep_to_their_ranges():
    ruler = ruler_of("632.81 nm")
    for depth, words in ((0.9, "2.5 rad to 100π rad"), (4.0, "6.3 rad is the least")):
        volts = record([depth], [31.0], 1.1)
        fit = fit_driven_fringe_si(volts, RATE_HZ, [31.0], low=0.2, high=2.2)
        routes = {route.route: route for route in fringe_routes(volts, RATE_HZ, [31.0], fit, ruler)}
        reasons = routes["Bessel recurrences"].reasons + routes["fringe counting"].reasons
        assert any(words in reason for reason in reasons)
    volts = record([20.0], [7.0], 1.1)
    fit = fit_driven_fringe_si(volts, RATE_HZ, [7.0])
    routes = {route.route: route for route in fringe_routes(volts, RATE_HZ, [7.0], fit, ruler)}
    for name in ("Bessel recurrences", "fringe counting"):
        depth = routes[name].phase_amplitude[0]
        assert routes[name].reasons == []
        assert abs(float(depth.magnitude) - 20.0) < 4 * float(depth.u_magnitude)
    agreement = agreement_of(list(routes.values()))
    assert agreement is not None
    assert agreement.agree
