"""Memory and time of a gigabyte: lines and spectrum, each in a process of its own."""

import pytest
from benchmarks.bench_recordings import LIMIT_MB, measured
from big_recording import write_recording


@pytest.mark.parametrize("size", [1e7, pytest.param(1e9, marks=pytest.mark.slow)])
def test_a_recording_needs_no_more_memory_than_is_allowed(size, tmp_path):
    path = tmp_path / "big.mfr"
    write_recording(path, size)
    for command in ("lines", "spectrum"):
        found = measured(command, path)
        assert found["code"] == 0
        assert found["peak_mb"] < LIMIT_MB
    path.unlink()
