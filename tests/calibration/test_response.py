"""The actuator against frequency: models made by the formula come back with u that covers."""

import numpy as np
import pytest
from scipy.stats import chi2

from calibration.response import ActuatorResponse, ResponseRangeError
from calibration.response_fit import fit_response, response_cautions

LOW = np.array([31.7, 87.1, 141.3, 233.9])
WIDE = np.array([20.0, 47.0, 110.0, 260.0, 610.0, 1100.0, 1500.0, 1750.0, 1950.0, 2600.0, 3300.0])


def truth(at_hz, *, gain=33e-9, delay=3e-5, loss=0.0, modes=((1800.0, 20.0, 1.0),)):
    """The formula in complex numbers, written down a second time."""
    total = sum(a / (1 - (at_hz / f) ** 2 + 1j * at_hz / (f * q)) for f, q, a in modes)
    reference = np.exp(np.mean(np.log(WIDE)))
    return gain * (1j * at_hz / reference) ** -loss * np.exp(-2j * np.pi * at_hz * delay) * total


def covariance(n, own, common):
    """Independent u of each magnitude and phase, and a common relative one of all magnitudes."""
    matrix = own**2 * np.eye(2 * n)
    matrix[:n, :n] += common**2
    return matrix


def drawn(at_hz, rng, own=1e-3, common=2e-3, **model):
    n = at_hz.size
    matrix = covariance(n, own, common)
    error = np.linalg.cholesky(matrix) @ rng.normal(size=2 * n)
    return truth(at_hz, **model) * np.exp(error[:n] + 1j * error[n:]), matrix


def test_without_noise_the_formula_comes_back():
    exact = truth(WIDE, loss=0.02)
    found = fit_response(WIDE, exact, covariance(WIDE.size, 1e-4, 0.0))
    assert (found.shape.loss, found.shape.resonances, found.shape.damped) == (True, 1, True)
    assert found.gain.magnitude == pytest.approx(33e-9, rel=1e-6)
    assert found.delay.magnitude == pytest.approx(3e-5, rel=1e-5)
    assert found.loss.magnitude == pytest.approx(0.02, rel=1e-5)
    assert found.resonances()[0]["frequency"].magnitude == pytest.approx(1800.0, rel=1e-7)
    assert found.resonances()[0]["q"].magnitude == pytest.approx(20.0, rel=1e-5)
    between = np.array([33.0, 500.0, 1790.0, 3000.0])
    np.testing.assert_allclose(found.at(between), truth(between, loss=0.02), rtol=1e-5)
    assert found.chi_square < 1e-3


def test_two_resonances_are_found():
    modes = ((900.0, 30.0, 1.0), (2300.0, 15.0, 0.3))
    found = fit_response(WIDE, truth(WIDE, modes=modes), covariance(WIDE.size, 1e-4, 0.0))
    assert found.shape.resonances == 2
    frequencies = [r["frequency"].magnitude for r in found.resonances()]
    assert frequencies == pytest.approx([900.0, 2300.0], rel=1e-4)
    assert found.resonances()[1]["share"].magnitude == pytest.approx(0.3, rel=1e-3)


def test_a_negative_gain_is_a_sign_and_no_delay():
    found = fit_response(LOW, truth(LOW, gain=-33e-9), covariance(4, 1e-4, 0.0))
    assert found.sign == -1.0
    assert found.gain.magnitude == pytest.approx(-33e-9, rel=1e-3)


def test_well_below_the_resonance_delay_and_damping_are_not_told_apart():
    """Both lag in proportion to frequency: the order keeps one of them."""
    found = fit_response(LOW, truth(LOW), covariance(4, 1e-3, 2e-3))
    assert (found.shape.resonances, found.shape.damped) == (1, False)
    assert found.resonances()[0]["q"] is None


