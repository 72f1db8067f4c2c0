"""``midfringe ledger``: the JSON that programs rely on, the exit codes, what people read."""

import json
from io import BytesIO, TextIOWrapper

import numpy as np
import pytest
from ledgers import month, result, sample_calibration, sample_ledger
from sessions import built_in_bench, play

from calibration.desk.ledger import Ledger
from calibration.desk.utc import unix_of
from firmware_bridge.opening import open_recording
from metro.commandline import run


@pytest.fixture(autouse=True)
def no_ledger(monkeypatch):
    monkeypatch.delenv("MIDFRINGE_LEDGER", raising=False)


def ledger(capsys, *arguments):
    """Return (exit code, stdout, stderr) of the program."""
    code = run(["ledger", *map(str, arguments)])
    out, err = capsys.readouterr()
    return code, out, err


def lines_document(ratio=332.7e-9, line_hz=87.1, **more):
    """Return what ``midfringe lines --json`` prints of one line."""

    def quantity(value, unit, u):
        return {"value": value, "unit": unit, "u": u}

    return {
        "lines": [
            {
                "frequency": quantity(line_hz, "Hz", 0.0),
                "amplitude": quantity(5e-9, "m", 1e-12),
                "phase": quantity(0.1, "rad", 1e-3),
                "noise_density": quantity(2e-12, "m/Hz**0.5", 1e-13),
                "snr": quantity(900.0, "1", 3.0),
                "ratio": {
                    "magnitude": quantity(ratio, "m/V", 0.2e-9),
                    "phase": quantity(-0.0325, "rad", 1e-3),
                },
                "trustworthy": True,
                "reasons": [],
            }
        ],
        "duration": quantity(20.0, "s", None),
        **more,
    }


@pytest.fixture
def kept(tmp_path):
    """Return a ledger with a simulated month that steps on its 20th day."""
    place = tmp_path / "month.ledger"
    with Ledger(str(place)) as opened:
        opened.add_line_results(month(3, step=4.0))
    return place


def test_calibrations_and_lines_are_added_and_listed(capsys, tmp_path):
    sample_calibration(tmp_path)
    (tmp_path / "lines.json").write_text(json.dumps(lines_document()))
    place = ("--ledger", tmp_path / "new.ledger")
    time = ("--time", "2027-01-02T03:04:05Z", "--temperature", "21.5degC")
    files = (tmp_path / "cal.json", "--lines", tmp_path / "lines.json")
    code, out, err = ledger(capsys, "add", *files, *time, *place, "--json")
    document = json.loads(out)
    assert (code, err) == (0, "")
    assert set(document) >= {"entries", "alarms"}
    assert [entry["kind"] for entry in document["entries"]] == ["calibration", "line"]
    line = document["entries"][1]
    assert line["time"] == "2027-01-02T03:04:05.000000+00:00"
    assert line["ratio"] == {"value": 332.7e-9, "unit": "m/V", "u": 0.2e-9}
    assert line["temperature"]["value"] == pytest.approx(294.65)

    code, out, err = ledger(capsys, "add", *files, *time, *place)
    assert (code, out) == (0, "0 calibrations and 0 line results added\n")
    assert err == "2 files already in the ledger\n"

    code, out, _ = ledger(capsys, "list", *place, "--json")
    document = json.loads(out)
    assert code == 0
    assert document["alarms"] == []
    assert [entry["kind"] for entry in document["entries"]] == ["calibration", "line"]
    code, out, _ = ledger(capsys, "list", *place)
    assert code == 0
    assert "response/drive at 87.1 Hz  332.70 nm/V, U = 0.39 nm/V (95 %)" in out


def test_a_document_that_says_when_it_began_needs_no_time(capsys, tmp_path):
    document = lines_document(start="2027-01-02T03:00:00+00:00", file="today.mfr")
    (tmp_path / "lines.json").write_text(json.dumps(document))
    arguments = ("--lines", tmp_path / "lines.json", "--ledger", tmp_path / "l", "--json")
    code, out, _ = ledger(capsys, "add", *arguments)
    (entry,) = json.loads(out)["entries"]
    assert code == 0
    assert entry["time"] == "2027-01-02T03:00:10.000000+00:00"  # the middle of 20 s
    assert entry["source"] == "today.mfr"


