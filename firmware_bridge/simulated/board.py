"""The simulated bench's board: it speaks the wire, in memory or behind a pseudo-terminal.

Behind the terminal it waits for ``start``, announces itself under a new stream id and sends frames
as fast as they are read: the terminal's own back-pressure paces it, so nothing is ever dropped.
Or it runs in real time, to be looked at while drive lines are set over the wire.
"""

import errno
import fcntl
import logging
import os
import select
import termios
import threading
import tty
from collections.abc import Iterator
from types import TracebackType
from typing import Self

import numpy as np

from firmware_bridge.decoder import Command, Decoder
from firmware_bridge.frame import (
    Announcement,
    ChannelInfo,
    CommandCode,
    Reply,
    encode_announcement,
    encode_reply,
    encode_stream,
)
from firmware_bridge.simulated.bench import SimulatedBench
from firmware_bridge.simulated.live_drive import LiveDrive
from firmware_bridge.simulated.setup import Setup
from firmware_bridge.simulated.wired_drive import Pace, WiredDrive

__all__ = ["SimulatedBoard", "wire_bytes"]

_log = logging.getLogger(__name__)

FRAME_S = 0.1  # a frame leaves at least every 0.5 s however slow the board; ours is quicker
SPEED = 1000.0  # announced: the simulated clock runs as fast as the reader takes it
FRAMES_AT_ONCE = 16
_WAIT_S = 0.05


def announcement_of(bench: SimulatedBench, stream: int, speed: float = SPEED) -> Announcement:
    """Return what the board says about itself for one stream."""
    step_v, half = bench.converter.step_v, 2 ** (bench.converter.bits - 1)
    channels = [
        ChannelInfo(name, "V", step_v, 0.0, -half, half - 1) for name in ("photodiode", "drive")
    ]
    return Announcement(
        stream=stream,
        rate_hz=bench.rate_hz,
        format="int16",
        slots=_slots(bench.rate_hz),
        channels=channels,
        board="simulated bench",
        firmware="midfringe",
        simulated=True,
        clock_hz=1_000_000,
        speed=speed,
    )


def _slots(rate_hz: float) -> int:
    return max(1, min(500, round(rate_hz * FRAME_S)))


def wire_bytes(
    bench: SimulatedBench,
    setup: Setup,
    stream: int,
    number: int = 1,
    *,
    speed: float = SPEED,
    frames_at_once: int = FRAMES_AT_ONCE,
    drive: LiveDrive | None = None,
) -> Iterator[bytes]:
    """Yield the bytes of one recording, endlessly: the announcement, then frames.

    Parameters
    ----------
    bench : SimulatedBench
        The bench.
    setup : Setup
        Its state.
    stream : int
        Stream id.
    number : int
        Which recording of the session this is: each has noise of its own.
    speed : float
        How fast its clock runs, as announced.
    frames_at_once : int
        Frames in what is yielded.
    drive : LiveDrive, optional
        Lines set while it runs.

    Yields
    ------
    bytes
        Whole messages as they go over the wire.
    """
    announcement = announcement_of(bench, stream, speed)
    yield encode_announcement(announcement)
    samples = bench.start(setup, number, drive)
    low, high = announcement.channels[0].low, announcement.channels[0].high
    slots, sent, sequence = announcement.slots, 0, 0
    while True:
        codes = samples.block(slots * frames_at_once)
        yield encode_stream(
            codes,
            slots=slots,
            first_index=sent,
            first_sequence=sequence,
            stream=stream,
            clock=round(sent * announcement.clock_hz / bench.rate_hz),
            ticks_per_sample=announcement.clock_hz / bench.rate_hz,
            over_range=np.any((codes == low) | (codes == high), axis=1),
        )
        sent += codes.shape[0]
        sequence += frames_at_once


