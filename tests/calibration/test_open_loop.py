"""The open-loop gain: read from tables, interpolated, and the free displacement it restores."""

import numpy as np
import pytest

from calibration.open_loop import OpenLoopError, load_open_loop
from calibration.term import budget_of

UNITY_HZ = 120.0


def integrator(at_hz):
    """A servo that integrates, with a delay of 100 µs: the formula by hand."""
    return UNITY_HZ / (1j * at_hz) * np.exp(-2j * np.pi * at_hz * 1e-4)


def written(
    path, header="frequency [Hz],magnitude,phase [deg],u_magnitude,u_phase [deg]", rows=None
):
    at_hz = np.geomspace(1.0, 2000.0, 400)
    gain = integrator(at_hz)
    if rows is None:
        rows = [
            (f, abs(g), np.degrees(np.angle(g)), 0.02 * abs(g), 1.0)
            for f, g in zip(at_hz, gain, strict=True)
        ]
    text = "\n".join(",".join(f"{v:.9g}" for v in row) for row in rows)
    path.write_text(f"{header}\n{text}\n", encoding="utf-8")
    return path


def test_gain_is_that_of_the_table(tmp_path):
    loop = load_open_loop(written(tmp_path / "loop.csv"))
    at_hz = np.array([1.0, 31.7, 87.1, 777.0, 2000.0])
    np.testing.assert_allclose(loop.gain(at_hz), integrator(at_hz), rtol=2e-4)
    np.testing.assert_allclose(loop.factor(at_hz), 1 + integrator(at_hz), rtol=3e-4)


def test_radians_and_kilohertz_are_understood(tmp_path):
    rows = [(0.01, 2.0, -1.5), (0.1, 0.2, -1.6)]
    loop = load_open_loop(
        written(tmp_path / "a.csv", "frequency [kHz],magnitude,phase [rad]", rows)
    )
    assert loop.gain(10.0)[0] == pytest.approx(2.0 * np.exp(-1.5j))
    assert loop.terms(10.0)[0].u == 0.0


@pytest.mark.parametrize(
    ("unit", "hertz"), [("mHz", 1e-3), ("Hz", 1.0), ("kHz", 1e3), ("MHz", 1e6)]
)
def test_millihertz_are_no_megahertz(tmp_path, unit, hertz):
    """SI Brochure, 9th edition (2019), table 7: m is 10⁻³, M is 10⁶."""
    rows = [(10, 5.0, -30), (100, 3.0, -60)]
    path = written(tmp_path / "a.csv", f"frequency [{unit}],magnitude,phase [deg]", rows)
    np.testing.assert_allclose(load_open_loop(path).frequency_hz, np.array([10, 100]) * hertz)


def test_what_the_table_does_not_say_counts_as_exact_and_is_told(tmp_path):
    rows = [(10, 5.0, -30, 0.1), (100, 3.0, -60, 0.1)]
    head = "frequency [Hz],magnitude,phase [deg],u_magnitude"
    half = load_open_loop(written(tmp_path / "half.csv", head, rows))
    assert half.cautions == [
        "the open-loop gain counts as exact in phase: the table has no u_phase"
    ]
    bare = load_open_loop(
        written(tmp_path / "bare.csv", head.removesuffix(",u_magnitude"), [r[:3] for r in rows])
    )
    (told,) = bare.cautions
    assert told.endswith("exact in magnitude and phase: the table has no u_magnitude, u_phase")
    assert load_open_loop(written(tmp_path / "whole.csv")).cautions == []


def test_its_uncertainty_enters_as_a_monte_carlo_says(tmp_path):
    """20000 draws of the gain: u of |1 + G| and of its phase to 3 % (deviation 0.5 %)."""
    loop = load_open_loop(written(tmp_path / "loop.csv"))
    rng = np.random.default_rng(4)
    for at_hz in (60.0, 120.0, 400.0):
        size, turn = budget_of(loop.terms(at_hz), 1.0, "1")
        gain = integrator(np.array([at_hz]))
        drawn = gain * (1 + 0.02 * rng.normal(size=20000))
        drawn = 1 + drawn * np.exp(1j * np.radians(1.0) * rng.normal(size=20000))
        logarithm = np.log(drawn / (1 + gain))
        assert size.combined()[0] == pytest.approx(logarithm.real.std(), rel=0.03)
        assert turn.combined()[0] == pytest.approx(logarithm.imag.std(), rel=0.03)


