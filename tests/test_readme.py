"""The README holds: its commands run on a rehearsal's files, its options exist, its links lead somewhere."""

import re
import shlex
import shutil
import signal
import subprocess
import sys
import time
from dataclasses import replace
from pathlib import Path

import click
import numpy as np
import pytest

from calibration.rehearsal_script import session_steps
from firmware_bridge.simulated.bench import SimulatedBench
from firmware_bridge.simulated.board import SimulatedBoard
from firmware_bridge.simulated.setup import Drift
from metro.bench import load_bench
from metro.commandline import cli, run

README = Path(__file__).resolve().parents[1] / "README.md"
INSTALLS = ("python3 -m venv",)  # .ci/run runs these two lines in fresh clones


def blocks(kind):
    """Return the fenced blocks of one kind."""
    return re.findall(
        rf"^ *```{kind}\n(.*?)^ *```", README.read_text(encoding="utf-8"), re.DOTALL | re.MULTILINE
    )


def commands(kind):
    """Return every line that calls midfringe, split as a shell does, notes cut off."""
    lines = [line.strip() for block in blocks(kind) for line in block.splitlines()]
    called = [line for line in lines if line.startswith("midfringe ")]
    return [shlex.split(re.split(r"\s{3,}", line)[0])[1:] for line in called]


@pytest.fixture(scope="module")
def session(tmp_path_factory):
    folder = tmp_path_factory.mktemp("readme")
    with pytest.MonkeyPatch.context() as patch:
        patch.chdir(folder)
        assert run(["rehearse", "--quiet"]) == 0
    return folder


def test_the_two_commands_stand_there():
    lines = [line for block in blocks("sh") for line in block.splitlines()]
    installs = [line for line in lines if line.startswith(INSTALLS)]
    assert len(installs) == 2
    assert installs[0].endswith("midfringe rehearse")
    assert installs[1].endswith("pytest -q -n 2")


@pytest.mark.slow
def test_every_command_runs(session, monkeypatch):
    """In the order of the page, since later ones use what earlier ones leave."""
    monkeypatch.chdir(session)
    found = commands("sh")
    assert len(found) >= 7
    for arguments in found:
        assert run(arguments) == 0, arguments


@pytest.mark.parametrize("arguments", commands("text"), ids=" ".join)
def test_every_option_of_the_bench_session_exists(arguments):
    command = cli.get_command(click.Context(cli), arguments[0])
    assert command is not None
    if isinstance(command, click.Group):
        command = command.get_command(click.Context(command), arguments[1])
        assert command is not None
    known = {option for param in command.params for option in param.opts}
    assert {word for word in arguments if re.match(r"--[a-z]", word)} <= known


STATES = {  # what stands on the bench when the page says to record a file
    "dark": ("blocked", False), "pickup": ("blocked", True), "no-x": ("y", True), "no-y": ("x", True),
    "first": ("both", False), "scan": ("both", False), "scan2": ("both", False),
    "rising": ("both", True), "falling": ("both", True), "free": ("both", True),
}  # fmt: skip
ENDLESS = ("watch", "log")


def setup_for(name, bench):
    """Return the simulated bench's state for a recording of the page, as the page describes it."""
    beam, driven = STATES[name]
    steps = {step.role: step.setup for step in reversed(session_steps(bench))}  # the first of each
    if name.startswith("scan"):
        return steps["scan"]
    slope = "falling" if name == "falling" else "rising"
    setup = replace(steps[f"lines-{slope}"], beam=beam)
    if name == "free":
        setup = replace(setup, slope=None, drift=Drift(150e-9, 200e-9, 8.0))
    return setup if driven else replace(setup, tones=())


def scope_file(folder):
    """Leave what an oscilloscope saves: time, drive, light on a fringe driven at 1 kHz."""
    t = np.arange(20000) * 2e-5
    drive = 0.1 * np.cos(2 * np.pi * 1000 * t)
    noise = np.random.default_rng(1).normal(0, 2e-3, t.size)
    light = 5.065 + 4.625 * np.cos(np.pi / 2 + 3.8 * drive) + noise
    rows = np.column_stack([t, drive, light])
    np.savetxt(
        folder / "scope.csv", rows, "%.9g", ",", header="time,drive,light\ns,V,V", comments=""
    )