@pytest.mark.slow
@pytest.mark.parametrize(
    ("at_hz", "model"),
    [
        (LOW, {}),
        (LOW, {"modes": ((8000.0, 20.0, 1.0),)}),  # hardly to be seen
        (WIDE, {"loss": 0.01}),
        (WIDE, {}),
    ],
)
def test_interpolation_covers_and_chi_square_is_one(at_hz, model):
    """200 draws. Coverage within 4.5 % of 95 %: 2.9 standard deviations (1.54 %); chi-square over its
    degrees of freedom within 4 standard deviations of its mean.
    """
    rng, draws = np.random.default_rng(8), 200
    between = np.exp(np.linspace(np.log(at_hz[0]), np.log(at_hz[-1]), 7))[1:-1]
    exact = truth(between, **model)
    inside, squares = [], []
    for _ in range(draws):
        response, matrix = drawn(at_hz, rng, **model)
        found = fit_response(at_hz, response, matrix)
        relative, turn = found.u_at(between)
        away = np.log(found.at(between) / exact)
        inside.append([np.abs(away.real) < 1.96 * relative, np.abs(away.imag) < 1.96 * turn])
        squares.append(chi2.cdf(found.chi_square, found.dof))
    cover = np.mean(inside, axis=0)
    assert cover.min() > 0.905, cover
    assert np.mean(cover) < 0.985
    assert 0.35 < np.mean(squares) < 0.6  # uniform about 0.5; choosing the order takes some off


@pytest.mark.slow
def test_draws_lie_where_their_u_says():
    """12 draws between four lines: rms of the normalised errors within 3 of its deviations."""
    rng, between = np.random.default_rng(8), np.array([50.0, 110.0, 190.0])
    pulls = []
    for _ in range(12):
        response, matrix = drawn(LOW, rng)
        found = fit_response(LOW, response, matrix)
        away = np.log(found.at(between) / truth(between))
        relative, turn = found.u_at(between)
        pulls += [*(away.real / relative), *(away.imag / turn)]
    assert 0.5 < np.sqrt(np.mean(np.square(pulls))) < 1.5


def test_common_terms_are_no_residual():
    """2 % common to all magnitudes moves the gain, not chi-square."""
    rng = np.random.default_rng(2)
    response, matrix = drawn(WIDE, rng, own=1e-3, common=0.02)
    found = fit_response(WIDE, response, matrix)
    assert found.chi_square < chi2.isf(1e-4, found.dof)
    assert found.gain.relative_u == pytest.approx(0.02, rel=0.1)


def test_a_model_that_the_lines_contradict_says_so_and_widens_its_u():
    comb = truth(WIDE) * np.where(np.arange(WIDE.size) % 2, 1.05, 0.95)
    found = fit_response(WIDE, comb, covariance(WIDE.size, 1e-3, 0.0))
    told = response_cautions(found, WIDE.size)
    assert len(told) == 1
    assert "does not describe the lines: chi-square" in told[0]
    assert float(found.u_at(300.0)[0][0]) > 0.01


def test_too_few_lines_are_not_fitted_and_it_says_so():
    assert fit_response(LOW[:2], truth(LOW[:2]), covariance(2, 1e-3, 0.0)) is None
    assert response_cautions(None, 2) == [
        (
            "the actuator's response between the lines was not fitted: it needs at least 3 trusted "
            "lines with phases, got 2"
        )
    ]


def test_outside_the_lines_it_refuses():
    found = fit_response(LOW, truth(LOW), covariance(4, 1e-3, 0.0))
    with pytest.raises(ResponseRangeError) as error:
        found.at(300.0)
    assert str(error.value) == (
        "the actuator's response is known from 31.7 Hz to 233.9 Hz, between the lines, got 300 Hz"
    )


def test_it_comes_back_from_its_json_form():
    from metro.output import plain

    found = fit_response(WIDE, truth(WIDE, loss=0.02), covariance(WIDE.size, 1e-3, 1e-3))
    again = ActuatorResponse.from_dict(plain(found.to_dict()))
    assert plain(again.to_dict()) == plain(found.to_dict())
    np.testing.assert_array_equal(again.at(WIDE), found.at(WIDE))
    np.testing.assert_array_equal(again.u_at(WIDE), found.u_at(WIDE))
