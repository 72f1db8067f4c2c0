"""Rehearsals: the truth lies inside the intervals as often as they say, and the port changes nothing."""

import json

import numpy as np
import pytest
from sessions import built_in_bench

from calibration.comparison import Comparison
from calibration.coverage import coverage_of, coverage_table, reasons_text
from calibration.rehearsal import rehearse
from calibration.trial_bench import NOT_MODELLED, TRIAL_BENCHES
from calibration.trials import Trial, play_trials
from metro.commandline import run
from metro.measured import Measured

COEFFICIENTS = ("actuator@", "readout_slope")


@pytest.fixture(scope="module")
def quick_rows():
    return coverage_of(list(play_trials(built_in_bench(), range(1, 13), lines_s=8.0)))


@pytest.mark.slow
def test_short_sessions_cover(quick_rows):
    """12 sessions of 12 quantities, partly common: loose bounds, for gross errors only.

    A quantity's mean error over 12 sessions has a standard deviation of 1/sqrt(12) = 0.29, its
    spread one of 1/sqrt(22) = 0.21: the bounds are 5 and 4 of them.
    """
    for row in quick_rows[:-1]:
        assert abs(row.mean) < 1.45, row
        assert 0.15 < row.spread < 1.85, row
    assert quick_rows[-1].inside_95 > 0.85


@pytest.mark.slow
def test_coverage_table_has_a_line_a_quantity(quick_rows):
    lines = coverage_table(quick_rows).splitlines()
    assert len(lines) == len(quick_rows) + 1
    assert lines[-1].startswith("all")


def check_coverage(trials, mean, spread, points):
    rows = coverage_of(list(play_trials(built_in_bench(), range(1, trials + 1), processes=2)))
    table = coverage_table(rows)
    print(table)
    for row in rows[:-1]:
        assert abs(row.mean) < mean, table
        assert 1 - spread < row.spread < 1 + spread, table
        if row.name.startswith(COEFFICIENTS):
            assert row.relative_u < 0.005, table
    assert 0.95 - points < rows[-1].inside_95 < 0.95 + points, table


@pytest.mark.trials
def test_the_truth_lies_inside_as_often_as_it_should():
    """400 sessions. The bounds on spread are 0.1 = 2.8 standard deviations (1/sqrt(798) = 3.5 %),
    on the mean 0.15 = 3 (1/sqrt(400) = 5 %), on the coverage of all comparisons 2 points: about
    1.8 of the 1.1 points that 400 fully common comparisons would have, more for those apart.
    """
    check_coverage(400, 0.15, 0.1, 0.02)


@pytest.mark.trials
@pytest.mark.parametrize(
    "name", [name for name in TRIAL_BENCHES if name not in ("good", "clipped")]
)
def test_every_kind_of_bench_covers(name):
    """200 sessions. The coverage within 3 points: 2 of the 1.5 points of fully common comparisons;
    spreads within 0.25, 5 of their deviations (1/sqrt(398)), since few degrees of freedom widen them.
    """
    kind = TRIAL_BENCHES[name]
    trials = list(play_trials(built_in_bench(), range(1, 201), kind=kind, processes=2))
    rows = coverage_of(trials)
    told = f"{coverage_table(rows)}\n{reasons_text(trials)}"
    print(told)
    assert sum(not trial.is_trusted for trial in trials) <= 20, told
    assert 0.92 < rows[-1].inside_95 < 0.98, told
    for row in rows[:-1]:
        assert abs(row.mean) < 0.3, told
        assert row.spread < 1.25, told
        if row.efficiency is not None:
            assert row.efficiency > 0.8, told


@pytest.mark.slow
def test_a_clipped_bench_is_always_distrusted():
    kind = TRIAL_BENCHES["clipped"]
    trials = list(play_trials(built_in_bench(), range(1, 5), kind=kind))
    assert not any(trial.is_trusted for trial in trials)
    assert all("no cosine" in " ".join(trial.reasons) for trial in trials)


@pytest.mark.slow
def test_sixty_sessions_cover():
    """60 sessions: 3.5 standard deviations of the spread (1/sqrt(118) = 9.2 %) and of the mean
    (12.9 %); the coverage within 5 points, 1.8 of the 2.8 points of fully common comparisons.
    """
    check_coverage(60, 0.45, 0.32, 0.05)


def same_through_the_port(seed, tmp_path, lines_s):
    (tmp_path / "port").mkdir()
    (tmp_path / "memory").mkdir()
    bench = built_in_bench()
    port = rehearse(bench, seed, tmp_path / "port", lines_s=lines_s)
    memory = rehearse(bench, seed, tmp_path / "memory", through_port=False, lines_s=lines_s)
    for a, b in zip(port.comparisons, memory.comparisons, strict=True):
        assert a.name == b.name
        # the recordings hold the same samples: the results are the same numbers
        assert a.measured == b.measured, a.name
        assert a.truth == b.truth