def interrupted(arguments, seconds):
    """Run a command that never ends by itself, stop it as Ctrl-C does, and return its exit code."""
    program = subprocess.Popen([sys.executable, "-m", "metro", *arguments])
    time.sleep(seconds)
    program.send_signal(signal.SIGINT)
    return program.wait(30)


@pytest.mark.slow
def test_the_bench_session_runs_on_a_simulated_board(session, monkeypatch, tmp_path):
    """Every command of the page, in its order, with a simulated board where a real one is named."""
    for needed in ("scipy", "matplotlib", "bokeh", "sqlalchemy"):
        pytest.importorskip(needed)
    shutil.copytree(session / "rehearsal", tmp_path / "rehearsal")
    shutil.copy(session / "rehearsal" / "bench.toml", tmp_path)
    shutil.copy(session / "rehearsal" / "06-lines-rising.mfr", tmp_path / "run.mfr")
    scope_file(tmp_path)
    monkeypatch.chdir(tmp_path)
    bench = load_bench("bench.toml")
    for arguments in commands("text"):
        out = arguments[arguments.index("--out") + 1] if "--out" in arguments else "first.mfr"
        live = arguments[0] in ENDLESS
        recorded = Path(out).suffix == ".mfr" and Path(out).stem in STATES
        setup = setup_for(Path(out).stem if recorded else "rising", bench)
        simulated = SimulatedBench(bench, 1)
        with SimulatedBoard(simulated, setup, speed=1.0 if live else None) as board:
            called = [board.port if word == "/dev/ttyACM0" else word for word in arguments]
            if live:
                extra = ["--port-number", "0"] if arguments[0] == "watch" else ["--every", "4s"]
                assert interrupted([*called, *extra], 10.0) == 0, arguments
            else:
                assert run(called) == 0, arguments
    assert (tmp_path / "report.html").stat().st_size > 10_000
    assert list(tmp_path.glob("bench-log-*.mfr"))


def test_python_examples_run(session, monkeypatch):
    monkeypatch.chdir(session)
    (example,) = blocks("python")
    names = {}
    exec(example, names)  # noqa: S102  # our own page
    assert abs(names["fit"].lines[0].amplitude.value.to("V").magnitude) > 0


def test_the_bench_file_example_loads(tmp_path):
    (example,) = blocks("toml")
    path = tmp_path / "bench.toml"
    path.write_text(example, encoding="utf-8")
    assert load_bench(path).text("laser.source").startswith("He-Ne")


def test_the_printed_table_is_the_one_that_comes(session, monkeypatch, capsys):
    """Every true value is drawn from the seed alone and stands as printed; a measured one may differ
    in its last digits between machines, by less than a twentieth of its U."""
    monkeypatch.chdir(session)
    assert run(["rehearse", "--quiet", "--overwrite"]) == 0
    printed = capsys.readouterr().out.splitlines()
    shown = next(b for b in blocks("text") if b.startswith("quantity")).splitlines()
    assert [re.split(r"\s{2,}", line)[:2] for line in shown] == [
        re.split(r"\s{2,}", line)[:2] for line in printed
    ]
    for ours, theirs in zip(shown[1:13], printed[1:13], strict=True):
        measured, again, expanded = (
            float(re.split(r"\s{2,}", t)[k].split()[0])
            for t, k in (
                (ours, 2),
                (theirs, 2),
                (theirs, 3),
            )
        )
        unit_of_u = re.split(r"\s{2,}", theirs)[3].partition(" ")[2]
        unit = re.split(r"\s{2,}", theirs)[2].partition(" ")[2]
        scale = {("pm", "nm"): 1e-3, ("kV", "MV"): 1e-3}.get((unit_of_u[:2], unit[:2]), 1.0)
        assert abs(measured - again) <= 0.05 * expanded * scale, (ours, theirs)


def test_cautions_are_there():
    text = " ".join(README.read_text(encoding="utf-8").split())
    for words in (
        "laser safety officer",
        "below eye level",
        "nothing reflective",
        "high voltage",
        "stays charged",
        "no interlock",
        "Local rules govern",
    ):
        assert words in text
    assert not re.search(r"\b(is|are) safe\b", text)
