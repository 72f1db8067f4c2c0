"""What falls on a line."""

import pytest

from metro.collisions import collisions

DEPTHS = [0.1, 0.1, 0.1]


def found(frequencies, duration_s=10.0, **more):
    return collisions(frequencies, DEPTHS[: len(frequencies)], duration_s, **more)


def test_lines_well_chosen():
    assert found([31.7, 87.1, 141.3]) == [[], [], []]


@pytest.mark.parametrize(
    ("line_hz", "duration_s", "text"),
    [
        (50.1, 100.0, "the mains' 50 Hz is 0.1 Hz away and wanders over it"),
        (100.5, 10.0, "the mains' 2 × 50 Hz is 0.5 Hz away and wanders over it"),
        (59.8, 100.0, "the mains' 60 Hz is 0.2 Hz away and wanders over it"),
    ],
)
def test_mains(line_hz, duration_s, text):
    assert found([line_hz], duration_s) == [[text]]


def test_only_the_stated_mains():
    assert found([59.9], 100.0, mains_hz=(50.0,)) == [[]]


def test_a_line_on_a_harmonic_of_another():
    on = found([31.7, 95.1, 141.3])
    assert on[0] == ["95.1 Hz − 2 × 31.7 Hz falls on it (0 Hz away), 0.13 % of a line"]
    assert on[1][:1] == ["3 × 31.7 Hz falls on it (0 Hz away)"]


def test_lines_too_near_for_the_time():
    assert found([31.7, 31.8], 10.0)[0][:1] == ["the line at 31.8 Hz falls on it (0.1 Hz away)"]
    assert found([31.7, 31.8], 100.0) == [[], []]


def test_intermodulation():
    """23.7 Hz = 87.1 − 2 × 31.7; small products do not matter."""
    on = found([31.7, 87.1, 23.7], 100.0)
    assert any(reason.startswith("87.1 Hz − 2 × 31.7 Hz falls on it") for reason in on[2])
    assert collisions([31.7, 87.1, 23.7], [1e-4] * 3, 100.0) == [[], [], []]


def test_what_folds_down():
    """The 13th multiple of 31.7 Hz is no harmonic looked for; 3 × 141.3 Hz at 400 Hz rate is."""
    assert found([23.9, 141.3], rate_hz=400.0)[0] == ["3 × 141.3 Hz falls on it (0 Hz away)"]
    assert found([23.9, 141.3])[0] == []
    assert found([20.3], rate_hz=1000.0) == [[]]  # 17 × 60 Hz is not looked for
    assert found([49.8], rate_hz=400.0, mains_hz=(50.0,))[0][0].startswith("the mains' 50 Hz")
