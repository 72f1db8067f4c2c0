"""Whether line intervals cover and reach their bounds: a taste always, the whole with the trials."""

import numpy as np
import pytest
from long_runs.line_statistics import (
    BATCH,
    BOUNDS,
    KINDS,
    Tally,
    bound_batch,
    coverage_batch,
    judged,
)


def _summed(make, kind, seed, records):
    total = Tally()
    for batch in range(-(-records // BATCH)):
        total.add(make(kind, seed, batch))
    return total


@pytest.mark.parametrize("kind", KINDS)
def test_intervals_cover(kind):
    # 20 records of 13 intervals, correlated within a record (amplitudes and ratios share their
    # noise): as good as 20·7 independent ones, σ = 1.8 %, and 6 % for the spread. Three σ.
    tally = coverage_batch(kind, 11, 0, records=20)
    pooled = {name: row for name, row in tally.items() if not name.startswith("line ")}
    number, inside, _, squares = np.sum(list(pooled.values()), axis=0)
    assert number == 20 * 13
    assert inside / number > 0.895
    assert 0.82 < np.sqrt(squares / number) < 1.18


def test_each_line_is_tallied_by_itself():
    tally = coverage_batch("neighbour", 11, 0, records=2)
    for name in ("amplitude", "phase", "ratio amplitude", "ratio phase"):
        lines = [tally[f"line {number} {name}"] for number in (1, 2, 3)]
        assert [row[0] for row in lines] == [2, 2, 2]
        np.testing.assert_allclose(np.sum(lines, axis=0), tally[name])


@pytest.mark.slow
@pytest.mark.parametrize("kind", KINDS)
def test_intervals_cover_in_200_records(kind):
    # Of each quantity 600 intervals, σ = 0.9 %, of a line alone and of the clock 200, σ = 1.5 %. Three
    # and a half σ.
    for name, number, share, *_ in judged(kind, _summed(coverage_batch, kind, 12, 200)):
        least = 0.95 - 3.5 * np.sqrt(0.95 * 0.05 / number)
        assert float(share.split()[0]) / 100 > least, (name, share)


@pytest.mark.slow
@pytest.mark.parametrize("kind", BOUNDS)
def test_errors_are_near_the_bound_in_300_records(kind):
    # A spread over 300 records is known to 4.1 %; three and a half of it, and what is asked.
    for name, _, _, _, spread, _ in judged(kind, _summed(bound_batch, kind, 12, 300)):
        assert 0.85 < spread < 1.18, (name, spread)


@pytest.mark.trials
@pytest.mark.parametrize("kind", KINDS)
def test_intervals_cover_in_4000_records(kind):
    rows = judged(kind, _summed(coverage_batch, kind, 1, 4000))
    assert [row for row in rows if not row[-1]] == []


@pytest.mark.trials
@pytest.mark.parametrize("kind", BOUNDS)
def test_errors_reach_the_bound_in_10000_records(kind):
    rows = judged(kind, _summed(bound_batch, kind, 1, 10_000))
    assert [row for row in rows if not row[-1]] == []
