"""The two threads of a recording: one only reads and queues, the other places and writes."""

import contextlib
import logging
import threading
import time
from collections.abc import Callable
from dataclasses import dataclass
from typing import Protocol

from firmware_bridge.byte_queue import Arrival, ByteQueue
from firmware_bridge.drive_desk import DriveDesk
from firmware_bridge.drive_lines import DriveError
from firmware_bridge.envelope import Discarded, Unwrapper
from firmware_bridge.errors import BridgeError, DeviceFailedError
from firmware_bridge.lock_in_start import LockInError, LockInStart
from firmware_bridge.message import (
    CommandCode,
    MessageError,
    MessageType,
    Reply,
    encode_command,
    parse_message,
)
from firmware_bridge.port import ByteSource, PortError, PortLostError, open_port
from firmware_bridge.silence import Silence
from firmware_bridge.sink import Sink
from firmware_bridge.text_frames import TextFramer

__all__ = ["Progress", "RecordingSession", "Watcher"]

_log = logging.getLogger(__name__)

_IDLE_S = 1.5  # a board that samples sends a frame every 0.5 s at least
_SAMPLED = (MessageType.SAMPLES, MessageType.LOCK_IN)
_ASK_S = 0.5  # how often an unannounced board is asked again, and others that the host is there
_REOPEN_S = 0.25


@dataclass(frozen=True, slots=True)
class Progress:
    """Where a recording stands.

    Parameters
    ----------
    samples : int
        Samples on the grid so far.
    wanted : int or None
        How many there shall be.
    rate_hz : float or None
        Announced rate.
    gaps, over_range_frames, bytes_discarded : int
        So far.
    fill : float
        Of the queue, 0 to 1.
    is_lost : bool
        Whether the port is gone and waited for.
    """

    samples: int
    wanted: int | None
    rate_hz: float | None
    gaps: int
    over_range_frames: int
    bytes_discarded: int
    fill: float
    is_lost: bool


class Watcher(Protocol):
    """Who is told how a port stands, instead of an end to the recording."""

    def state(self, state: str, reason: str) -> None:
        """Take note of "connected", "gone" or "silent".

        Parameters
        ----------
        state, reason : str
            Which, and why.
        """

    def reply(self, text: str, *, refused: bool) -> None:
        """Take note of what the board says to a command.

        Parameters
        ----------
        text : str
            One line.
        refused : bool
            Whether it does not obey.
        """


