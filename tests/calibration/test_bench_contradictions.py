"""What recordings say against the bench file: remarks, one file twice, step, rate and drive."""

import json
import shutil
from dataclasses import replace
from pathlib import Path

import pytest
from sessions import BENCH_FILE, built_in_bench, play

from calibration.analysis import calibrate
from calibration.bench_contradictions import step_contradiction
from calibration.desk.evidence import find_evidence
from calibration.emit.known_fringe import fringe_of_calibration
from calibration.errors import CalibrationError
from calibration.schema import misfit
from calibration.summary import calibration_text
from firmware_bridge.recording import NO_END
from metro.bench import Bench
from metro.commandline import run
from metro.measured import Measured
from metro.output import to_json

KEPT = {"05-scan", "06-lines-rising", "07-lines-falling"}
CUT = 0.6  # of the file


@pytest.fixture(scope="module")
def session(tmp_path_factory):
    """Scan and both slopes of one session, with its bench file."""
    folder = tmp_path_factory.mktemp("session")
    _, files = play(built_in_bench(), 6, folder, lines_s=6.0, keep=lambda step: step.name in KEPT)
    return files


def test_one_recording_on_both_slopes_is_refused(session, tmp_path):
    """A copy under another name is the same recording: the hash tells (FIPS 180-4)."""
    rising = session["lines_rising"][0]
    copy = shutil.copy(rising, tmp_path / "copy.mfr")
    for again in (rising, copy):
        with pytest.raises(CalibrationError) as error:
            calibrate(
                built_in_bench(),
                scan=session["scan"],
                lines_rising=[rising],
                lines_falling=[again],
            )
        assert str(error.value) == (
            "each recording must stand in one role, once, got the same samples as "
            f"--lines-rising {rising} and as --lines-falling {again}"
        )


def test_one_recording_twice_in_a_role_is_refused(session):
    with pytest.raises(CalibrationError, match="must stand in one role, once"):
        calibrate(built_in_bench(), **session | {"scan": session["scan"] * 2})


