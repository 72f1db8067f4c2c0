"""Memory and time of a gigabyte: lines and spectrum, each in a process of its own."""

import pytest
from benchmarks.bench_recordings import LIMIT_MB, measured
from big_recording import write_recording


@pytest.mark.slow
@pytest.mark.parametrize("command", ["lines", "spectrum"])
def test_a_gigabyte_needs_no_more_memory_than_is_allowed(command, tmp_path):
    path = tmp_path / "big.mfr"
    write_recording(path, 1e9)
    found = measured(command, path)
    path.unlink()
    assert found["code"] == 0
    assert found["peak_mb"] < LIMIT_MB
