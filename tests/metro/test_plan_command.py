"""The command: table, JSON, files, exit codes."""

import json
from importlib.resources import files

import pytest

from metro.commandline import run
from metro.plan import load_plan

BENCH = str(files("firmware_bridge.simulated").joinpath("bench.toml"))


def plan(*more, bench=BENCH):
    return run(["plan", "--bench", bench, *more])


def test_table(capsys):
    assert plan("--uncertainty", "0.3%") == 0
    out, err = capsys.readouterr()
    assert err == ""
    lines = out.splitlines()
    assert lines[0].split() == [
        *("line", "drive", "phase", "displacement", "SNR", "floor", "expected", "u", "lost", "3rd")
    ]
    assert [line.split()[0] for line in lines[1:5]] == ["31.7", "87.1", "141.3", "233.9"]
    assert "10 s on each slope of the fringe, all lines at once" in out
    assert "cautions" in out


def test_json_and_file(capsys, tmp_path):
    path = tmp_path / "plan.json"
    assert plan("--uncertainty", "0.25%", "--json", "--out", str(path)) == 0
    document = json.loads(capsys.readouterr().out)
    assert document == json.loads(path.read_text(encoding="utf-8"))
    assert {"lines", "duration", "cautions"} <= set(document)
    assert document["duration"]["unit"] == "s"
    wanted = {
        *("frequency", "drive", "phase_amplitude", "displacement_amplitude", "expected_u"),
        *("snr", "reasons"),
    }
    for line in document["lines"]:
        assert wanted <= set(line)
        assert line["expected_u"]["value"] == pytest.approx(0.0025, rel=0.01)
        assert line["drive"]["unit"] == "V"
    assert load_plan(path).duration_s == document["duration"]["value"]
    assert plan("--uncertainty", "0.25%", "--out", str(path)) == 2
    out, err = capsys.readouterr()
    assert (out, err.count("\n")) == ("", 1)
    assert plan("--uncertainty", "0.25%", "--out", str(path), "--overwrite") == 0


def test_a_line_that_must_not_be_trusted(capsys, tmp_path):
    path = tmp_path / "plan.json"
    assert plan("--uncertainty", "0.3%", "--line", "50.1Hz", "--out", str(path)) == 1
    assert "not to be trusted: line at 50.1 Hz: the mains'" in capsys.readouterr().err
    assert load_plan(path).lines[0].reasons


def test_plot(tmp_path, capsys):
    pytest.importorskip("matplotlib")
    path = tmp_path / "plan.png"
    assert plan("--uncertainty", "0.3%", "--plot", str(path)) == 0
    assert path.read_bytes()[:8] == b"\x89PNG\r\n\x1a\n"
    assert capsys.readouterr().err == ""


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        (
            ["--uncertainty", "0.2%"],
            "uncertainty must be > 0.2152 %, below which no drive and no time",
        ),
        (["--uncertainty", "0"], "--uncertainty must be > 0.0, got '0'"),
        (["--uncertainty", "0.2 V"], "--uncertainty must be a pure number"),
        (["--uncertainty", "150%"], "--uncertainty must be < 1.0"),
        ([], "Missing option '--uncertainty'"),
        (["--uncertainty", "0.3%", "--line", "87.1"], "--line must have a unit of frequency"),
        (["--uncertainty", "0.3%", "--line", "2kHz"], "line must be < 2000 Hz, half of adc.rate"),
        (["--uncertainty", "0.3%", "--line", "-3Hz"], "--line must be > 0.0 Hz"),
        (["--uncertainty", "0.3%", "--duration", "0s"], "--duration must be > 0.0 s"),
        (["--uncertainty", "0.3%", "--compression", "50%"], "--compression must be ≤ 0.2"),
        (["--uncertainty", "0.3%", "--plot", "x.bmp"], "--plot must end in .png, .pdf or .svg"),
    ],
)
def test_refused_in_one_line(arguments, message, capsys, tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    assert plan(*arguments) == 2
    out, err = capsys.readouterr()
    assert out == ""
    assert err.count("\n") == 1
    assert message in err
    assert list(tmp_path.iterdir()) == []


def test_without_a_bench(capsys):
    assert run(["plan", "--uncertainty", "0.3%", "--line", "87.1Hz"]) == 2
    assert capsys.readouterr().err.count("\n") == 1
