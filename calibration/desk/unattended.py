"""Unattended logging for weeks: rotating recordings, line results, alarms; it goes on by itself."""

import contextlib
import logging
import threading
import time
from dataclasses import dataclass, field
from pathlib import Path
from typing import TYPE_CHECKING, Any

from calibration.desk.ledger_errors import LedgerError
from calibration.desk.line_log import LineLog
from calibration.desk.line_window import MOST_SAMPLES, LineWindow
from calibration.desk.log_folder import LogFolder
from calibration.desk.log_room import LeastRoom
from calibration.desk.logged_channels import ChannelChoice, LoggedChannels
from firmware_bridge.errors import DeviceFailedError
from firmware_bridge.port import PortError

if TYPE_CHECKING:
    from firmware_bridge.live_events import LiveBlock
    from firmware_bridge.recorder import RecordSummary

__all__ = ["LogSettings", "LogSummary", "UnattendedLog"]

_log = logging.getLogger(__name__)

_TIDY_S = 0.3  # records are written twice a second
_AGAIN_S = 5.0  # before a port or disk that failed is tried again


@dataclass(frozen=True)
class LogSettings:
    """How a log runs.

    Parameters
    ----------
    port : str
        Port name or pyserial URL.
    baud : int
        Symbols per second.
    text : bool
        The board prints lines of numbers.
    rate_hz : float or None
        With ``text``, the lines per second.
    reconnect : bool
        Wait for a port that is gone, and for room on a full disk, and go on.
    duration_s : float or None
        End after this by the board's counting [s]; None for never.
    rotate_bytes, rotate_s : optional
        Largest recording [bytes], longest recording [s].
    every_s, over_s : float
        From one line result to the next, and how long a stretch each is fitted over [s].
    channels : ChannelChoice
        What they are called.
    room : LeastRoom or None
        What must fit into what is kept; checked before anything is deleted for its size.
    """

    port: str
    baud: int = 115200
    text: bool = False
    rate_hz: float | None = None
    reconnect: bool = False
    duration_s: float | None = None
    rotate_bytes: int | None = None
    rotate_s: float | None = 3600.0
    every_s: float = 60.0
    over_s: float = 60.0
    channels: ChannelChoice = field(default_factory=ChannelChoice)
    room: LeastRoom | None = None


@dataclass(frozen=True)
class LogSummary:
    """What a log has done.

    Parameters
    ----------
    files : list of Path
        The recordings that it made and that are still there.
    deleted : int
        Recordings deleted in time.
    results : int
        Line results in the ledger.
    alarms : list of Alarm
        In the order of time.
    """

    files: list[Path]
    deleted: int
    results: int
    alarms: list[Any]

    def to_dict(self) -> dict[str, Any]:
        """Return the JSON form."""
        return {
            "files": [str(path) for path in self.files],
            "deleted": self.deleted,
            "results": self.results,
            "alarms": self.alarms,
        }


