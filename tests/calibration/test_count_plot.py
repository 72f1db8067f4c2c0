"""Pictures of a counted scan: what is drawn is what was recorded, and legends hide none of it."""

import numpy as np
import pytest
from matplotlib.figure import Figure

from calibration.count_plot import save_count_plot
from calibration.count_reading import read_count
from calibration.fringe_axes import draw_departure, draw_law, draw_record
from calibration.fringe_shape import DirectionShape
from firmware_bridge.trace import Trace

COUNT, RATE_HZ, NOISE = 20_000, 2000.0, 0.004
LEVELS = (0.4, 3.6)


@pytest.fixture(scope="module")
def scan():
    """Return a count of a triangle that turns away from the extremes while the mirror shakes."""
    time = np.arange(COUNT) / RATE_HZ
    drive = np.abs((np.linspace(0, 4, COUNT) + 1) % 2 - 1)
    phase = 0.9 + 2 * np.pi * 4.63 * drive + 0.1 * np.sin(2 * np.pi * 37.0 * time)
    rng = np.random.default_rng(8)
    volts = 2.0 + 1.6 * np.cos(phase) + NOISE * rng.normal(size=COUNT)
    return read_count(Trace("pd", "V", volts, RATE_HZ), Trace("drive", "V", drive, RATE_HZ))


def test_the_law_is_met_also_where_the_mirror_turns(scan):
    law, rest = Figure().subplots(2, 1)
    draw_law(law, rest, scan.count.phase_rad, scan.trace.values, LEVELS, "V")
    cloud, error = law.lines[0].get_xydata(), rest.lines[1].get_xydata()
    assert len(cloud) == len(error) > 3000
    # the scan turns at phases in the middle of the fringe; the noise is all that is left
    assert np.abs(error[:, 1]).max() < 6 * NOISE
    assert error[:, 1].std() < 1.1 * NOISE
    expected = 2.0 + 1.6 * np.cos(cloud[:, 0])
    assert np.abs(cloud[:, 1] - expected).max() < 6 * NOISE
    # no bar at one phase: away from the extremes every fiftieth of the turn has its share
    shares, _ = np.histogram(cloud[:, 0], bins=50, range=(0, 2 * np.pi))
    assert shares.max() < 4 * shares.mean()


def test_a_dense_record_keeps_its_extremes_and_holes():
    axes = Figure().subplots()
    values = np.cos(np.arange(300_000) * 2.5)
    values[17], values[100_000:120_000] = 4.0, np.nan
    draw_record(axes, np.arange(300_000.0), values)
    drawn = axes.lines[0].get_xydata()
    assert len(drawn) <= 6000
    assert drawn[:, 1][0] in (4.0, values[:100].min())
    assert np.nanmax(drawn[:, 1]) == 4.0
    inside = (drawn[:, 0] > 100_200) & (drawn[:, 0] < 119_800)
    assert inside.sum() > 300
    assert np.isnan(drawn[inside, 1]).all()
    assert np.all(np.diff(drawn[:, 0]) >= 0)
    seen = drawn[~np.isnan(drawn[:, 1]), 1]
    assert np.quantile(np.abs(seen), 0.01) > 0.99  # nothing slower than the record appears


def test_harmonics_are_drawn_with_their_sign():
    rest = Figure().subplots()
    up = DirectionShape("up", 0.02, 0.0, 0.01, 0.001, 0.001, 0.001, 9)
    down = DirectionShape("down", 0.02, 0.0, 0.01, 0.001, 0.001, 0.001, 9)
    draw_departure(rest, [up, down], (0.0, 2.0))
    for line, way in zip(rest.lines, (1, -1), strict=True):
        phase, volts = line.get_xydata().T
        expected = 0.02 * np.cos(2 * phase) + way * 0.01 * np.sin(2 * phase)
        np.testing.assert_allclose(volts, expected, atol=1e-12)


def test_legends_stand_above_the_panels(scan, tmp_path, monkeypatch):
    kept = []
    monkeypatch.setattr(
        "calibration.count_plot.save_figure", lambda figure, *_, **__: kept.append(figure)
    )
    save_count_plot(scan, tmp_path / "scan.png", overwrite=False)
    (figure,) = kept
    figure.canvas.draw()
    legends = [axes.get_legend() for axes in figure.axes]
    assert sum(legend is not None for legend in legends) == 3
    for axes, legend in zip(figure.axes, legends, strict=True):
        if legend is not None:
            assert legend.get_window_extent().y0 >= axes.get_window_extent().y1 - 1.0
