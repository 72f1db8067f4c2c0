"""Whether a line agrees with a calibration: what is shared, what is not, and sessions with a known truth."""

from dataclasses import replace

import numpy as np
import pytest
from ledgers import result, sample_calibration
from sessions import built_in_bench, play

from calibration.analysis import calibrate
from calibration.desk.agreement import agreement
from calibration.desk.ledger_errors import LedgerError
from calibration.desk.measured_lines import Measuring, entries_of_recording
from calibration.desk.temperature_law import TemperatureLaw
from firmware_bridge.opening import open_recording
from metro.measured import Measured


@pytest.fixture
def calibration(tmp_path):
    return sample_calibration(tmp_path).calibration


def expected_ratio(calibration):
    """Return metres per volt read at 87.1 Hz: the probe divides by ten, the amplifier's corner is 5 kHz."""
    actuator = calibration.actuator[1]
    assert actuator.frequency.magnitude == 87.1
    return actuator.magnitude.magnitude * 10.0 / np.hypot(1.0, 87.1 / 5000.0)


def test_metres_per_volt_read_are_compared(calibration):
    expected = expected_ratio(calibration)
    found = agreement(result(expected, u=expected * 1e-4), calibration)
    assert found.is_agreed
    assert found.expected.magnitude == pytest.approx(expected, rel=1e-12)
    assert found.relative_difference == pytest.approx(0.0, abs=1e-12)
    assert (
        found.expected.u_magnitude < 0.5 * expected * calibration.actuator[1].magnitude.relative_u
    )


def test_volts_per_volt_are_compared_at_mid_fringe(calibration):
    expected = expected_ratio(calibration) * calibration.readout_slope.magnitude
    found = agreement(result(expected, u=expected * 1e-4, unit="1"), calibration)
    assert found.is_agreed
    assert "volts per volt agree at mid-fringe only" in found.cautions[0]


def test_a_line_that_has_moved_does_not_agree(calibration):
    expected = expected_ratio(calibration)
    found = agreement(result(expected * 1.01, u=expected * 1e-4), calibration)
    assert not found.is_agreed
    assert found.normalised_error > 2
    (reason,) = found.reasons
    assert reason.startswith(
        "the line at 87.1 Hz differs from the calibration of 2026-12-01T13:59:50+00:00 by +1 %, "
    )


def test_the_difference_of_temperature_is_corrected_with_its_u(calibration):
    """Calibrated at 294.45 K, u 0.3 K; a coefficient of 0.2 %/K, u 0.02 %/K; 5 K warmer today."""
    expected = expected_ratio(calibration)
    warm = result(expected * (1 + 0.002 * 5), u=expected * 1e-5, temperature_k=299.45)
    assert not agreement(warm, calibration).is_agreed
    assert (
        "+5 K from the calibration, not corrected for" in agreement(warm, calibration).cautions[0]
    )
    found = agreement(warm, calibration, TemperatureLaw(0.002, 0.0002, is_used=True))
    assert found.is_agreed
    assert found.measured.magnitude == pytest.approx(expected, rel=1e-6)
    wanted = expected * np.sqrt((0.0002 * 5) ** 2 + (0.002 * 0.3) ** 2 + 1e-10)
    assert found.measured.u_magnitude == pytest.approx(wanted, rel=1e-3)


def test_a_distrusted_result_agrees_with_nothing(calibration):
    found = agreement(
        result(expected_ratio(calibration), u=1e-12, reasons=("clipped",)), calibration
    )
    assert found.reasons == ["the result is not to be trusted: clipped"]


def test_what_cannot_be_compared_is_refused(calibration):
    with pytest.raises(LedgerError, match="no ratio to the drive"):
        agreement(replace(result(1.0), is_ratio=False), calibration)
    with pytest.raises(LedgerError, match=r"volts per volt or metres per volt .*, got rad/V"):
        agreement(result(1.0, unit="rad/V"), calibration)
    with pytest.raises(LedgerError, match=r"no line at 50 Hz; it has those at 31\.7 Hz, 87\.1 Hz"):
        agreement(replace(result(1.0), line_hz=50.0), calibration)
    stated = replace(calibration.actuator[1], phase=None)
    bare = replace(calibration, actuator=[stated])
    with pytest.raises(
        LedgerError, match="rests on the drive's setting, the result on its reading"
    ):
        agreement(result(1.0), bare)


def expected_phase(calibration):
    """Return the phase read at 87.1 Hz: behind by the amplifier's pole and the drive's later reading."""
    kept = calibration.actuator[1].phase.magnitude
    return kept - np.arctan(87.1 / 5000.0) - 2 * np.pi * 87.1 * 12e-6


def with_polarity(calibration):
    return replace(calibration, chain={**calibration.chain, "polarity": Measured.of(1.0, "1")})