class SimulatedBoard:
    """A board on a pseudo-terminal; use it in a ``with`` block.

    Parameters
    ----------
    bench : SimulatedBench
        The bench behind it.
    setup : Setup
        Its state at first; `set_up` changes it.
    speed : float, optional
        Seconds of its clock per second, such as 1 for real time; by default as fast as it is read.

    Attributes
    ----------
    port : str
        Path of the terminal to open, such as ``/dev/pts/3``.
    """

    def __init__(self, bench: SimulatedBench, setup: Setup, *, speed: float | None = None) -> None:
        self._bench, self._setup, self._speed = bench, setup, speed
        self._wired = WiredDrive(bench)
        self._pace = Pace(_slots(bench.rate_hz) / bench.rate_hz / speed) if speed else None
        self._stream = 0
        self._number = 1
        self._source: Iterator[bytes] | None = None
        self._outbox = b""
        self._lock = threading.Lock()
        self._stopping = threading.Event()

    def __enter__(self) -> Self:
        self._master, self._slave = os.openpty()
        tty.setraw(self._slave)
        flags = fcntl.fcntl(self._master, fcntl.F_GETFL)
        fcntl.fcntl(self._master, fcntl.F_SETFL, flags | os.O_NONBLOCK)
        self.port = os.ttyname(self._slave)
        self._thread = threading.Thread(target=self._run, name="simulated board", daemon=True)
        self._thread.start()
        return self

    def __exit__(
        self,
        kind: type[BaseException] | None,
        error: BaseException | None,
        trace: TracebackType | None,
    ) -> None:
        self._stopping.set()
        self._thread.join()
        os.close(self._master)
        os.close(self._slave)

    def set_up(self, setup: Setup) -> None:
        """Stop sending and put the bench into another state, for the next ``start``."""
        with self._lock:
            self._setup = setup
            self._number += 1
            self._source, self._outbox = None, b""
            # Only here, while nobody reads: a reader would find a port that was ready and is empty,
            # which is how a port looks that is gone.
            termios.tcflush(self._slave, termios.TCIFLUSH)

    def _run(self) -> None:
        decoder = Decoder()
        while not self._stopping.is_set():
            # without a pace it sends whenever there is room
            wait_s = 0.0 if self._pace is None else self._pace.wait_s(_WAIT_S)
            busy = bool(self._outbox) or (self._source is not None and wait_s <= 0)
            ready, room, _ = select.select(
                [self._master],
                [self._master] if busy else [],
                [],
                wait_s if wait_s > 0 else _WAIT_S,
            )
            with self._lock:
                self._wired.check_silence()
                if ready:
                    self._obey(decoder)
                if room:
                    self._send()

    def _obey(self, decoder: Decoder) -> None:
        try:
            received = os.read(self._master, 4096)
        except OSError as error:
            if error.errno not in (errno.EAGAIN, errno.EIO):
                raise
            return
        for event in decoder.feed(received):
            if isinstance(event, Command):
                self._answer(event)

    def _answer(self, command: Command) -> None:
        self._wired.hear()
        if command.code == CommandCode.START and command.arguments[:1] not in (b"", b"\1"):
            answer = Reply(command.code, command.request, 2, "no such start")  # it has no lock-in
            self._outbox += encode_reply(answer)
        elif command.code == CommandCode.START and self._source is not None:
            self._outbox += encode_reply(Reply(command.code, command.request))  # sends already
        elif command.code == CommandCode.START:
            self._stream += 1
            self._outbox = encode_reply(Reply(command.code, command.request))
            self._source = self._begin()
        elif command.code == CommandCode.STOP:
            self._source = None
            self._outbox = encode_reply(Reply(command.code, command.request))
        elif command.code == CommandCode.IDENTIFY:
            announcement = announcement_of(self._bench, self._stream, self._speed or SPEED)
            self._outbox += encode_announcement(announcement)
        elif command.code in WiredDrive.CODES:
            refusal = self._wired.maybe_refusal(command)
            status = 2 if refusal else 0
            self._outbox += encode_reply(Reply(command.code, command.request, status, refusal))
        elif command.code != CommandCode.KEEP_ALIVE:
            self._outbox += encode_reply(Reply(command.code, command.request, status=1))

    def _begin(self) -> Iterator[bytes]:
        if self._pace is None:
            return wire_bytes(
                self._bench, self._setup, self._stream, self._number, drive=self._wired.drive
            )
        self._pace.begin()
        return wire_bytes(
            self._bench,
            self._setup,
            self._stream,
            self._number,
            speed=self._speed or SPEED,
            frames_at_once=1,
            drive=self._wired.drive,
        )

    def _send(self) -> None:
        if not self._outbox and self._source is not None:
            self._outbox = next(self._source)
            if self._pace is not None:
                self._pace.count()
        try:
            sent = os.write(self._master, self._outbox)
        except BlockingIOError:
            return
        self._outbox = self._outbox[sent:]
