"""A port held by a process of its own: look on, record and drive without ever being in its way."""

from dataclasses import replace
from pathlib import Path
from types import TracebackType
from typing import Self

from firmware_bridge.drive_lines import DriveError, DriveLine, DriveLines
from firmware_bridge.errors import BridgeError
from firmware_bridge.live_events import (
    LiveBlock,
    LiveChannels,
    LiveEvent,
    LiveGap,
    LiveLines,
    LiveRecording,
    LiveReply,
    LiveState,
)
from firmware_bridge.live_process import LiveOptions, Order
from firmware_bridge.port_process import PortProcess
from firmware_bridge.recording_name import recording_in

__all__ = [
    "LiveBlock",
    "LiveChannels",
    "LiveEvent",
    "LiveGap",
    "LiveLines",
    "LiveRecording",
    "LiveReply",
    "LiveSession",
    "LiveState",
]

_UNASKED = LiveState("failed", "the process that held the port was told to end")


class LiveSession:
    """Hold a port in another process; use it in a ``with`` block.

    The process reads, records and drives whatever this one does. Whoever polls too seldom loses
    blocks of the view, never samples of a recording. If this process dies, the other brings the
    drive to rest, ends the recording and ends itself. A port that is gone is waited for; drive lines
    are then not set again by themselves.

    Parameters
    ----------
    port : str
        Port name or pyserial URL.
    baud : int
        Symbols per second.
    text : bool
        The board prints lines of numbers.
    reconnect : bool
        Wait for a port that is not there or gone; else the session ends.
    folder : Path
        Where recordings go.
    drive_limit_v : float, optional
        Largest voltage of all drive lines together [V]; without it no line is set. No interlock.
    terminal_factor : float
        Volts that are meant, at the actuator's terminals, per volt of the board's drive channel.
    """

    def __init__(
        self,
        port: str,
        *,
        folder: Path,
        baud: int = 115200,
        text: bool = False,
        reconnect: bool = True,
        drive_limit_v: float | None = None,
        terminal_factor: float = 1.0,
    ) -> None:
        self._options = LiveOptions(port, baud, text, reconnect, drive_limit_v, terminal_factor)
        self._folder = Path(folder)
        self._process = PortProcess(self._options)
        self._orders = 0

    def start(self) -> Self:
        """Start the process that holds the port; what it finds there comes by `poll`.

        Returns
        -------
        LiveSession
            Itself.
        """
        self._process.start()
        return self

    def close(self) -> None:
        """Bring the drive to rest, end the recording, give the port back."""
        self._process.close()

    def __enter__(self) -> Self:
        return self.start()

    def __exit__(
        self,
        kind: type[BaseException] | None,
        error: BaseException | None,
        trace: TracebackType | None,
    ) -> None:
        self.close()

    @property
    def is_running(self) -> bool:
        """Whether the process that holds the port is there."""
        return self._process.is_running

    def poll(self) -> list[LiveEvent]:
        """Return what has happened since the last time, without waiting.

        Returns
        -------
        list of LiveEvent
            In order; perhaps not yet all of it, if very much has happened.
        """
        events, is_ended = self._process.taken()
        # it was not asked to by this one, else nothing would be taken any more
        events = [_UNASKED if event == LiveState("closed") else event for event in events]
        if is_ended and not any(isinstance(e, LiveState) and e.state == "failed" for e in events):
            events.append(LiveState("failed", "the process that held the port has ended"))
        return events

    def start_recording(self, name: str) -> Path:
        """Record what comes from now on; a recording that runs ends with the frame before.

        Parameters
        ----------
        name : str
            A plain file name ``NAME.mfr``; it goes into the folder.

        Returns
        -------
        Path
            The file to be.

        Raises
        ------
        BridgeError
            If the name is anything else, or there is such a file.
        """
        path = recording_in(self._folder, name)
        self._order(Order("record", path=path))
        return path

    def stop_recording(self) -> None:
        """End the recording that runs."""
        self._order(Order("end"))

    def set_line(
        self, slot: int, frequency_hz: float, amplitude_v: float, phase_rad: float = 0.0
    ) -> int:
        """Set a line of the drive; what the board says comes as `LiveReply` and `LiveLines`.

        Parameters
        ----------
        slot : int
            Which of the board's lines, from 0.
        frequency_hz : float
            By the board's clock [Hz].
        amplitude_v : float
            Zero to peak [V].
        phase_rad : float
            At the board's sample 0 [rad].

        Returns
        -------
        int
            Number of the order; see `LiveLines`.

        Raises
        ------
        DriveError
            If it is no line, or by itself beyond the limit.
        """
        if self._options.text:
            raise DriveError("drive lines need a board that sends frames, not text")
        line = DriveLine(frequency_hz, amplitude_v, phase_rad)
        # The other process checks again, with the lines that are truly set.
        DriveLines(self._options.drive_limit_v).set(slot, line)
        return self._order(Order("set", slot=slot, line=line))

    def clear_line(self, slot: int) -> int:
        """Take a line out of the drive.

        Parameters
        ----------
        slot : int
            Which, from 0.

        Returns
        -------
        int
            Number of the order.
        """
        return self._order(Order("clear", slot=slot))

    def rest(self) -> int:
        """Bring the drive to rest, before anything else that was asked.

        Returns
        -------
        int
            Number of the order; `LiveLines` tells when the board has confirmed it.
        """
        return self._order(Order("rest"))

    def _order(self, order: Order) -> int:
        self._orders += 1
        if self._process.send(replace(order, number=self._orders)):
            return self._orders
        raise BridgeError(f"the process that held {self._options.port} has ended")
