"""The process that holds a port: it shows, records and drives for a viewer, and outlives it cleanly."""

import contextlib
import logging
import secrets
import signal
import threading
from dataclasses import dataclass
from multiprocessing.connection import Connection
from pathlib import Path

from firmware_bridge.drive_desk import DriveDesk
from firmware_bridge.drive_lines import DriveLine, DriveLines
from firmware_bridge.errors import BridgeError
from firmware_bridge.live_events import LiveState
from firmware_bridge.live_intake import LiveIntake
from firmware_bridge.live_pipe import LivePipe
from firmware_bridge.port import ByteSource, PortError, PortLostError, open_port
from firmware_bridge.recording_session import RecordingSession
from firmware_bridge.text_frames import TextFramer

__all__ = ["LiveOptions", "Order", "hold_port"]

_FLUSH_S = 2.0


@dataclass(frozen=True, slots=True)
class LiveOptions:
    """How a port is held; as the parameters of `LiveSession`."""

    port: str
    baud: int
    text: bool
    reconnect: bool
    drive_limit_v: float | None
    terminal_factor: float


@dataclass(frozen=True, slots=True)
class Order:
    """What the viewer asks: "record", "end", "set", "clear", "rest" or "close"; numbered."""

    what: str
    path: Path | None = None
    slot: int = 0
    line: DriveLine | None = None
    number: int = 0


class _AbsentPort:
    """Stands for a port that is not there yet."""

    def __init__(self, name: str, reason: str) -> None:
        self.name, self._reason = name, reason

    def read(self) -> bytes:
        raise PortLostError(self._reason)

    def write(self, data: bytes) -> bool:  # noqa: ARG002  # nobody is there
        return False

    def close(self) -> None:
        pass


def hold_port(connection: Connection, options: LiveOptions) -> None:
    """Hold a port until told to close it, or until the viewer's process is gone.

    Parameters
    ----------
    connection : multiprocessing.connection.Connection
        Events go out, orders come in.
    options : LiveOptions
        Which port, and how.
    """
    stop = threading.Event()
    for name in ("SIGTERM", "SIGHUP"):
        if hasattr(signal, name):
            signal.signal(getattr(signal, name), lambda *_: stop.set())
    signal.signal(signal.SIGINT, signal.SIG_IGN)  # Ctrl-C is for the viewer, which then closes us
    logging.getLogger("firmware_bridge").addHandler(logging.NullHandler())
    pipe = LivePipe(connection)
    try:
        _run(connection, options, pipe, stop)
        pipe.put(LiveState("closed"))
    except BridgeError as error:
        pipe.put(LiveState("failed", str(error)))
    finally:
        pipe.close(_FLUSH_S)


def _run(
    connection: Connection, options: LiveOptions, pipe: LivePipe, stop: threading.Event
) -> None:
    source = _opened(options)
    framer = TextFramer(secrets.randbits(32)) if options.text else None
    info = {"source": "frames"} if framer is None else framer.origin
    info["port"] = source.name
    intake = LiveIntake(pipe.put, info, options.text)
    lines = DriveLines(options.drive_limit_v, options.terminal_factor)
    desk = DriveDesk(lines, is_held=False, tell=pipe.put)
    if isinstance(source, _AbsentPort):
        desk.away()
    if not isinstance(source, _AbsentPort):
        intake.state("waiting", "the port is open and the board has sent nothing yet")
    listener = threading.Thread(
        target=_listen, args=(connection, intake, desk, stop), name="orders", daemon=True
    )
    listener.start()
    session = RecordingSession(
        source, options.baud, intake, framer, options.reconnect, stop, desk, watcher=intake
    )
    session.run(None)


def _opened(options: LiveOptions) -> ByteSource:
    try:
        return open_port(options.port, options.baud)
    except PortError as error:
        if not options.reconnect:
            raise
        return _AbsentPort(options.port, str(error))


def _listen(
    connection: Connection, intake: LiveIntake, desk: DriveDesk, stop: threading.Event
) -> None:
    """Obey orders until told to close, or until nobody gives any."""
    with contextlib.suppress(EOFError, OSError):
        while not stop.is_set():
            order = connection.recv()
            if order.what == "close":
                break
            try:
                _obey(order, intake, desk)
            except BridgeError as error:
                intake.reply(str(error), refused=True)
            desk.took(order.number)
    stop.set()


def _obey(order: Order, intake: LiveIntake, desk: DriveDesk) -> None:
    if order.what == "rest":
        desk.rest()
    elif order.what == "record" or order.what == "end":
        intake.order(order.path)
    elif order.what == "set" and order.line is not None:
        desk.set(order.slot, order.line)
    elif order.what == "clear":
        desk.clear(order.slot)
