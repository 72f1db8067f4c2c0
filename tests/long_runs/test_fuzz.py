"""Inputs that failed once, a taste of each fuzzing with every run, a hundredth among the slow tests."""

import random

import pytest
from long_runs.fuzz import FOUND, HangError, run_batch, run_one
from long_runs.fuzz_targets import TARGETS

# A hundredth of 10^7 inputs for decoder and text, 10^6 for recordings, 10^5 for bench files.
_HUNDREDTH = {
    "decoder": 100_000,
    "lines": 20_000,
    "text": 80_000,
    "recording": 10_000,
    "bench": 1_000,
}
_TASTE = {"decoder": 2000, "lines": 300, "text": 200, "recording": 300, "bench": 100}


@pytest.fixture(scope="module", params=TARGETS)
def named_target(request):
    return request.param, TARGETS[request.param]()


@pytest.mark.parametrize(
    "path", sorted(FOUND.glob("*/*")), ids=lambda path: f"{path.parent.name}-{path.name}"
)
def test_inputs_that_failed_once_fail_no_more(path):
    run_one(TARGETS[path.parent.name](), path.read_bytes())


def test_a_taste(named_target, tmp_path):
    name, target = named_target
    assert run_batch(name, target, 2, 0, _TASTE[name], tmp_path) == 0


@pytest.mark.slow
def test_a_hundredth(named_target, tmp_path):
    name, target = named_target
    assert run_batch(name, target, 3, 0, _HUNDREDTH[name], tmp_path) == 0


def test_a_batch_is_the_same_every_time(named_target):
    name, target = named_target
    first, second = (random.Random(f"{name} 1 2") for _ in range(2))  # noqa: S311  # seeded inputs
    inputs = [target.make(first) for _ in range(50)]
    assert inputs == [target.make(second) for _ in range(50)]
    assert len(set(inputs)) > 25


class Failing:
    """A target with two faults."""

    def make(self, rng):
        return rng.choice((b"good", b"bad", b"slow"))

    def run(self, data):
        if data == b"bad":
            raise ZeroDivisionError
        while data == b"slow":
            pass


def test_failures_and_hangs_are_found_and_kept(tmp_path, monkeypatch, capsys):
    monkeypatch.setattr("long_runs.fuzz._HANG_S", 0.05)
    assert run_batch("x", Failing(), 1, 0, 12, tmp_path) >= 2
    assert sorted(path.read_bytes() for path in (tmp_path / "x").iterdir()) == [b"bad", b"slow"]
    printed = capsys.readouterr().out
    assert "ZeroDivisionError" in printed
    assert HangError.__name__ in printed
