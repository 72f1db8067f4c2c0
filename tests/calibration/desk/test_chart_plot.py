"""The chart drawn: few results alone, several lines in a row; limits, sums and Allan deviation later."""

from dataclasses import replace

import pytest
from ledgers import month

from calibration.desk.line_chart import chart_line

pytest.importorskip("matplotlib")

from calibration.desk.chart_plot import chart_figure


def chart(line_hz, hours):
    return chart_line([replace(entry, line_hz=line_hz) for entry in month(1, hours=hours)])


@pytest.mark.parametrize(
    ("hours", "panels"),
    [((1, 1, 1, 1), 4), ((3,), 1), ((7,), 1), ((8,), 3), ((1, 2, 3, 1, 2), 5), ((60, 2), 4)],
)
def test_lines_with_few_results_have_one_panel_each(tmp_path, hours, panels):
    figure = chart_figure([chart(31.7 + k, count) for k, count in enumerate(hours)])
    figure.savefig(tmp_path / "chart.png", dpi=30)
    assert len(figure.axes) == panels
    titles = [axes.get_title() for axes in figure.axes]
    for k, count in sorted(enumerate(hours), key=lambda pair: pair[1] < 8):
        assert titles.pop(0) == f"{31.7 + k:g} Hz: {count} result{'s' * (count > 1)}"
        if count >= 8:
            assert titles.pop(0).startswith("alarm beyond")
            assert titles.pop(0) == "overlapping Allan deviation"
    told = figure.get_supxlabel()
    assert (told == "") == (min(hours) >= 8)
    boxes = [axes.get_window_extent() for axes in figure.axes]
    assert min(box.width for box in boxes) > 0.12 * figure.bbox.width  # none is squeezed
