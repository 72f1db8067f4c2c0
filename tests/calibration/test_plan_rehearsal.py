"""A plan keeps its word: rehearsals with it report the u that it promised."""

from statistics import median

import pytest
from sessions import BENCH_FILE, built_in_bench

from calibration.rehearsal import rehearse
from calibration.rehearsal_folder import with_lines
from calibration.rehearsal_script import planned
from metro.bench import BenchLine, load_bench
from metro.commandline import run
from metro.plan import load_plan


def reported(plan_file, seeds, folder):
    """Return the relative u of each line in each session."""
    bench, lines_s = planned(built_in_bench(), str(plan_file))
    sessions = [
        rehearse(bench, seed, folder, through_port=False, lines_s=lines_s) for seed in seeds
    ]
    return [[e.magnitude.relative_u for e in s.calibration.actuator] for s in sessions]


def made(tmp_path, wanted):
    out = tmp_path / "plan.json"
    arguments = ["plan", "--bench", str(BENCH_FILE), "--uncertainty", wanted, "--out", str(out)]
    assert run([*arguments, "--quiet"]) == 0
    return out


def check(plan_file, seeds, folder, factor):
    found = zip(*reported(plan_file, seeds, folder), strict=True)
    for line, values in zip(load_plan(plan_file).lines, found, strict=True):
        promised = line.expected_u
        assert promised / factor < median(values) < promised * factor, line


@pytest.mark.slow
def test_two_sessions_come_near_their_plan(tmp_path):
    check(made(tmp_path, "0.5%"), range(1, 3), tmp_path, 1.5)


@pytest.mark.slow
@pytest.mark.parametrize("wanted", ["0.25%", "1%"])
def test_twenty_sessions_keep_their_plan(tmp_path, wanted):
    """The median over 20 sessions; each u scatters by some per cent, with its noise estimate."""
    check(made(tmp_path, wanted), range(1, 21), tmp_path, 1.2)


@pytest.mark.slow
def test_command_takes_the_plan(tmp_path, capsys):
    plan = made(tmp_path, "0.5%")
    capsys.readouterr()
    assert run(["rehearse", "--plan", str(plan), "--out", str(tmp_path / "session")]) == 0
    assert "actuator@87.1Hz" in capsys.readouterr().out
    kept, built_in = load_bench(tmp_path / "session" / "bench.toml"), built_in_bench()
    assert kept.lines == tuple(load_plan(plan).bench_lines)
    assert kept.motion == built_in.motion
    assert {k: e.value for k, e in kept.entries.items()} == {
        k: e.value for k, e in built_in.entries.items()
    }


def test_a_bench_without_lines_gets_them_at_its_end():
    lines = (BenchLine(31.7, 0.5), BenchLine(87.1, None))
    assert with_lines('[arms]\nlength = "1 m"\n', lines) == (
        '[arms]\nlength = "1 m"\n\n[[line]]\nfrequency = "31.7 Hz"\ndrive = "0.5 V"  # from the plan\n'
        '\n[[line]]\nfrequency = "87.1 Hz"\n'
    )


@pytest.mark.parametrize("wanted", ["0.25%", "0.3%", "0.5%", "1%", "2%"])
def test_a_plan_without_reasons_reaches_what_is_wanted(tmp_path, wanted):
    """Drives are rounded to three digits so that the promise holds, never just above it."""
    plan = load_plan(made(tmp_path, wanted))
    if not plan.all_reasons:
        assert max(line.expected_u for line in plan.lines) <= plan.wanted_u


def test_a_line_without_a_drive_is_refused(tmp_path, capsys):
    text = BENCH_FILE.read_text(encoding="utf-8").replace('drive = "0.16 V"', "", 1)
    bench = tmp_path / "bench.toml"
    bench.write_text(text, encoding="utf-8")
    assert run(["rehearse", "--bench", str(bench), "--out", str(tmp_path / "s")]) == 2
    assert (
        "a rehearsal needs a drive for every line, got none at 31.7 Hz" in capsys.readouterr().err
    )
