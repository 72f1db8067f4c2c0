"""A calibration's cautions where it is only used: one line, all of them where asked."""

from calibration.caution_lines import caution_lines

KEPT = ["pick-up not measured", "one slope only", "simulated"]
ALL = ["taken to lie on the rising slope", *KEPT, "half a turn away"]


def test_several_of_the_calibration_are_one_line_behind_the_others():
    assert caution_lines(ALL, KEPT, is_verbose=False) == [
        "taken to lie on the rising slope",
        "half a turn away",
        "of the calibration: pick-up not measured; and 2 more (--verbose)",
    ]


def test_all_are_told_where_asked_and_one_always():
    assert caution_lines(ALL, KEPT, is_verbose=True) == ALL
    assert caution_lines(KEPT[:1], KEPT[:1], is_verbose=False) == KEPT[:1]
    assert caution_lines([], KEPT, is_verbose=False) == []
