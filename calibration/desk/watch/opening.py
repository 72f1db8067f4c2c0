"""Where a live page's samples come from: a port in another process, a simulated board, a recording."""

import time
from collections.abc import Iterator
from contextlib import ExitStack, contextmanager
from dataclasses import dataclass, replace
from pathlib import Path
from typing import TYPE_CHECKING

from calibration.desk.watch.replay import Replay
from calibration.desk.watch.setup import WatchSetup
from calibration.desk.watch.simulated import simulated_board
from firmware_bridge.errors import BridgeError
from firmware_bridge.live_events import LiveEvent, LiveState
from firmware_bridge.live_session import LiveSession

if TYPE_CHECKING:
    from calibration.desk.watch.source import Source
    from firmware_bridge.trace import Recording

__all__ = ["Choice", "opened_source"]

_OPEN_S = 10.0


@dataclass(frozen=True)
class Choice:
    """What was chosen to be watched; one of ``port``, ``is_simulated`` and ``replay``.

    Parameters
    ----------
    port : str or None
        Port name or pyserial URL.
    is_simulated : bool
        A simulated board.
    seed : int
        Of its truth and noise.
    replay : Recording or None
        A recording.
    speed : float
        Of the replay.
    baud : int
        Of the port.
    text : bool
        The board prints lines of numbers.
    folder : Path
        Where recordings go.
    """

    port: str | None = None
    is_simulated: bool = False
    seed: int = 1
    replay: "Recording | None" = None
    speed: float = 1.0
    baud: int = 115200
    text: bool = False
    folder: Path = Path()


@contextmanager
def opened_source(choice: Choice, setup: WatchSetup) -> Iterator[tuple["Source", list[LiveEvent]]]:
    """Open what was chosen, and let go of it in the end: drive at rest, recording closed.

    Parameters
    ----------
    choice : Choice
        What to open.
    setup : WatchSetup
        For the drive's limit.

    Yields
    ------
    tuple of Source and list of LiveEvent
        The source, and what has happened before the page began.

    Raises
    ------
    BridgeError
        If a port or file cannot be opened.
    """
    with ExitStack() as stack:
        if choice.replay is not None:
            yield Replay(choice.replay, choice.speed), []
            return
        if choice.is_simulated:
            port = stack.enter_context(simulated_board(setup.bench, choice.seed, setup.slope))
            choice = replace(choice, port=port)
        session = stack.enter_context(_session(choice, setup))
        yield session, _opening_events(session)


def _session(choice: Choice, setup: WatchSetup) -> LiveSession:
    return LiveSession(
        str(choice.port),
        folder=choice.folder,
        baud=choice.baud,
        text=choice.text,
        reconnect=True,
        drive_limit_v=setup.drive_limit_v,
        terminal_factor=setup.drive_factor,
    )


def _opening_events(session: LiveSession) -> list[LiveEvent]:
    """Wait until the port says how it stands; a port that is not there at the start is an error."""
    events: list[LiveEvent] = []
    end_s = time.monotonic() + _OPEN_S
    while time.monotonic() < end_s:
        events += session.poll()
        states = [event for event in events if isinstance(event, LiveState)]
        if states and states[0].state in ("gone", "failed"):
            raise BridgeError(states[0].reason)
        if states:
            break
        time.sleep(0.02)
    return events