@pytest.mark.parametrize(
    ("header", "rows", "message"),
    [
        (
            "frequency,gain,phase [deg]",
            [(1, 2, 3), (2, 2, 3)],
            (
                "an open-loop gain has the columns frequency, magnitude, phase [deg or rad], got none "
                "named 'magnitude'"
            ),
        ),
        (
            "frequency,magnitude,phase [V]",
            [(1, 2, 3), (2, 2, 3)],
            "column 'phase' must have [rad] or [deg], got [V]",
        ),
        (
            "frequency,magnitude,phase [deg]",
            [(1, 2, 3), (2, -2, 3)],
            "magnitude must be > 0, got -2",
        ),
        ("frequency,magnitude,phase [deg]", [(2, 2, 3), (1, 2, 3)], "must ascend, got 1 Hz"),
        (
            "frequency,magnitude,phase [deg]",
            [(1, 2, np.nan), (2, 2, 3)],
            "row 1: phase must be finite, got nan",
        ),
        (
            "frequency,magnitude,phase [deg]",
            [(1, 2, 3), (np.inf, 2, 3)],
            "row 2: frequency must be finite, got inf",
        ),
        (
            "frequency,magnitude,phase [deg],u_magnitude",
            [(1, 2, 3, 0.1), (2, 2, 3, np.inf)],
            "row 2: u_magnitude must be finite, got inf",
        ),
        (
            "frequency [s],magnitude,phase [deg]",
            [(1, 2, 3), (2, 2, 3)],
            "column 'frequency' must have [mHz], [Hz], [kHz] or [MHz], got [s]",
        ),
        (
            "frequency,magnitude,phase [deg],u_phase [deg]",
            [(1, 2, 3, 1), (2, 2, 3, -1)],
            "u_phase must be ≥ 0, got -0.0174533",
        ),
    ],
)
def test_a_table_that_breaks_a_rule_is_refused(tmp_path, header, rows, message):
    path = written(tmp_path / "loop.csv", header, rows)
    with pytest.raises(OpenLoopError) as error:
        load_open_loop(path)
    assert str(error.value).startswith(str(path))
    assert message in str(error.value)
    assert "\n" not in str(error.value)


def test_outside_the_table_it_refuses(tmp_path):
    path = written(tmp_path / "loop.csv")
    with pytest.raises(OpenLoopError) as error:
        load_open_loop(path).gain(5000.0)
    assert str(error.value) == (
        f"{path} gives the open-loop gain from 1 Hz to 2000 Hz, asked for 5000 Hz"
    )
    with pytest.raises(OpenLoopError, match="No such file"):
        load_open_loop(tmp_path / "none.csv")


def test_a_ringing_servo_is_distrusted(tmp_path):
    rows = [(10, 1.02, -180), (100, 0.98, -180)]
    loop = load_open_loop(
        written(tmp_path / "ring.csv", "frequency [Hz],magnitude,phase [deg]", rows)
    )
    assert loop.reasons(31.7)[0].startswith("the servo rings there: |1 + G| is ")


def test_a_band_in_which_the_servo_rings_is_distrusted(tmp_path):
    """G = −1 between two rows, by hand: 0.5 and 2 at −180° are 1 at the geometric mean, 40 Hz."""
    rows = [(10, 0.5, -180), (160, 2.0, -180)]
    loop = load_open_loop(
        written(tmp_path / "ring.csv", "frequency [Hz],magnitude,phase [deg]", rows)
    )
    (reason,) = loop.band_reasons(10.0, 160.0)
    assert reason.startswith("the servo rings at ")
    assert float(reason.split()[4]) == pytest.approx(40.0, rel=0.02)
    assert loop.band_reasons(10.0, 20.0) == []