@pytest.mark.slow
def test_the_serial_port_changes_nothing(tmp_path):
    same_through_the_port(5, tmp_path, lines_s=4.0)


@pytest.mark.slow
@pytest.mark.parametrize("seed", range(1, 21))
def test_the_serial_port_changes_nothing_for_any_seed(seed, tmp_path):
    same_through_the_port(seed, tmp_path, lines_s=20.0)


def test_command_leaves_every_file_and_prints_the_contract(tmp_path, capsys):
    folder = tmp_path / "session"
    assert run(["rehearse", "--seed", "2", "--out", str(folder), "--json"]) == 0
    document = json.loads(capsys.readouterr().out)
    assert set(document) >= {"truth", "measured", "inside_95", "files"}
    names = set(document["truth"])
    assert names == set(document["measured"]) == set(document["inside_95"])
    assert {"actuator@87.1Hz", "readout_slope"} <= names
    assert len(names) >= 4
    for name in names:
        measured, truth = document["measured"][name], document["truth"][name]
        assert set(truth) == {"value", "unit", "u"}
        assert truth["unit"] == measured["unit"]
        assert isinstance(document["inside_95"][name], bool)
        assert np.isfinite([measured["value"], measured["u"], truth["value"]]).all()
    for file in ("bench.toml", "calibration.json", "displacement.npz", "session.png"):
        assert str(folder / file) in document["files"]
        assert (folder / file).stat().st_size > 0
    assert sum(f.endswith(".mfr") for f in document["files"]) == 10


def test_command_refuses_a_folder_that_holds_something(tmp_path, capsys):
    (tmp_path / "mine.txt").write_text("keep me")
    assert run(["rehearse", "--out", str(tmp_path)]) == 2
    said = capsys.readouterr()
    assert said.out == ""
    assert said.err == (
        f"midfringe: the folder {tmp_path} is not empty; --overwrite replaces its files\n"
    )
    assert [path.name for path in tmp_path.iterdir()] == ["mine.txt"]


@pytest.mark.slow
def test_trials_print_coverage(capsys):
    arguments = ["rehearse", "--trials", "1", "--seed", "3", "--json"]
    assert run([*arguments, "--trial-bench", "short", "--trial-bench", "clipped"]) == 0
    document = json.loads(capsys.readouterr().out)
    assert document["coverage"][-1]["name"] == "all"
    assert list(document["benches"]) == ["short", "clipped"]
    assert document["benches"]["short"]["distrusted"] == {}
    assert list(document["benches"]["clipped"]["distrusted"]) == ["3"]
    assert document["benches"]["clipped"]["coverage"] == []
    assert document["not_modelled"] == list(NOT_MODELLED)


@pytest.mark.slow
def test_trials_name_distrusted_sessions_and_what_is_not_modelled(capsys):
    arguments = ["rehearse", "--trials", "1", "--trial-bench", "clipped", "--quiet"]
    assert run(arguments) == 0
    said = capsys.readouterr().out
    assert "1 of 1 sessions are distrusted and left out (seeds 1):" in said
    assert "the fringe is no cosine" in said
    assert said.splitlines()[-1].startswith("not modelled: ghost beams")


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        (["--trial-bench", "short"], "--trial-bench goes with --trials, got no --trials"),
        (["-q", "-v"], "--quiet and --verbose exclude each other, got both"),
        (["--verbose", "--quiet"], "--quiet and --verbose exclude each other, got both"),
        (
            ["--trials", "2", "--trial-bench", "shorter"],
            f"--trial-bench must be one of {', '.join(TRIAL_BENCHES)} or all, got 'shorter'",
        ),
    ],
)
def test_command_refuses_options_that_do_not_go_together(arguments, message, capsys):
    assert run(["rehearse", *arguments]) == 2
    said = capsys.readouterr()
    assert said.out == ""
    assert said.err == f"midfringe: {message} (see 'midfringe rehearse --help')\n"


def test_sessions_that_are_distrusted_do_not_count():
    good = Comparison("slope", 1.0, Measured.of(1.1, "1", 0.1), efficiency=0.9)
    bad = Comparison("slope", 1.0, Measured.of(9.0, "1", 0.1))
    trials = [Trial(1, [good], []), Trial(2, [bad], ["3 % clipped"]), Trial(3, [], ["9 % clipped"])]
    row = coverage_of(trials)[0]
    assert (row.trials, row.inside_95, row.efficiency) == (1, 1.0, 0.9)
    assert row.mean == pytest.approx(1.0)
    assert reasons_text(trials).splitlines() == [
        "2 of 3 sessions are distrusted and left out (seeds 2, 3):",
        "     2  # % clipped",
    ]
