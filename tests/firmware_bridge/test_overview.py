"""The overview of a recording, beside numpy's own reductions column by column."""

import numpy as np
import pytest

from firmware_bridge.opening import open_recording
from firmware_bridge.overview import overview_of
from metro.commandline import run


@pytest.mark.parametrize(("samples", "columns"), [(10007, 97), (100, 100), (5, 1000), (40000, 7)])
def test_each_column_against_numpy(tmp_path, samples, columns):
    random = np.random.default_rng(samples)
    values = random.normal(size=(samples, 2))
    values[random.random(values.shape) < 0.02] = np.nan
    values[samples // 3 : samples // 2, 0] = np.nan
    path = tmp_path / "x.npz"
    np.savez(path, a=values[:, 0], b=values[:, 1], rate=1000.0)
    found = overview_of(open_recording(path, rate="1 kHz"), columns)
    n = min(columns, samples)
    edges = np.round(found.edges_s * 1000).astype(int)
    assert (len(edges), edges[0], edges[-1]) == (n + 1, 0, samples)
    for channel in range(2):
        for k in range(n):
            part = values[edges[k] : edges[k + 1], channel]
            there = part[~np.isnan(part)]
            assert found.missing[channel, k] == np.isnan(part).sum()
            assert found.samples[k] == part.size
            if there.size:
                assert (found.low[channel, k], found.high[channel, k]) == (there.min(), there.max())
            else:
                assert np.isnan(found.low[channel, k])
                assert np.isnan(found.high[channel, k])


def test_inspect_draws_what_is_missing(tmp_path, capsys):
    pytest.importorskip("matplotlib")
    from firmware_bridge.inspection import inspect_recording
    from firmware_bridge.inspection_plot import inspection_figure

    values = np.sin(np.arange(4000) / 30)
    values[1000:2000] = np.nan
    path = tmp_path / "x.npz"
    np.savez(path, light=values, rate=1000.0)
    recording = open_recording(path, rate="1 kHz")
    figure = inspection_figure(recording, inspect_recording(recording))
    (axes,) = figure.axes
    (span,) = [p for p in axes.patches if p.get_width() > 0]
    assert (span.get_x(), span.get_width()) == (1.0, 1.0)
    assert axes.get_title(loc="right") == "1000 values missing or over-range (marked)"
    assert axes.get_ylim()[0] < -1 < 1 < axes.get_ylim()[1] < 1.3


def test_inspect_writes_the_picture_only_where_it_may(tmp_path, capsys):
    pytest.importorskip("matplotlib")
    path, out = tmp_path / "x.npz", tmp_path / "x.png"
    np.savez(path, light=np.sin(np.arange(4000) / 30), rate=1000.0)
    assert run(["inspect", str(path), "--rate", "1kHz", "--plot", str(out)]) == 0
    assert out.read_bytes().startswith(b"\x89PNG")
    capsys.readouterr()
    assert run(["inspect", str(path), "--rate", "1kHz", "--plot", str(out)]) == 2
    told = capsys.readouterr()
    assert (told.out, len(told.err.splitlines())) == ("", 1)
    assert "exists" in told.err
