"""Recordings that go on in a next file, and blocks while they are written: nothing lost between."""

import contextlib
import threading
import time

import numpy as np
import pytest
from wire_board import RATE_HZ, SLOTS, PtyLink, WireBoard, ramp

from firmware_bridge.announcement import Announcement, ChannelInfo, encode_announcement
from firmware_bridge.envelope import Unwrapper
from firmware_bridge.errors import BridgeError
from firmware_bridge.frame import encode_frame
from firmware_bridge.gap import Gap
from firmware_bridge.intake import Intake
from firmware_bridge.recorder import record
from firmware_bridge.recording import open_mfr
from firmware_bridge.rotation import Rotation


def take(intake, data):
    for piece in Unwrapper().feed(b"\0" + data + b"\0"):
        intake.take(piece, time.monotonic_ns(), time.time_ns())


def frames(order):
    return [
        encode_frame(ramp(k * SLOTS, SLOTS), index=k * SLOTS, sequence=k, stream=1) for k in order
    ]


def announced():
    infos = [ChannelInfo("pd", "V", 0.5), ChannelInfo("drive", "V", 1.0)]
    return encode_announcement(Announcement(1, RATE_HZ, "int16", SLOTS, infos))


def rotated(tmp_path, order, **settings):
    ended = []
    intake = Intake(
        tmp_path / "a.mfr", rotation=Rotation(on_ended=ended.append, **settings), info={"port": "x"}
    )
    take(intake, announced())
    for frame in frames(order):
        take(intake, frame)
    intake.close()
    return intake, [open_mfr(path) for path in intake.files], ended


def indices(recording):
    low, high = recording.trace("pd").values / 0.5, recording.trace("drive").values
    return low + 2**15 * high


def test_every_sample_stands_in_one_file(tmp_path):
    intake, recordings, ended = rotated(tmp_path, range(100), rotate_s=0.5)
    assert [recording.length for recording in recordings] == [1000] * 5
    together = np.concatenate([indices(recording) for recording in recordings])
    np.testing.assert_array_equal(together, np.arange(5000))
    assert all(recording.has_end and recording.remarks == [] for recording in recordings)
    assert ended == intake.files[:-1]
    assert [path.name for path in intake.files] == ["a.mfr", *(f"a-{k}.mfr" for k in range(2, 6))]
    assert [recording.header.info.get("follows") for recording in recordings] == [
        None,
        *(path.name for path in intake.files[:-1]),
    ]
    assert (intake.samples, intake.reached, intake.gaps) == (5000, 5000, 0)


def test_a_file_stays_below_its_size(tmp_path):
    intake, recordings, _ = rotated(tmp_path, range(200), rotate_bytes=10_000)
    sizes = [path.stat().st_size for path in intake.files]
    assert max(sizes) <= 10_000
    assert min(sizes[:-1]) > 8_000
    assert sum(recording.length for recording in recordings) == 10_000


def test_what_is_missing_at_the_seam_is_missing_in_the_file_that_ends(tmp_path):
    order = [k for k in range(40) if k not in (19, 20)]
    intake, recordings, _ = rotated(tmp_path, order, rotate_s=0.5)
    assert [recording.gaps for recording in recordings] == [[Gap(950, 100)], []]
    assert [recording.length for recording in recordings] == [1050, 950]
    assert (intake.gaps, intake.reached) == (1, 2000)


def test_frames_that_come_late_or_twice_over_the_seam_are_kept_once(tmp_path):
    order = [*range(18), 19, 20, 21, 18, 5, *range(22, 40)]
    intake, recordings, _ = rotated(tmp_path, order, rotate_s=0.5)
    together = np.concatenate([indices(recording) for recording in recordings])
    there = np.sort(together[~np.isnan(together)])
    np.testing.assert_array_equal(there, np.arange(2000))
    assert intake.samples == 2000
    assert intake.bytes_discarded > 4 * SLOTS


