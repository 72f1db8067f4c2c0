"""What a live port does with each message: show it, and write it while a recording runs."""

import time
from collections import deque
from collections.abc import Callable
from pathlib import Path

from firmware_bridge.announcement import Announcement
from firmware_bridge.errors import BridgeError
from firmware_bridge.intake import Intake
from firmware_bridge.line_frames import Piece
from firmware_bridge.live_events import LiveEvent, LiveRecording, LiveReply, LiveState
from firmware_bridge.live_view import LiveView
from firmware_bridge.message_head import MessageType

__all__ = ["LiveIntake"]

_TOLD_NS = 500_000_000
_SILENT_S = 1.5  # a board that sends frames sends one every 0.5 s at least
_SILENT_TEXT_S = 5.0


class LiveIntake:
    """A `Sink` and `Watcher` whose recordings begin and end while the port stays open.

    Parameters
    ----------
    emit : callable
        Takes each `LiveEvent`, at once.
    info : dict of str to str
        For the headers of recordings.
    is_text : bool
        Whether the board prints lines.
    """

    wanted: int | None = None
    every_s = 0.0
    is_complete = False

    def __init__(
        self, emit: Callable[[LiveEvent], None], info: dict[str, str], is_text: bool
    ) -> None:
        self._emit, self._info = emit, info
        self._view = LiveView(emit)
        self._intake: Intake | None = None
        self._orders: deque[Path | None] = deque()
        self._told_ns = 0
        self._silent_s = _SILENT_TEXT_S if is_text else _SILENT_S
        self._heard_s = time.monotonic()
        self._state = ""
        self.files: list[Path] = []
        """The files of the recording that runs."""

    @property
    def announcement(self) -> Announcement | None:
        """What the board said last about itself."""
        return self._view.announcement

    @property
    def is_announced(self) -> bool:
        """Whether what comes now can be shown."""
        return self._view.is_announced

    @property
    def is_known(self) -> bool:
        """Whether a board has announced itself."""
        return self._view.announcement is not None

    @property
    def rate_hz(self) -> float | None:
        """Announced rate."""
        return None if self._view.announcement is None else self._view.announcement.rate_hz

    @property
    def reached(self) -> int:
        """Grid samples of the recording that runs."""
        return 0 if self._intake is None else self._intake.reached

    @property
    def gaps(self) -> int:
        """Gaps of the recording that runs."""
        return 0 if self._intake is None else self._intake.gaps

    @property
    def flagged(self) -> int:
        """Over-range frames of the recording that runs."""
        return 0 if self._intake is None else self._intake.flagged

    @property
    def bytes_discarded(self) -> int:
        """Bytes thrown away since the recording began."""
        return 0 if self._intake is None else self._intake.bytes_discarded

    def order(self, path: Path | None) -> None:
        """Have the next messages written to another file, or to none; by any thread.

        Nothing is lost between two recordings: a frame stands in one or in the other.

        Parameters
        ----------
        path : Path or None
            The recording to make; it must not exist.
        """
        self._orders.append(path)

    def take(self, piece: Piece, monotonic_ns: int, unix_ns: int) -> None:
        """Show and write one message.

        Parameters
        ----------
        piece : bytes, Discarded, Pause or Remark
            As `Intake.take` has it.
        monotonic_ns, unix_ns : int
            The host's clocks at its arrival.
        """
        self._obey()
        if isinstance(piece, bytes):
            if piece[0] != MessageType.COMMAND:
                self._heard_s = time.monotonic()
            if piece[0] in (MessageType.SAMPLES, MessageType.LOCK_IN):
                self.state("connected", "")
        self._with_recording(lambda intake: intake.take(piece, monotonic_ns, unix_ns))
        if isinstance(piece, bytes):
            self._view.take(piece, monotonic_ns, unix_ns)

    def tick(self, monotonic_ns: int, unix_ns: int) -> None:
        """Do what is due by time.

        Parameters
        ----------
        monotonic_ns, unix_ns : int
            The host's clocks now.
        """
        self._obey()
        self._with_recording(lambda intake: intake.tick(monotonic_ns, unix_ns))
        if self._intake is not None and monotonic_ns - self._told_ns >= _TOLD_NS:
            self._told_ns = monotonic_ns
            self._tell()
        silent_s = time.monotonic() - self._heard_s
        if self._state == "connected" and silent_s > self._silent_s:
            self.state("silent", f"nothing valid came for {self._silent_s:g} s")

    def remark(self, text: str) -> None:
        """Write a remark into the recording that runs.

        Parameters
        ----------
        text : str
            One line.
        """
        self._with_recording(lambda intake: intake.remark(text))

    def away(self) -> None:
        """Take note that the port was away."""
        self._view.away()
        if self._intake is not None:
            self._intake.away()
        self._heard_s = time.monotonic()

    def close(self, *, is_as_asked: bool = True) -> None:
        """End the recording that runs.

        Parameters
        ----------
        is_as_asked : bool
            False where the port failed.
        """
        self._orders.clear()
        self._end(is_as_asked)

    def state(self, state: str, reason: str) -> None:
        """Tell how the port stands, once.

        Parameters
        ----------
        state, reason : str
            Which, and why.
        """
        if state != self._state:
            self._state = state
            self._emit(LiveState(state, reason))

    def reply(self, text: str, *, refused: bool) -> None:
        """Tell what the board says to a command.

        Parameters
        ----------
        text : str
            One line.
        refused : bool
            Whether it does not obey.
        """
        self._emit(LiveReply(text, refused))

    def _obey(self) -> None:
        while self._orders:
            path = self._orders.popleft()
            if self._intake is not None:
                self._end()
            if path is not None:
                self._begin(path)

    def _begin(self, path: Path) -> None:
        intake = Intake(path, info=self._info)
        self._intake, self.files = intake, intake.files
        self._told_ns = 0
        for message in self._view.announcements:
            self._with_recording(lambda there, said=message: there.take(said, 0, 0))  # type: ignore[misc]
        self._tell(path)

    def _end(self, is_as_asked: bool = True, reason: str = "") -> None:
        intake, self._intake, self.files = self._intake, None, []
        if intake is None:
            return
        try:
            intake.close(is_as_asked=is_as_asked)
        except BridgeError as error:
            reason = reason or str(error)
        self._emit(LiveRecording(None, intake.reached, intake.bytes_written, reason))

    def _with_recording(self, action: Callable[[Intake], None]) -> None:
        """Do something with the recording that runs; its failure ends it, not the view."""
        if self._intake is None:
            return
        try:
            action(self._intake)
        except BridgeError as error:
            self._end(is_as_asked=False, reason=str(error))

    def _tell(self, path: Path | None = None) -> None:
        intake = self._intake
        if intake is not None:
            file = intake.files[-1] if intake.files else path
            if file is not None:
                self._emit(LiveRecording(str(file), intake.reached, intake.bytes_written))
