from firmware_bridge.live_line import LiveLine, line_of
from firmware_bridge.recording_progress import Progress


def progress(samples=1000, **changes):
    values = {
        "samples": samples, "wanted": None, "rate_hz": 500.0, "gaps": 0, "over_range_frames": 0,
        "bytes_discarded": 0, "fill": 0.0, "is_lost": False,
    }  # fmt: skip
    return Progress(**(values | changes))


def test_it_shows_time_rate_gaps_over_range_and_buffer():
    assert line_of(progress(), 499.2) == "2.0 s  499.2 Hz  0 gaps  buffer 0%"
    busy = progress(gaps=1, over_range_frames=3, bytes_discarded=12, fill=0.25, wanted=5000)
    assert line_of(busy, 1.0) == (
        "2.0/10 s  1 Hz  1 gap  3 frames over range  12 B discarded  buffer 25%"
    )
    assert line_of(progress(is_lost=True), None) == "2.0 s  0 gaps  waiting for the port"
    assert line_of(progress(rate_hz=None), None) == "waiting for the board"


def test_a_shorter_line_covers_the_longer_one(monkeypatch):
    clock = iter([0.0, 1.0, 1.1, 2.0])
    monkeypatch.setattr("firmware_bridge.live_line.time.monotonic", lambda: next(clock))
    written = []
    line = LiveLine(written.append)
    line.show(progress(0, is_lost=True))
    line.show(progress(500))
    line.show(progress(550))  # too soon
    line.show(progress(1000))
    line.end()
    line.end()
    assert written == [
        "\r0.0 s  0 gaps  waiting for the port",
        "\r1.0 s  500 Hz  0 gaps  buffer 0%   ",
        "\r2.0 s  500 Hz  0 gaps  buffer 0%",
        "\n",
    ]


def test_a_message_of_the_log_gets_a_line_of_its_own(monkeypatch):
    monkeypatch.setattr("firmware_bridge.live_line.time.monotonic", lambda: 0.0)
    written = []
    line = LiveLine(written.append)
    line.show(progress(rate_hz=None))
    assert line.step_aside(None)
    assert line.step_aside(None)
    assert written == ["\rwaiting for the board", "\n"]