def test_results_come_through_a_pipe_or_under_any_name(capsys, tmp_path, monkeypatch):
    text = json.dumps(lines_document(start="2027-01-02T03:00:00+00:00"))
    piped = TextIOWrapper(BytesIO(text.encode()))
    monkeypatch.setattr("sys.stdin", piped)
    place = ("--ledger", tmp_path / "l")
    assert ledger(capsys, "add", "--lines", "-", *place)[1].endswith("1 line result added\n")
    (tmp_path / "today").write_text(text)
    code, _, err = ledger(capsys, "add", "--lines", tmp_path / "today", *place)
    assert (code, err) == (0, "1 file already in the ledger\n")
    assert "none': no such file" in refused(
        capsys, "add", "--lines", tmp_path / "none", "--line", "5Hz", *place
    )


def test_a_chart_tells_the_step_and_ends_with_1(capsys, kept, tmp_path):
    picture = tmp_path / "chart.png"
    code, out, err = ledger(capsys, "chart", "--ledger", kept, "--plot", picture, "--json")
    document = json.loads(out)
    assert code == 1
    assert err.splitlines()[-1].startswith("not to be trusted: line at 87.1 Hz has shifted by")
    (alarm,) = document["alarms"]
    assert alarm["time"].startswith("2025-12-21T0")
    assert len(document["entries"]) == 720
    (chart,) = document["charts"]
    assert chart["limits"]["baseline"] == 100
    assert chart["allan"]["averaging_time"]["value"][0] == 3600.0
    assert picture.read_bytes().startswith(b"\x89PNG")
    code, _, err = ledger(capsys, "chart", "--ledger", kept, "--until", "2025-12-20")
    assert code == 0


def test_a_chart_is_read_by_people(capsys, kept):
    place = ("--ledger", kept, "--until", "2025-12-20", "--quiet")
    code, out, err = ledger(capsys, "chart", *place, "--temperature-coefficient", "-10ppm/K")
    said = dict(line.split("  ", 1) for line in out.replace("\n  ", "\n").splitlines())
    assert (code, err) == (0, "")
    mean_nm = 1e9 * np.mean([entry.value.magnitude for entry in month(3)[:456]])
    assert said["results"].strip() == f"456, mean {mean_nm:.4f} nm/V"
    assert "h = 10.35: one false in 1e+05 results" in said["alarms"]
    assert "not told from zero" in said["drift a day"]
    assert list(said) == [
        *("line", "results", "temperature coefficient", "control limits", "run rules met"),
        *("alarms", "drift a day", "averaging helps up to"),
    ]


def test_todays_line_agrees_or_does_not(capsys, tmp_path):
    place = ("--ledger", sample_ledger(tmp_path))
    today = tmp_path / "today.json"
    today.write_text(json.dumps(lines_document()))
    code, out, _ = ledger(capsys, "check", today, *place, "--json")
    document = json.loads(out)
    assert code == 0
    assert document["agree"] is True
    assert document["comparisons"][0]["normalised_error"] < 1
    assert document["comparisons"][0]["phase"]["normalised_error"] < 1
    assert set(document) >= {"entries", "alarms"}
    today.write_text(json.dumps(lines_document(ratio=332.7e-9 * 1.01)))
    code, out, err = ledger(capsys, "check", today, *place)
    assert code == 1
    assert "does not agree" in out
    assert "not to be trusted: the line at 87.1 Hz differs from the calibration of" in err
    code, out, _ = ledger(capsys, "check", *place)  # the newest results in the ledger
    assert code == 0
    assert out.count("agrees") == 4


def refused(capsys, *arguments):
    code, out, err = ledger(capsys, *arguments)
    assert (code, out) == (2, "")
    assert err.count("\n") == 1
    return err.removeprefix("midfringe: ").rstrip()


