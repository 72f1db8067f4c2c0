"""A hundredth of an hour of the live page under load, with the slow tests."""

import pytest
from long_runs.watch_hour import GROWTH_MB, LATENCY_S, watch_under_load


@pytest.mark.slow
def test_a_hundredth_of_an_hour(tmp_path):
    took = watch_under_load(36.0, tmp_path)
    assert took["shown"] == took["sent"] == 36 * 50_000
    assert took["gaps"] == took["missing"] == 0
    assert took["recorded"]["gaps"] == took["recorded"]["wrong"] == 0
    assert took["recorded"]["samples"] > 30 * 50_000
    assert max(took["growth_server_mb"], took["growth_holder_mb"]) < GROWTH_MB
    assert took["latency_99_s"] < LATENCY_S  # the worst one is the other tests' doing
    # The board's lines: 800 counts of 0.3 mV.
    assert took["lines"] == pytest.approx([0.24] * 4, rel=1e-3)
