"""The server of the live page: it polls the source, keeps the state, and tells every open page."""

import asyncio
import json
import logging
import socket
from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from importlib import resources
from pathlib import Path
from typing import Any

import tornado.httpserver
import tornado.web

from calibration.desk.watch.figures import figures_json
from calibration.desk.watch.guard import Guard
from calibration.desk.watch.handlers import (
    FiguresHandler,
    FileHandler,
    LiveHandler,
    PageHandler,
)
from calibration.desk.watch.orders import Answer, Orders
from calibration.desk.watch.sender import Latency, message_for
from calibration.desk.watch.source import Source
from calibration.desk.watch.state import Job, WatchState
from calibration.errors import CalibrationError

__all__ = ["WatchServer"]

_log = logging.getLogger(__name__)

_POLL_S = 0.05
_SEND_S = 0.1
_JOBS = 8  # fits that wait; beyond, the newest are left out rather than piled up
_ORDER_BYTES = 4096


class WatchServer:
    """Serve the live page of one source.

    Parameters
    ----------
    source : Source
        Polled and driven.
    state : WatchState
        Kept up to date.
    orders : Orders
        What pages may ask for.
    guard : Guard
        Who may ask.
    """

    def __init__(self, source: Source, state: WatchState, orders: Orders, guard: Guard) -> None:
        self.source, self.state, self.orders, self.guard = source, state, orders, guard
        self.latency = Latency()
        self.lives: set[LiveHandler] = set()
        self._jobs = 0
        self.port_number = 0
        self._executor = ThreadPoolExecutor(1, "fits")
        self._tasks: list[asyncio.Task[None]] = []
        self._server: tornado.httpserver.HTTPServer | None = None
        self.figures = json.dumps(figures_json())

    async def start(self, port_number: int) -> int:
        """Begin to serve and to poll.

        Parameters
        ----------
        port_number : int
            0 for any that is free.

        Returns
        -------
        int
            The port number.

        Raises
        ------
        CalibrationError
            If it is taken or the address is not this computer's.
        """
        try:
            family = socket.AF_INET6 if ":" in self.guard.host else socket.AF_INET
            listening = socket.create_server((self.guard.host, port_number), family=family)
        except OSError as error:
            raise CalibrationError(
                f"port number {port_number} on {self.guard.host} cannot be served: {error.strerror}"
            ) from None
        listening.setblocking(False)
        self.port_number = int(listening.getsockname()[1])
        self._server = tornado.httpserver.HTTPServer(self._application())
        self._server.add_sockets([listening])
        self._tasks = [
            asyncio.create_task(_again(_POLL_S, self.poll)),
            asyncio.create_task(_again(_SEND_S, self._send)),
        ]
        return self.port_number

    async def stop(self) -> None:
        """Stop serving; the source is left to its owner."""
        for task in self._tasks:
            task.cancel()
        if self._server is not None:
            self._server.stop()
        for live in list(self.lives):
            live.close(1001, "the program has ended")
        self._executor.shutdown(wait=False, cancel_futures=True)
        await asyncio.sleep(0)

    def _application(self) -> tornado.web.Application:
        page = Path(str(resources.files("calibration.desk.watch") / "page"))
        shared: dict[str, Any] = {"server": self}
        return tornado.web.Application(
            [
                ("/", PageHandler, shared),
                ("/figures", FiguresHandler, shared),
                ("/live", LiveHandler, shared),
                ("/page/(watch.js|watch.css)", FileHandler, shared | {"path": str(page)}),
                ("/bokeh/(bokeh.min.js)", FileHandler, shared | {"path": str(_bokeh_scripts())}),
            ],
            page=page / "watch.html",
            log_function=_log_request,
            websocket_max_message_size=_ORDER_BYTES,
            websocket_ping_interval=5,
            websocket_ping_timeout=4,
        )

    def poll(self) -> None:
        """Take what the source tells, and pass on what pages must know."""
        for event in self.source.poll():
            for job in self.state.take(event):
                self._do(job)
        for said in self.state.take_drive_lines():
            if self.orders.drive.hear(said):
                self.tell(Answer("drive stopped", is_stop_over=True), is_of_drive=True)
        for reply in self.state.take_replies():
            self.tell(Answer(reply.text, reply.refused), by_board=True, is_of_drive=True)

    def _do(self, job: Job) -> None:
        if self._jobs >= _JOBS:
            _log.warning("fits come faster than they are done; one is left out")
            return
        self._jobs += 1
        future = asyncio.get_running_loop().run_in_executor(self._executor, job.work)
        future.add_done_callback(lambda done: self._deliver(job, done))

    def _deliver(self, job: Job, done: "asyncio.Future[Any]") -> None:
        self._jobs -= 1
        if done.cancelled():
            return
        error = done.exception()
        if error is None:
            job.deliver(done.result())
        else:
            _log.error("a fit failed", exc_info=error)

    def _send(self) -> None:
        if self.state.stream is not None:
            self.latency.see(self.state.stream.arrived_unix_s)
        for live in list(self.lives):
            live.send(lambda live: message_for(live.viewer, self.state, self.orders, self.latency))

    def tell(self, answer: Answer, *, by_board: bool = False, is_of_drive: bool = False) -> None:
        """Show a line of text on every page.

        Parameters
        ----------
        answer : Answer
            What to show.
        by_board : bool
            Whether it comes from the port rather than from here.
        is_of_drive : bool
            Whether it belongs beside the drive's controls.
        """
        if answer.refused:
            _log.warning("%s", answer.text)
        else:
            _log.info("%s", answer.text)
        text = json.dumps(
            {
                "text": answer.text,
                "refused": answer.refused,
                "stop_over": answer.is_stop_over,
                "board": by_board,
                "of_drive": is_of_drive,
            }
        )
        for live in list(self.lives):
            live.say(text)


async def _again(every_s: float, what: Callable[[], None]) -> None:
    """Do something again and again; an error is logged, and the page goes on."""
    while True:
        try:
            what()
        except Exception:  # noqa: BLE001  # whatever it is, it is logged and the stop stays in reach
            _log.exception("the live page met an error")
        await asyncio.sleep(every_s)


def _bokeh_scripts() -> Path:
    import bokeh

    return Path(bokeh.__file__).with_name("server") / "static" / "js"


def _log_request(handler: tornado.web.RequestHandler) -> None:
    # without the query, in which a token may stand
    _log.debug("%s %s %d", handler.request.method, handler.request.path, handler.get_status())