class RecordingSession:
    """The two threads of one recording and what they share.

    Parameters
    ----------
    source : ByteSource
        The open port.
    baud : int
        Symbols per second, for opening it again.
    intake : Sink
        Where messages go.
    framer : TextFramer, optional
        Where the board prints text.
    reconnect : bool
        Wait for a port that is gone.
    stop : threading.Event
        Ends the recording when set.
    desk : DriveDesk, optional
        Who wants drive lines of the board.
    watcher : Watcher, optional
        Who is told of a port that is gone, of silence and of refusals; nothing of these ends the
        session then.
    lock_in : LockInStart, optional
        What the board is asked for instead of samples.
    """

    def __init__(
        self,
        source: ByteSource,
        baud: int,
        intake: Sink,
        framer: TextFramer | None,
        reconnect: bool,
        stop: threading.Event,
        desk: DriveDesk | None = None,
        watcher: Watcher | None = None,
        lock_in: LockInStart | None = None,
    ) -> None:
        self._source, self._name, self._baud = source, source.name, baud
        self._intake, self._framer, self._reconnect = intake, framer, reconnect
        self._unwrapper = Unwrapper()
        self._stop = stop
        self._desk = desk
        self._watcher = watcher
        self._lock_in = lock_in
        self._is_started = False
        self._ended = threading.Event()  # the reader will put nothing more
        self._written = threading.Event()
        self._queue = ByteQueue()
        self._failure: BaseException | None = None
        self._is_lost = False
        self._silence = Silence(self._name, baud, framer is not None)
        self._request = 0

    def run(self, progress: Callable[[Progress], None] | None) -> None:
        """Record until the end, and raise what went wrong.

        Parameters
        ----------
        progress : callable, optional
            Called a few times a second.

        Raises
        ------
        BridgeError
            If the file cannot be made.
        DeviceFailedError
            If the port or the file failed midway.
        """
        reader = threading.Thread(target=self._read, name="port reader", daemon=True)
        writer = threading.Thread(target=self._write, name="recording writer", daemon=True)
        reader.start()
        writer.start()
        with contextlib.suppress(KeyboardInterrupt):  # Ctrl-C is how a recording is ended
            while not self._written.wait(0.1):
                if progress is not None:
                    progress(self._progress())
        self._stop.set()
        self._queue.close()
        for thread in (reader, writer):
            while thread.is_alive():
                with contextlib.suppress(KeyboardInterrupt):  # what came is still being written
                    thread.join()
        if progress is not None:
            progress(self._progress())
        if self._failure is not None:
            raise self._failure

    def _progress(self) -> Progress:
        intake = self._intake
        return Progress(
            intake.reached,
            intake.wanted,
            intake.rate_hz,
            intake.gaps,
            intake.flagged,
            intake.bytes_discarded,
            self._queue.fill,
            self._is_lost,
        )

    # The reader's thread.

    def _read(self) -> None:
        asked_s: float | None = None  # None: the port has just been opened
        try:
            while not self._stop.is_set():
                now_s = time.monotonic()
                if asked_s is None or now_s - asked_s >= _ASK_S:
                    self._ask(is_first=asked_s is None)
                    asked_s = now_s
                self._drive()
                self._begin()
                try:
                    data = self._source.read()
                except PortLostError as error:
                    self._queue.put(_arrival(lost=str(error)))
                    if not self._reconnect or not self._reopen():
                        return
                    asked_s = None
                    continue
                if data:
                    self._queue.put(_arrival(data))
        except Exception as error:  # noqa: BLE001  # a thread's failure is the recording's
            self._failure = error
            self._stop.set()
        finally:
            self._ended.set()
            self._leave()
            self._source.close()

    def _leave(self) -> None:
        """Bring the drive to rest and the board to a stop; on a port that is gone nothing happens."""
        if self._framer is not None:
            return
        if self._desk is not None:
            for wait_s, requests in self._desk.fall(self._intake.announcement):
                time.sleep(wait_s)
                if not all(self._say(code, arguments) for code, arguments in requests):
                    break  # it goes to rest by itself once nobody speaks
        self._say(CommandCode.STOP)

    def _drive(self) -> None:
        """Send what is due for the drive."""
        if self._desk is None or self._framer is not None:
            return
        try:
            requests = self._desk.due(self._intake.announcement)
        except BridgeError as error:
            self._refused(str(error))
            return
        for code, arguments in requests:
            self._desk.sent(self._request + 1, code)
            self._say(code, arguments)
        for notice in self._desk.notices():
            if self._watcher is None:
                _log.warning("%s", notice)
            else:
                self._watcher.reply(notice, refused=True)

    def _hear(self, message: bytes) -> None:
        """Hear what the board says to commands about its drive and lock-in."""
        try:
            reply = parse_message(message)
        except MessageError:
            return
        if not isinstance(reply, Reply):
            return
        if self._lock_in is not None and reply.code == CommandCode.START and reply.status:
            reason = reply.text or "it has none"
            raise LockInError(f"{self._name}: the board refuses the lock-in: {reason}")
        if self._desk is not None:
            self._heard(self._desk.heard(reply))

    def _heard(self, answer: tuple[str, bool] | None) -> None:
        if answer is not None and answer[1]:
            self._refused(answer[0])
        elif answer is not None and self._watcher is not None:
            self._watcher.reply(answer[0], refused=False)

    def _refused(self, reason: str) -> None:
        if self._watcher is None:
            raise DriveError(f"{self._name}: {reason}")
        self._watcher.reply(reason, refused=True)

    def _ask(self, *, is_first: bool) -> None:
        if self._framer is not None:
            return
        if is_first or not self._intake.is_announced:
            self._say(CommandCode.IDENTIFY)
        else:
            self._say(CommandCode.KEEP_ALIVE)  # else a board's drive goes to rest after 2 s
        # A board that was reset waits to be started; one that sends goes on as it is.
        if is_first or self._silence.idle_s > _IDLE_S + self._every_s:
            self._is_started = False
        self._begin()

    @property
    def _every_s(self) -> float:
        """From one lock-in result to the next [s], 0 where samples are expected."""
        asked_s = 0.0 if self._lock_in is None else self._lock_in.time_s
        return max(asked_s, self._intake.every_s)

    def _begin(self) -> None:
        """Have the board send, once what is asked for can be said."""
        if self._is_started or self._framer is not None:
            return
        arguments = b""
        if self._lock_in is not None:
            announced = self._intake.announcement
            # Its sums begin with the start: the lines must be there before.
            if announced is None or (self._desk is not None and not self._desk.is_settled()):
                return
            arguments = self._lock_in.arguments(announced)
            self._say(CommandCode.STOP)
        self._is_started = True
        self._say(CommandCode.START, arguments)

    def _say(self, code: CommandCode, arguments: bytes = b"") -> bool:
        self._request += 1
        return self._source.write(encode_command(code, self._request % 65536, arguments))

    def _reopen(self) -> bool:
        self._source.close()
        while not self._stop.wait(_REOPEN_S):
            try:
                self._source = open_port(self._name, self._baud)
            except PortError as error:
                _log.debug("%s", error)
            else:
                self._queue.put(_arrival(is_back=True))
                return True
        return False

    # The writer's thread.

    def _write(self) -> None:
        try:
            self._write_until_done()
        except BaseException as error:  # noqa: BLE001  # a thread's failure is the recording's
            self._failure = self._failure or error
        finally:
            self._stop.set()
            self._queue.close()
            try:
                self._intake.close(is_as_asked=self._failure is None)
            except BaseException as error:  # noqa: BLE001  # else the end would be waited for forever
                self._failure = self._failure or error
            self._written.set()

    def _write_until_done(self) -> None:
        while not self._intake.is_complete:
            ended = self._ended.is_set()
            arrivals = self._queue.take(0.05)
            if ended and not arrivals:
                self._finish_text()
                return
            for arrival in arrivals:
                self._take(arrival)
            now_ns, unix_ns = time.monotonic_ns(), time.time_ns()
            if self._framer is not None:
                for piece in self._framer.tick(now_ns * 1e-9):
                    self._intake.take(piece, now_ns, unix_ns)
            self._intake.tick(now_ns, unix_ns)
            self._check_silence()

    def _finish_text(self) -> None:
        if self._framer is not None:
            for piece in self._framer.finish():
                self._intake.take(piece, time.monotonic_ns(), time.time_ns())

    def _take(self, arrival: Arrival) -> None:
        """Hand one arrival on."""
        if arrival.lost:
            self._lost(arrival.lost)
        elif arrival.is_back:
            self._back()
        else:
            self._silence.note(arrival.data, *self._take_bytes(arrival))

    def _take_bytes(self, arrival: Arrival) -> tuple[bool, bool, bool]:
        """Return whether anything valid was in it, what is recorded, and our own commands."""
        framer = self._framer
        if framer is not None:
            before = framer.heard
            for line in framer.feed(arrival.data, arrival.monotonic_ns * 1e-9):
                self._intake.take(line, arrival.monotonic_ns, arrival.unix_ns)
            return framer.heard > before, framer.heard > before, False
        pieces = self._unwrapper.feed(arrival.data)
        for piece in pieces:
            if isinstance(piece, bytes) and piece[0] == MessageType.REPLY:
                self._hear(piece)
            if self._desk is None or self._is_wanted(piece, self._desk):
                self._intake.take(piece, arrival.monotonic_ns, arrival.unix_ns)
        # Our own commands come back from a port that loops or echoes: they are no sign of a board.
        kinds = {piece[0] for piece in pieces if isinstance(piece, bytes)}
        others = kinds - {MessageType.COMMAND}
        return bool(others), not others.isdisjoint(_SAMPLED), MessageType.COMMAND in kinds

    def _is_wanted(self, piece: bytes | Discarded, desk: DriveDesk) -> bool:
        """Return whether a piece is to be kept."""
        # Samples of a drive that is not yet as wanted would spoil every fit.
        is_sample = isinstance(piece, bytes) and piece[0] in _SAMPLED
        try:
            return not is_sample or desk.is_settled()
        except DriveError as error:
            raise DriveError(f"{self._name}: {error}") from None

    def _back(self) -> None:
        self._is_lost = False
        if self._desk is not None:
            self._desk.away()
        if self._framer is not None:
            self._framer.restart()
        self._silence.reset()
        self._intake.away()
        self._intake.remark(f"{self._name} is back")
        if self._watcher is not None:
            self._watcher.state("connected", f"{self._name} is back")
        else:
            _log.warning("%s is back", self._name)

    def _lost(self, reason: str) -> None:
        for piece in self._unwrapper.close():
            self._intake.take(piece, time.monotonic_ns(), time.time_ns())
        if not self._reconnect:
            self._finish_text()
        self._intake.remark(f"{self._name} is gone: {reason}")
        if not self._reconnect:
            raise DeviceFailedError(f"{self._name} failed: {reason}; {self._kept()}")
        self._is_lost = True
        if self._watcher is not None:
            self._watcher.state("gone", reason)
        else:
            _log.warning("%s is gone (%s); waiting for it", self._name, reason)

    def _check_silence(self) -> None:
        if self._is_lost:
            return
        intake = self._intake
        complaint = self._silence.maybe_complaint(
            intake.is_known,
            bool(intake.files),
            self._reconnect,
            self._every_s,
        )
        if complaint and self._watcher is not None:
            self._watcher.state("silent", complaint)
        elif complaint:
            self._finish_text()
            raise DeviceFailedError(f"{complaint}; {self._kept()}")

    def _kept(self) -> str:
        if not self._intake.files:
            return "nothing was recorded"
        rate_hz = self._intake.rate_hz or 1.0
        reached = self._intake.reached
        names = ", ".join(str(path) for path in self._intake.files)
        return f"kept {reached} samples ({reached / rate_hz:.4g} s) in {names}"


def _arrival(data: bytes = b"", *, lost: str = "", is_back: bool = False) -> Arrival:
    return Arrival(data, time.monotonic_ns(), time.time_ns(), lost, is_back)
