"""A taste of the fault table with every test run, a hundredth of it among the slow tests."""

import pytest
from long_runs.fault_table import MEMORY_MB, ROWS, fault_rows, run_row

_TASTE = [("flips", 1e-4, "pty"), ("all kinds", 1e-3, "pty")]
_HUNDREDTH = 1e7  # bytes


def _check(row):
    assert (row["wrong"], row["lost"], row["gaps_wrong"]) == (0, 0, 0), row
    assert row["kept"] >= row["undamaged"] > 0
    assert row["faults"] > 0 or row["rate"] * row["bytes"] < 10
    assert row["peak_mb"] <= row["read_back_mb"] <= MEMORY_MB


@pytest.mark.parametrize(("kind", "rate", "link"), _TASTE)
def test_nothing_wrong_and_nothing_undamaged_lost(kind, rate, link, tmp_path):
    _check(run_row(kind, rate, link, 150_000, 3, tmp_path))


@pytest.mark.slow
@pytest.mark.parametrize(("kind", "rate", "link", "size"), fault_rows(_HUNDREDTH))
def test_a_hundredth_of_the_fault_table(kind, rate, link, size, tmp_path):
    _check(run_row(kind, rate, link, size, 1, tmp_path))


def test_the_table_spans_what_it_promises():
    rates = {(kind, rate) for kind, rate, _ in ROWS}
    for kind in ("flips", "drops", "inserts", "duplicated blocks", "reordered blocks"):
        assert {rate for k, rate in rates if k == kind} == {1e-6, 1e-5, 1e-4, 1e-3, 1e-2}
    assert {"stalls", "resets", "unpluggings"} <= {kind for kind, _ in rates}
    assert sum(size for *_, size in fault_rows(1e9)) == pytest.approx(1e9, rel=1e-6)
