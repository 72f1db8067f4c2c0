import json

import numpy as np
import pytest

from firmware_bridge import open_recording
from firmware_bridge.announcement import Announcement, ChannelInfo
from firmware_bridge.envelope import seal_rows
from firmware_bridge.frame import pack_frames
from firmware_bridge.recording import NO_END
from firmware_bridge.recording_header import Header
from firmware_bridge.writer import Writer
from metro.commandline import run

RATE_HZ, COUNT = 1000, 4000
NOISE = np.random.default_rng(1).normal(0.0, 1e-3, COUNT)


def rows(first=0, count=COUNT, begin=None):
    k = np.arange(first, first + count)
    t = k / RATE_HZ if begin is None else (np.arange(count) + begin) / RATE_HZ
    pd = 1.5 + np.cos(2 * np.pi * 70 * k / RATE_HZ) + NOISE[k]
    return [f"{a:.3f},{b:.6f}" for a, b in zip(t, pd, strict=True)]


@pytest.fixture
def written(tmp_path):
    def write(lines):
        path = tmp_path / "run.csv"
        path.write_text("\n".join(["time (s),pd (V)", *lines]) + "\n")
        return str(path)

    return write


@pytest.mark.parametrize("junk", ["junk,row", "ERR,ERR", "time (s),pd (V)", "nonsense", "#,?"])
def test_one_row_that_is_no_numbers_costs_only_itself(written, junk, capsys):
    lines = rows()
    lines[700] = junk
    path = written(lines)
    recording = open_recording(path)
    assert recording.length == COUNT
    assert [(gap.index, gap.length) for gap in recording.gaps] == [(700, 1)]
    assert recording.reasons == []
    assert run(["lines", path, "--line", "70Hz"]) == 0
    assert "(first: line 702" in capsys.readouterr().err


def test_a_row_put_in_between_takes_none_away(written):
    lines = rows()
    lines.insert(700, "junk,row")
    recording = open_recording(written(lines))
    assert (recording.length, recording.gaps) == (COUNT, [])


SECOND = {
    "stamps going back": rows(2500, 1500, begin=0),
    "a second section": ["time (s),pd (V)", *rows(2500, 1500, begin=0)],
    "a section of another header": ["frequency,gain", *rows(2500, 1500, begin=0)],
}


@pytest.mark.parametrize("second", SECOND.values(), ids=SECOND)
@pytest.mark.parametrize(
    "command",
    [["inspect"], ["lines", "--line", "70Hz"], ["spectrum"], ["fringe", "--wavelength", "633nm"]],
)
def test_most_of_a_file_left_out_is_a_reason(written, second, command, capsys):
    path = written([*rows(0, 2500), *second])
    assert run([command[0], path, *command[1:]]) == 1
    assert "1500 of 4000 rows of the file are left out" in capsys.readouterr().err


def test_a_few_rows_left_out_are_a_remark(written, capsys):
    path = written([*rows(0, 3990), *rows(3990, 10, begin=0)])
    assert run(["lines", path, "--line", "70Hz"]) == 0
    assert "the time stamps go back" in capsys.readouterr().err


def test_damaged_rows_without_stamps_count_too(tmp_path):
    lines = [f"{k % 7},{k % 5},{k % 3}" for k in range(1000)]
    for k in range(0, 1000, 40):
        lines[k + 9] = "1,#,@"
    path = tmp_path / "x.csv"
    path.write_text("a,b,c\n" + "\n".join(lines) + "\n")
    assert open_recording(path, rate="1 kHz").reasons == [
        "25 of 1000 rows of the file are left out (2.5 %)"
    ]


def test_the_reason_is_in_the_document(written, capsys):
    path = written([*rows(0, 2500), *rows(2500, 1500, begin=0)])
    for command, key in (
        (["lines", path, "--line", "70Hz"], "recording_reasons"),
        (["spectrum", path], "reasons"),
    ):
        assert run([*command, "--json"]) == 1
        assert json.loads(capsys.readouterr().out)[key] == [
            "1500 of 4000 rows of the file are left out (37.5 %)"
        ]


@pytest.mark.parametrize(("part", "code"), [([], 1), (["--to", "1s"], 0)])
def test_a_recording_cut_short_is_a_reason_but_not_for_a_stretch_before(
    tmp_path, part, code, capsys
):
    path = tmp_path / "cut.mfr"
    rng = np.random.default_rng(2)
    pd = 1000 * np.cos(2 * np.pi * 0.07 * np.arange(4000)) + rng.normal(0, 9, 4000)
    announced = Announcement(3, 1000.0, "int16", 50, [ChannelInfo("pd", "V", 0.001)])
    writer = Writer(path, Header(announced, 10**18))
    samples = np.rint(pd)[:, None].astype(np.int16)
    for row in seal_rows(
        pack_frames(samples, slots=50, first_index=0, first_sequence=0, stream=3, clock=0, flags=0)
    ):
        writer.append(row.tobytes())
    writer.close()
    for command in (["lines", "--line", "70Hz"], ["spectrum"]):
        assert run([command[0], str(path), *command[1:], *part]) == code
        assert (f"not to be trusted: {path}: {NO_END}" in capsys.readouterr().err) == (code == 1)
    assert run(["export", str(path), "--out", str(tmp_path / f"{code}.csv")]) == 0
    assert NO_END in capsys.readouterr().err
