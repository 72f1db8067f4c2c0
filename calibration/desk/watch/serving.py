"""The live page from beginning to end: serve a source until told to stop, then let go of it."""

import asyncio
import contextlib
import signal
import time
from collections.abc import Callable

from calibration.desk.watch.guard import Guard
from calibration.desk.watch.orders import NOT_KNOWN, Orders
from calibration.desk.watch.server import WatchServer
from calibration.desk.watch.setup import WatchSetup
from calibration.desk.watch.source import Source
from calibration.desk.watch.state import WatchState
from firmware_bridge.errors import BridgeError, DeviceFailedError
from firmware_bridge.live_events import LiveEvent

__all__ = ["serve"]

_CONFIRM_S = 2.0
_AGAIN_S = 0.02
_DONE = ("at rest", "none")


def serve(
    source: Source,
    setup: WatchSetup,
    guard: Guard,
    port_number: int,
    *,
    is_replay: bool = False,
    is_text: bool = False,
    first: list[LiveEvent] | None = None,
    ready: Callable[[str], None],
) -> WatchServer:
    """Serve the page of a source until Ctrl-C or SIGTERM.

    Parameters
    ----------
    source : Source
        Left open: its owner closes it, which brings the drive to rest and ends the recording.
    setup : WatchSetup
        What to show.
    guard : Guard
        Who may look.
    port_number : int
        0 for any that is free.
    is_replay : bool
        A recording replayed.
    is_text : bool
        A board that prints text.
    first : list of LiveEvent, optional
        What has been polled already.
    ready : callable
        Called with the page's address when it can be opened.

    Returns
    -------
    WatchServer
        As it was at the end.

    Raises
    ------
    CalibrationError
        If the address cannot be served.
    DeviceFailedError
        At the end, if the port is away or the board does not confirm that its drive is at rest.
    """
    state = WatchState(setup)
    for event in first or ():
        state.take(event)
    orders = Orders(source, state, is_replay=is_replay, is_text=is_text)
    server = WatchServer(source, state, orders, guard)
    reason = asyncio.run(_whole(server, port_number, ready, is_replay=is_replay))
    if reason:
        raise DeviceFailedError(f"{setup.title}: {reason}; {NOT_KNOWN}")
    return server


async def _whole(
    server: WatchServer, port_number: int, ready: Callable[[str], None], *, is_replay: bool
) -> str:
    """Serve until told to stop; return why it is not known what is driven then, or nothing."""
    await _serve(server, port_number, ready)
    reason = "" if is_replay else await _ended(server)  # pages still see how the stop goes
    await server.stop()
    return reason


async def _ended(server: WatchServer) -> str:
    """End the recording, bring the drive to rest, and wait until the board has confirmed it; say why not."""
    reason = _maybe_unknown(server)
    with contextlib.suppress(BridgeError):  # of a port's process that is there no more
        server.source.stop_recording()
        server.orders.obey({"do": "stop"})
    end_s = time.monotonic() + _CONFIRM_S
    drive = server.orders.drive
    while not reason and drive.condition not in _DONE and time.monotonic() < end_s:
        await asyncio.sleep(_AGAIN_S)
        server.poll()
        reason = _maybe_unknown(server)
    if not reason and drive.condition not in _DONE:
        return "the board has not confirmed the stop"
    return reason


def _maybe_unknown(server: WatchServer) -> str:
    """Return why nobody can tell what is driven, or nothing."""
    port, drive = server.state.port, server.orders.drive
    if not drive.is_away:
        return ""
    if port.state == "silent" and drive.condition == "none":
        return ""  # a board without drive lines that sends no more drives nothing
    return port.reason or f"the port is {port.state}"


async def _serve(server: WatchServer, port_number: int, ready: Callable[[str], None]) -> None:
    stop = asyncio.Event()
    loop = asyncio.get_running_loop()
    for name in (signal.SIGINT, signal.SIGTERM, signal.SIGHUP):
        loop.add_signal_handler(name, stop.set)
    number = await server.start(port_number)
    ready(_address(server.guard, number))
    await stop.wait()


def _address(guard: Guard, number: int) -> str:
    host = guard.host
    if host in ("0.0.0.0", "::"):  # noqa: S104  # asked for: served on every address
        import socket

        host = socket.gethostname()
    host = f"[{host}]" if ":" in host else host
    token = "" if guard.token is None else f"?token={guard.token}"
    return f"http://{host}:{number}/{token}"