@pytest.mark.parametrize("turned", [0.0, np.pi, 0.05, np.pi - 0.05])
def test_phases_are_compared_with_the_declared_polarity(calibration, turned):
    ratio, phase = expected_ratio(calibration), expected_phase(calibration)
    line = result(ratio, u=ratio * 1e-4, phase=Measured.of(phase + turned, "rad", 1e-4, 60.0))
    found = agreement(line, with_polarity(calibration))
    assert found.phase.difference.magnitude == pytest.approx(
        np.angle(np.exp(1j * turned)), abs=1e-9
    )
    assert found.is_agreed == (turned == 0.0)
    assert found.cautions == []
    if turned:
        (reason,) = found.reasons
        assert reason.startswith(
            "the phase of the line at 87.1 Hz differs from the calibration of "
        )
        assert ("half a turn: is it the other slope" in reason) == (turned > 3)
    undeclared = agreement(line, calibration)
    assert undeclared.is_agreed == (turned in (0.0, np.pi))
    assert undeclared.cautions[0].startswith("the phase is compared modulo half a turn: the calibr")


def test_the_slope_of_volts_per_volt_is_not_known(calibration):
    ratio = expected_ratio(calibration) * calibration.readout_slope.magnitude
    phase = Measured.of(expected_phase(calibration) + np.pi, "rad", 1e-4, 60.0)
    found = agreement(result(ratio, u=ratio * 1e-4, unit="1", phase=phase), calibration)
    assert found.is_agreed
    assert "on which slope they were measured" in found.cautions[1]


def test_a_result_without_a_phase_is_told(calibration):
    ratio = expected_ratio(calibration)
    found = agreement(result(ratio, u=ratio * 1e-4), calibration)
    assert found.cautions == ["the result has no phase: its magnitude alone is compared"]


@pytest.fixture(scope="module")
def session(tmp_path_factory):
    _, files = play(built_in_bench(), 3, tmp_path_factory.mktemp("session"), lines_s=6.0)
    return files, calibrate(built_in_bench(), **files)


@pytest.mark.slow
def test_the_wrong_slope_does_not_agree(session):
    """A simulated bench whose polarity is declared: the falling slope read as rising turns the sign."""
    files, calibration = session
    recording = open_recording(files["lines_falling"][0])
    for slope, agrees in (("falling", True), ("rising", False)):
        measuring = Measuring((87.1,), calibration, slope)
        (entry,) = entries_of_recording(recording, "photodiode", "drive", measuring, unix_s=1.7e9)
        found = agreement(entry, calibration)
        assert found.is_agreed == agrees
    assert "half a turn: is it the other slope, or is a connection swapped?" in found.reasons[-1]


def written(path, recording, unit, scale):
    """Return a text table of the recording with its channels in another unit."""
    pd, drive = (recording.trace(name).values[:8000] * scale for name in ("photodiode", "drive"))
    rows = "\n".join(
        f"{k / 4000:.6f},{a!r},{b!r}"
        for k, (a, b) in enumerate(zip(pd.tolist(), drive.tolist(), strict=True))
    )
    path.write_text(f"time_s,photodiode{unit},drive{unit}\n{rows}\n", encoding="utf-8")
    return open_recording(path)


def test_the_channels_unit_is_looked_at(session, tmp_path):
    """Counts of the known converter give what volts give; amperes are refused."""
    files, calibration = session
    recording = open_recording(files["lines_rising"][0])
    measuring = Measuring((87.1,), calibration, "rising")
    volts = written(tmp_path / "v.csv", recording, " [V]", 1.0)
    counts = written(tmp_path / "c.csv", recording, "", 2**16 / 10.0)
    (wanted,), (found,) = (
        entries_of_recording(one, "photodiode", "drive", measuring, unix_s=1.7e9)
        for one in (volts, counts)
    )
    assert found.value.magnitude == pytest.approx(wanted.value.magnitude, rel=1e-9)
    assert found.value.unit == "m/V"
    assert wanted.cautions == ()
    assert [text.split(" has ")[0] for text in found.cautions] == ["'photodiode'", "'drive'"]
    assert all("it is taken as ADC counts" in text for text in found.cautions)
    amperes = written(tmp_path / "a.csv", recording, " [A]", 1.0)
    with pytest.raises(LedgerError, match=r"a\.csv: 'photodiode' must be in V, got A$"):
        entries_of_recording(amperes, "photodiode", "drive", measuring, unix_s=1.7e9)


@pytest.mark.slow
def test_a_line_measured_again_agrees_where_nothing_has_changed(tmp_path):
    """Five benches drawn from their bench file: the first line again, not used by the calibration.

    At 95 % one in twenty may miss: of five at most one (97.7 %).
    """
    bench, misses, shifted = built_in_bench(), 0, 0
    for seed in range(5):
        folder = tmp_path / str(seed)
        folder.mkdir()
        _, files = play(bench, seed, folder)
        again = files["lines_rising"].pop()
        calibration = calibrate(bench, **files)
        measuring = Measuring((31.7,), calibration, "rising")
        recording = open_recording(again)
        (entry,) = entries_of_recording(recording, "photodiode", "drive", measuring, unix_s=1.7e9)
        assert entry.is_trustworthy
        misses += not agreement(entry, calibration).is_agreed
        moved = replace(
            entry,
            value=type(entry.value).of(
                entry.value.magnitude * 1.03, "m/V", entry.value.u_magnitude, entry.value.dof
            ),
        )
        shifted += not agreement(moved, calibration).is_agreed
    assert misses <= 1
    assert shifted == 5