def test_a_cut_recording_is_a_caution_with_its_name(session, tmp_path):
    data = Path(session["lines_rising"][0]).read_bytes()
    cut = tmp_path / "cut.mfr"
    cut.write_bytes(data[: int(CUT * len(data)) // 2 * 2 - 7])
    made = calibrate(built_in_bench(), scan=session["scan"], lines_rising=[cut])
    assert f"cut.mfr: {NO_END}" in made.cautions
    assert any(text.startswith("cut.mfr: the file ends within") for text in made.cautions)
    assert not any(NO_END in text for text in calibrate(built_in_bench(), **session).cautions)


def test_another_range_than_recorded_is_distrusted_and_not_emitted(session):
    """10 V in 16 bit are steps of 10/65536 V = 152.6 µV; 20 V of 305.2 µV."""
    wrong = built_in_bench().override({"adc.range": "20 V"}, "bench.toml: {}")
    made = calibrate(wrong, **session)
    reason = (
        "05-scan.mfr, 06-lines-rising.mfr, 07-lines-falling.mfr: a count is 152.6 µV in the "
        "recording, and 305.2 µV by the stated adc.range 20 V and adc.bits 16"
    )
    assert reason in made.reasons
    with pytest.raises(CalibrationError, match=r"a count is 152.6 µV in the recording, and 305"):
        fringe_of_calibration(made, Bench(), "rising", is_signed=True)
    right = calibrate(built_in_bench(), **session)
    assert not any("a count is" in text for text in right.reasons)
    assert right.recordings[0]["step"]["value"] == 10.0 / 2**16
    with pytest.raises(CalibrationError, match="must be the one that recorded"):
        fringe_of_calibration(right, wrong, "rising", is_signed=True)
    meant = Bench().override({"adc-bits": 14, "adc-range": "10 V"})
    fringe_of_calibration(right, meant, "rising", is_signed=True)  # another board, on purpose


@pytest.mark.parametrize(
    ("range_v", "bits", "agrees"),
    [(10.0, 16, True), (10.05, 16, True), (10.2, 16, False), (10.0, 15, False), (5.0, 15, True)],
)
def test_step_is_range_over_two_to_the_bits(range_v, bits, agrees):
    bench = Bench.of(adc__range=f"{range_v} V", adc__bits=bits)
    assert (step_contradiction(bench, 10.0 / 2**16) is None) == agrees
    assert step_contradiction(Bench(), 1.0) is None


def test_rate_and_drive_beyond_the_bench_are_cautions(session):
    bench = built_in_bench().override({"adc.rate": "5 kHz", "actuator.drive_limit": "0.3 V"})
    made = calibrate(bench, **session)
    names = "05-scan.mfr, 06-lines-rising.mfr, 07-lines-falling.mfr"
    assert (
        f"{names}: the rate is 4 kHz in the recording, and adc.rate is stated as 5 kHz"
        in made.cautions
    )
    beyond = [text for text in made.cautions if "beyond actuator.drive_limit 300 mV" in text]
    assert len(beyond) == len(KEPT)
    right = calibrate(built_in_bench(), **session).cautions
    assert not any("adc.rate" in text or "beyond" in text for text in right)


def test_calibrate_says_so_and_ends_with_1(session, tmp_path, capsys):
    bench = tmp_path / "bench.toml"
    bench.write_text(BENCH_FILE.read_text().replace('range = "10 V"', 'range = "20 V"'))
    out = tmp_path / "cal.json"
    code = run(
        [
            *("calibrate", "--bench", str(bench), "--no-routes", "--out", str(out)),
            *("--scan", session["scan"][0], "--lines-rising", session["lines_rising"][0]),
        ]
    )
    assert code == 1
    assert "a count is 152.6 µV in the recording" in capsys.readouterr().err
    assert json.loads(out.read_text())["trustworthy"] is False
    header = tmp_path / "converter.h"
    assert run(["emit", "c", "--calibration", str(out), "--out", str(header)]) == 2
    assert not header.exists()
    assert "must be the one that recorded" in capsys.readouterr().err


def test_given_extremes_without_u_are_said_to_count_as_exact(session):
    lines = {name: files for name, files in session.items() if name != "scan"}
    given = built_in_bench().override({"low": "0.1 V", "high": "3.9 V"})
    made = calibrate(given, **lines)
    said = [text for text in made.cautions if text.startswith("extremes as given, u not stated")]
    assert [text.split(": ")[1].split()[0] for text in said] == ["fringe.low", "fringe.high"]
    name = "fringe extremes (not measured: as given, u not stated)"
    for budget in (made.readout_budget, *(entry.budget for entry in made.actuator)):
        assert name in [row.name for row in budget.contributions]
    known = {key: Measured.of(v, "V", 1e-3) for key, v in (("low", 0.1), ("high", 3.9))}
    stated = calibrate(given.replace({f"fringe.{k}": v for k, v in known.items()}), **lines)
    assert not any("u not stated" in text for text in stated.cautions)
    assert name not in [row.name for row in stated.readout_budget.contributions]


def test_a_weak_line_is_distrusted_in_its_own_row(tmp_path):
    """A line of 33 pm in 40 pm/√Hz for 6 s, signal to noise 2: its row says so, the others do not."""
    bench = built_in_bench()
    lines = (replace(bench.lines[0], drive_v=1e-3), *bench.lines[1:])
    bench = replace(bench, lines=lines)
    _, files = play(bench, 6, tmp_path, lines_s=6.0, keep=lambda step: step.name in KEPT)
    made = calibrate(bench, **files)
    weak, *others = made.actuator
    assert any(text.startswith("06-lines-rising.mfr: too weak") for text in weak.reasons)
    assert not any(entry.reasons for entry in others)
    row, *other_rows = calibration_text(made).splitlines()[1:5]
    assert "too weak" in row
    assert all("no reason for distrust found" in other for other in other_rows)


def test_recordings_are_found_again_from_the_calibration_s_folder(session, tmp_path):
    own, other = tmp_path / "own", tmp_path / "other"
    own.mkdir()
    other.mkdir()
    moved = {role: [shutil.copy(path, other) for path in paths] for role, paths in session.items()}
    made = calibrate(built_in_bench(), **moved, kept_in=own)
    assert [record["path"] for record in made.recordings] == [
        f"../other/{name}.mfr" for name in sorted(KEPT)
    ]
    assert misfit(json.loads(to_json(made.to_dict()))) is None
    assert all(item.is_unchanged for item in find_evidence(made, own, follow=True))
    assert {item.state for item in find_evidence(made, own)} == {"not found"}
    for path in (str(other / "05-scan.mfr"), "../other/06-lines-rising.mfr", "C:/05-scan.mfr"):
        record = made.recordings[0] | {"path": path}  # from the root, or to another name
        told = replace(made, recordings=[record])
        assert find_evidence(told, own, follow=True)[0].state == "not found"
    table = made.notebook_tables()[0][1]
    assert next(iter(table))[0] == "31.7 Hz"