def test_a_frame_held_over_the_seam_is_placed_once(tmp_path):
    """Frames swapped about the seam: none counts as a duplicate that is none."""
    intake = Intake(tmp_path / "a.mfr", rotation=Rotation(rotate_s=0.5))
    take(intake, announced())
    count = round(0.5 * RATE_HZ / SLOTS)
    order = [*range(count - 2), count + 2, count, count - 2, count - 1, count + 1]
    for data in frames([*order, *range(count + 3, count + 10)]):
        take(intake, data)
    intake.close()
    assert (intake.samples, intake.bytes_discarded) == ((count + 10) * SLOTS, 0)


def test_a_board_that_restarts_beyond_the_end_ends_the_recording(tmp_path):
    intake = Intake(tmp_path / "a.mfr", duration_s=1.0, rotation=Rotation(rotate_s=0.5))
    take(intake, announced())
    for data in frames(range(round(0.55 * RATE_HZ / SLOTS))):
        take(intake, data)
    again = encode_announcement(
        Announcement(
            2,
            RATE_HZ,
            "int16",
            SLOTS,
            [ChannelInfo("pd", "V", 0.5), ChannelInfo("drive", "V", 1.0)],
        )
    )
    late = time.monotonic_ns() + 2_000_000_000
    first = encode_frame(ramp(0, SLOTS), index=0, sequence=0, stream=2)
    for data in (again, first):
        for piece in Unwrapper().feed(b"\0" + data + b"\0"):
            intake.take(piece, late, time.time_ns())
    intake.close()
    assert intake.is_complete


def test_the_next_files_are_named_by_who_asks(tmp_path):
    intake, _, _ = rotated(
        tmp_path, range(30), rotate_s=0.25, next_path=lambda n: tmp_path / f"hour-{n:03d}.mfr"
    )
    assert [path.name for path in intake.files] == ["a.mfr", "hour-002.mfr", "hour-003.mfr"]


@pytest.mark.parametrize(
    ("settings", "message"),
    [
        ({"rotate_bytes": 0}, "rotate_bytes must be > 0, got 0"),
        ({"rotate_s": 0.0}, r"rotate_s must be > 0 s and finite, got 0\.0"),
        ({"rotate_s": float("nan")}, "rotate_s must be > 0 s and finite, got nan"),
    ],
)
def test_a_rotation_that_makes_no_sense_is_refused(settings, message):
    with pytest.raises(BridgeError, match=f"^{message}$"):
        Rotation(**settings)


def test_blocks_and_files_of_a_rotated_recording_over_a_port(tmp_path):
    blocks = []
    with contextlib.closing(PtyLink()) as link:
        board = WireBoard(link, damage=lambda number, frame: b"" if number == 7 else frame)

        def run():
            while not link.received():
                time.sleep(0.005)
            board.run(200)

        thread = threading.Thread(target=run, daemon=True)
        thread.start()
        summary = record(
            link.port, tmp_path / "a.mfr", duration_s=1.3337, rotate_s=0.5, on_block=blocks.append
        )
    assert summary.samples == 2667
    assert summary.duration_s == pytest.approx(2667 / RATE_HZ, rel=1e-12)
    assert [open_mfr(path).length for path in summary.files] == [1000, 1000, 667]
    values = np.full((2667, 2), np.nan)
    for block in blocks:
        values[block.start_index : block.start_index + len(block.values)] = block.values
    expected = ramp(0, 2667) * [0.5, 1.0]
    missing = np.isnan(values).any(axis=1)
    np.testing.assert_array_equal(np.flatnonzero(missing), np.arange(350, 400))
    np.testing.assert_array_equal(values[~missing], expected[~missing])


def test_what_a_block_taker_raises_ends_the_recording_and_keeps_it(tmp_path):
    def taker(block):
        if block.start_index >= 500:
            raise ArithmeticError("enough")

    with contextlib.closing(PtyLink()) as link:
        threading.Thread(
            target=lambda: (time.sleep(0.3), WireBoard(link).run(60)), daemon=True
        ).start()
        with pytest.raises(ArithmeticError, match="enough"):
            record(link.port, tmp_path / "a.mfr", on_block=taker)
    assert open_mfr(tmp_path / "a.mfr").length == 550