class UnattendedLog:
    """One log: records into its folder, hands stretches on to its line log.

    Parameters
    ----------
    settings : LogSettings
        How it runs.
    folder : LogFolder
        Where recordings go.
    lines : LineLog or None
        Where stretches go; None for recordings alone.
    """

    def __init__(self, settings: LogSettings, folder: LogFolder, lines: LineLog | None) -> None:
        self._settings, self._folder, self._lines = settings, folder, lines
        self._running: Path | None = None
        self._described: Path | None = None
        self._channels: LoggedChannels | None = None
        self._window: LineWindow | None = None
        self._tidied_s = 0.0
        self._is_room_known = settings.room is None or lines is None
        self._files: list[Path] = []
        self._begun_s = time.monotonic()

    def run(self, stop: threading.Event) -> LogSummary:
        """Log until ``stop`` is set or the duration is over.

        Parameters
        ----------
        stop : threading.Event
            Ends it cleanly.

        Returns
        -------
        LogSummary
            What it did.

        Raises
        ------
        BridgeError
            If the port cannot be opened, and is not waited for.
        DeviceFailedError
            If the port or the disk failed, and is not waited for; the message says what was kept.
        """
        self._tidy(force=True)
        told = ""
        while not stop.is_set():
            try:
                self._record(stop)
                break
            except LedgerError:  # of the options, at the first samples: nothing is left behind
                for path in self._files:
                    path.unlink(missing_ok=True)
                raise
            except (DeviceFailedError, PortError) as error:
                if not self._settings.reconnect:
                    raise
                if str(error) != told:
                    _log.warning("%s; trying again", error)
                told = str(error)
                if isinstance(error, DeviceFailedError):  # of a full disk: room must be made
                    self._is_room_known = True
            self._tidy(force=True)
            stop.wait(_AGAIN_S)
        self._running = None
        self._tidy(force=True)
        return self._summary()

    def _record(self, stop: threading.Event) -> "RecordSummary":
        from firmware_bridge.recorder import record

        settings = self._settings
        self._window = None
        self._described = None
        self._running = self._new_file(1)
        return record(
            settings.port,
            self._running,
            duration_s=settings.duration_s,
            baud=settings.baud,
            text=settings.text,
            rate_hz=settings.rate_hz,
            reconnect=settings.reconnect,
            progress=lambda _progress: self._tidy(),
            stop=stop,
            on_block=self._take if self._lines is not None else None,
            rotate_bytes=settings.rotate_bytes,
            rotate_s=settings.rotate_s,
            next_path=self._new_file,
            on_ended=self._ended,
        )

    def _new_file(self, number: int) -> Path:  # noqa: ARG002  # the recorder's signature
        path = self._folder.next_path()
        self._files = [*(file for file in self._files if file.exists()), path]
        self._running = path
        return path

    def _ended(self, path: Path) -> None:
        with contextlib.suppress(FileNotFoundError):  # deleted already, to keep within the limit
            _log.info("recording %s is complete, %d bytes", path, path.stat().st_size)

    def _tidy(self, *, force: bool = False) -> None:
        now_s = time.monotonic()
        if not force and now_s - self._tidied_s < _TIDY_S:
            return
        self._tidied_s = now_s
        for path in self._folder.tidy(self._running, by_size=self._is_room_known):
            _log.info("recording %s is deleted, to keep within what may be kept", path)

    def _take(self, block: "LiveBlock") -> None:
        """Take a block of the running recording, in the recorder's thread."""
        if self._described != self._running and self._running is not None:
            self._begin(self._running)
        if self._window is None or self._channels is None or self._lines is None:
            return
        for stretch in self._window.add(block):
            self._lines.put(stretch, self._channels)

    def _begin(self, path: Path) -> None:
        """Describe a new recording; one that has lost what is logged is recorded all the same."""
        self._described = path
        self._check_room(path)
        try:
            self._describe(path)
        except LedgerError as error:
            if self._channels is None:  # wrong from the beginning
                raise
            self._window = None
            _log.warning("%s: %s; recorded without line results", path, error)

    def _check_room(self, path: Path) -> None:
        """Refuse too little room at the first samples; a board that sends more later is recorded on."""
        if self._settings.room is None:
            return
        try:
            self._settings.room.check(path)
        except LedgerError as error:
            if self._channels is None:
                raise
            _log.warning("%s: %s", path, error)
        self._is_room_known = True

    def _describe(self, path: Path) -> None:
        """Find the channels of a new recording; the stretch goes on where they are the same."""
        channels = LoggedChannels.of_recording(path, self._settings.channels)
        highest_hz = 0.0 if self._lines is None else max(self._lines.lines_hz, default=0.0)
        if highest_hz >= 0.5 * channels.rate_hz:
            raise LedgerError(
                f"--line must be below half the board's rate, {0.5 * channels.rate_hz:.6g} Hz, "
                f"got {highest_hz:.6g} Hz"
            )
        if channels == self._channels and self._window is not None:
            return
        settings, rate_hz = self._settings, channels.rate_hz
        self._channels = channels
        self._window = LineWindow(
            channels.used, round(settings.every_s * rate_hz), round(settings.over_s * rate_hz)
        )
        if min(settings.over_s, settings.every_s) * rate_hz > MOST_SAMPLES:
            _log.warning(
                "lines are fitted over the last %.4g s of each stretch, to bound the memory",
                self._window.over / rate_hz,
            )

    def _summary(self) -> LogSummary:
        lines = self._lines
        return LogSummary(
            [path for path in self._files if path.exists()],
            self._folder.deleted,
            0 if lines is None else lines.results,
            [] if lines is None else list(lines.alarms),
        )