def test_wrong_input_is_one_line(capsys, tmp_path, kept):
    place = ("--ledger", kept)
    (tmp_path / "lines.json").write_text(json.dumps(lines_document()))
    lines = ("--lines", str(tmp_path / "lines.json"))
    new = ("--ledger", str(tmp_path / "new.ledger"))
    assert refused(capsys, "list").startswith("--ledger is needed, a file or postgresql:// URL")
    assert refused(capsys, "add", *new).startswith("nothing to add: name a calibration")
    assert "does not say when it was measured: give --time" in refused(capsys, "add", *lines, *new)
    assert "--time must be a time" in refused(capsys, "add", *lines, "--time", "noon", *new)
    assert "is no JSON document" in refused(capsys, "add", kept, *new)
    assert "this is no calibration" in refused(capsys, "add", tmp_path / "lines.json", *new)
    assert "there is no ledger" in refused(capsys, "list", "--ledger", tmp_path / "none")
    assert "has no calibration of 'bench'" in refused(capsys, "check", *place)
    assert "no result of a line at 50 Hz" in refused(capsys, "chart", *place, "--line", "50Hz")
    assert "must end in .png" in refused(capsys, "chart", *place, "--plot", tmp_path / "a.txt")
    assert "--run-length must be from 10" in refused(capsys, "chart", *place, "--run-length", "1")
    assert "no bench 'north'" in refused(capsys, "chart", *place, "--bench-name", "north")
    assert not (tmp_path / "none").exists()
    assert not (tmp_path / "new.ledger").exists()


def test_the_ledger_may_be_named_once_and_for_all(capsys, kept, monkeypatch):
    monkeypatch.setenv("MIDFRINGE_LEDGER", str(kept))
    code, out, _ = ledger(
        capsys, "list", "--since", "2025-12-30T12:00Z", "--until", "2025-12-30T15"
    )
    assert code == 0
    assert len(out.splitlines()) == 4  # a header and three hours


def test_several_benches_are_charted_apart(capsys, tmp_path):
    place = tmp_path / "two.ledger"
    with Ledger(str(place)) as opened:
        opened.add_line_results(
            result(33e-9 + 1e-12 * (k % 3), unix_s=1.7e9 + 60 * k, bench=bench)
            for k in range(20)
            for bench in ("north", "south")
        )
    assert "name one: north, south" in refused(capsys, "chart", "--ledger", place)
    code, out, _ = ledger(capsys, "chart", "--ledger", place, "--bench-name", "south", "--quiet")
    assert code == 0
    assert "20, mean 33.001 nm/V" in out


def test_what_lines_writes_of_a_recording_says_when_it_was(capsys, tmp_path):
    """Of a board's recording the header's clock tells; 2 s after its beginning, by --from."""
    _, files = play(built_in_bench(), 1, tmp_path, keep=lambda step: step.role == "lines-rising")
    (recording, *_) = files["lines_rising"]
    found = tmp_path / "lines.json"
    line = ("--line", "87.1Hz", "--from", "2s", "--out", str(found), "--quiet")
    run(["lines", recording, *line])
    capsys.readouterr()
    document = json.loads(found.read_text())
    begun_s = open_recording(recording).start_unix_s
    assert document["file"] == recording
    assert unix_of(document["start"]) == pytest.approx(begun_s + 2.0, abs=1e-5)
    code, out, _ = ledger(
        capsys, "add", "--lines", found, "--ledger", tmp_path / "l.ledger", "--json"
    )
    (entry,) = json.loads(out)["entries"]
    assert code == 0
    half_s = 0.5 * document["duration"]["value"]
    assert unix_of(entry["time"]) == pytest.approx(begun_s + 2.0 + half_s, abs=1e-5)


@pytest.mark.parametrize(
    ("broken", "told"),
    [
        (
            lambda d: d["chain"]["wavelength"].update(value=0.0),
            "$.chain.wavelength.value must be > 0",
        ),
        (lambda d: d.update(actuator=[]), "$.actuator must have at least 1 entries"),
    ],
)
def test_a_calibration_that_breaks_the_schema_is_not_added(capsys, tmp_path, broken, told):
    document = sample_calibration(tmp_path).calibration.to_dict()
    broken(document)
    file, place = tmp_path / "broken.json", tmp_path / "new.ledger"
    file.write_text(json.dumps(document))
    assert told in refused(capsys, "add", file, "--ledger", place)
    assert not place.exists()
