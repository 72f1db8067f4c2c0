import json

import numpy as np
import pytest

from firmware_bridge import open_recording
from firmware_bridge.errors import BridgeError
from firmware_bridge.reading import Reading
from metro.commandline import run


def test_a_device_without_an_end_is_refused(capsys):
    assert run(["inspect", "/dev/zero"]) == 2
    assert "it is no regular file or pipe" in capsys.readouterr().err


def test_quoted_numbers_with_decimal_commas_are_read(tmp_path):
    path = tmp_path / "q.csv"
    path.write_text('t [s],a\n"0,5","1,2"\n"0,6","1,25"\n"0,7","-1,3"\n"0,8",4\n"0,9",",5e1"\n')
    recording = open_recording(path)
    assert recording.rate_hz == pytest.approx(10.0)
    np.testing.assert_array_equal(recording.trace("a").values, [1.2, 1.25, -1.3, 4, 5.0])


def test_quoted_groups_of_three_digits_are_not_guessed_at(tmp_path):
    path = tmp_path / "q.csv"
    path.write_text("a,b\n" + '"1,234","2,345"\n' * 9)
    try:
        values = open_recording(path, rate="1 Hz").trace("a").values
    except BridgeError:
        return
    assert not np.any(values == 1.234)


@pytest.fixture
def table(tmp_path):
    path = tmp_path / "x.csv"
    rng = np.random.default_rng(3)
    rows = np.column_stack((np.arange(500) / 500, rng.normal(size=(500, 3))))
    np.savetxt(path, rows, delimiter=",", header="time (s),3,Drive,pd", comments="")
    return str(path)


def test_inspect_shows_the_numbers_of_columns(table, capsys):
    assert run(["inspect", table]) == 0
    shown = [line.split()[:2] for line in capsys.readouterr().out.splitlines()]
    assert ["column", "channel"] in shown
    for pair in (["2", "3"], ["3", "Drive"], ["4", "pd"]):
        assert pair in shown
    run(["inspect", table, "--json"])
    channels = json.loads(capsys.readouterr().out)["channels"]
    assert [(c["column"], c["name"]) for c in channels] == [(2, "3"), (3, "Drive"), (4, "pd")]


def test_the_drive_is_the_channel_of_that_name_for_every_command(table):
    recording = open_recording(table)
    assert Reading().with_drive(recording).drive_channel == "3"
    assert Reading().with_drive(recording, "2").drive_channel == "2"
    assert Reading(drive_channel="4").with_drive(recording, "2").drive_channel == "4"
    assert Reading(channel="Drive").with_drive(recording).drive_channel is None


@pytest.mark.slow
def test_a_phase_that_nothing_bounds_is_unknown(tmp_path, capsys):
    t = np.arange(2000) / 1000
    rows = np.column_stack((t, np.random.default_rng(4).normal(size=2000)))
    path = tmp_path / "noise.csv"
    np.savetxt(path, rows, delimiter=",", header="time (s),pd (V)", comments="")
    shown = []
    for k in range(30):
        run(["lines", str(path), "--line", f"{100 + 7.3 * k:g}Hz"])
        shown += [s for s in capsys.readouterr().out.splitlines() if "phase at t" in s]
    assert any("unknown" in line for line in shown)
    assert not any(float(s.split("U = ")[1].split()[0]) > 3.15 for s in shown if " rad, U = " in s)
