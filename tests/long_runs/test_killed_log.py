"""A taste of killing a log at random moments; ``-m trials`` does it a hundred times."""

import io

import pytest
from long_runs.killed_log import kill_repeatedly


@pytest.mark.parametrize(
    "count",
    [
        1,
        pytest.param(3, marks=pytest.mark.slow),
        pytest.param(100, marks=pytest.mark.trials),
    ],
)
def test_nothing_older_than_a_second_is_lost(count, tmp_path):
    assert len(kill_repeatedly(count, 11, tmp_path, io.StringIO())) == count
