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
import tornado.websocket

from calibration.desk.watch_figures import figures_json
from calibration.desk.watch_guard import Guard
from calibration.desk.watch_orders import Answer, Orders, Source
from calibration.desk.watch_sender import Latency, Viewer, message_for
from calibration.desk.watch_state import Job, WatchState
from calibration.errors import CalibrationError

__all__ = ["WatchServer"]

_log = logging.getLogger(__name__)

_POLL_S = 0.05
_SEND_S = 0.1
_JOBS = 8  # fits that wait; beyond, the newest are left out rather than piled up
_VIEWERS = 8
_ORDER_BYTES = 4096
_TOKEN_COOKIE_DAYS = 1.0


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
            asyncio.create_task(_again(_POLL_S, self._poll)),
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
        page = Path(str(resources.files("calibration.desk") / "watch_page"))
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

    def _poll(self) -> None:
        for event in self.source.poll():
            for job in self.state.take(event):
                self._do(job)
        self.orders.follow_port()
        for reply in self.state.take_replies():
            self.tell(Answer(reply.text, reply.refused), by_board=True)

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

    def tell(self, answer: Answer, *, by_board: bool = False) -> None:
        """Show a line of text on every page.

        Parameters
        ----------
        answer : Answer
            What to show.
        by_board : bool
            Whether it comes from the port rather than from here.
        """
        if answer.refused:
            _log.warning("%s", answer.text)
        else:
            _log.info("%s", answer.text)
        text = json.dumps({"text": answer.text, "refused": answer.refused, "board": by_board})
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


class _Guarded(tornado.web.RequestHandler):
    """Refuse, before anything else, what the guard refuses."""

    def initialize(self, server: WatchServer, **_more: Any) -> None:  # noqa: ANN401  # of tornado
        self.watch = server

    def prepare(self) -> None:
        guard, headers = self.watch.guard, self.request.headers
        if not guard.is_known_host(headers.get("Host")):
            raise tornado.web.HTTPError(403, reason="Unknown Host")
        token = self.get_query_argument("token", None)
        if not guard.is_right_token(token, self.get_cookie(self._cookie)):
            raise tornado.web.HTTPError(403, reason="Token Missing or Wrong")

    @property
    def _cookie(self) -> str:
        return f"midfringe-{self.watch.port_number}"

    def set_default_headers(self) -> None:
        host = self.request.headers.get("Host", "")
        own = (
            f"'self' ws://{host}" if host.replace(":", "").replace(".", "").isalnum() else "'self'"
        )
        self.set_header(
            "Content-Security-Policy",
            "default-src 'none'; script-src 'self'; style-src 'self' 'unsafe-inline'; "
            f"img-src 'self' data:; connect-src {own}; base-uri 'none'; form-action 'none'; "
            "frame-ancestors 'none'",
        )
        self.set_header("X-Content-Type-Options", "nosniff")
        self.set_header("Referrer-Policy", "no-referrer")
        self.set_header("Cross-Origin-Resource-Policy", "same-origin")
        self.set_header("Cache-Control", "no-store")
        self.clear_header("Server")

    def write_error(self, status_code: int, **_more: Any) -> None:  # noqa: ANN401  # of tornado
        self.set_header("Content-Type", "text/plain; charset=utf-8")
        self.finish(f"{status_code}: {self._reason}\n")


class PageHandler(_Guarded):
    """The page itself; a token in the address moves into a cookie."""

    def get(self) -> None:
        """Answer with the page, or send the browser to the address without the token."""
        token = self.get_query_argument("token", None)
        if token is not None and self.watch.guard.token is not None:
            self.set_cookie(
                self._cookie,
                token,
                expires_days=_TOKEN_COOKIE_DAYS,
                httponly=True,
                samesite="Lax",
            )
            self.redirect("/", status=303)
            return
        self.set_header("Content-Type", "text/html; charset=utf-8")
        self.finish(self.settings["page"].read_bytes())


class FiguresHandler(_Guarded):
    """The figures, for BokehJS."""

    def get(self) -> None:
        """Answer with JSON."""
        self.set_header("Content-Type", "application/json")
        self.finish(self.watch.figures)


class FileHandler(_Guarded, tornado.web.StaticFileHandler):
    """A file of the installed packages."""

    def initialize(self, server: WatchServer, path: str) -> None:  # type: ignore[override]  # with the server
        """Take the server and the folder."""
        _Guarded.initialize(self, server)
        tornado.web.StaticFileHandler.initialize(self, path)


class LiveHandler(_Guarded, tornado.websocket.WebSocketHandler):
    """A page that is open: messages go out, orders come in."""

    def initialize(self, server: WatchServer, **more: Any) -> None:  # noqa: ANN401  # of tornado
        """Take the server."""
        _Guarded.initialize(self, server, **more)
        self.viewer = Viewer()
        self._sending: Any = None

    def check_origin(self, origin: str) -> bool:
        """Return whether the page is ours."""
        return self.watch.guard.is_own_origin(origin, self.request.headers.get("Host"))

    def prepare(self) -> None:
        """Refuse what the guard refuses, also a websocket without an Origin, and a crowd."""
        _Guarded.prepare(self)
        if not self.check_origin(self.request.headers.get("Origin", "")):
            raise tornado.web.HTTPError(403, reason="Foreign Origin")
        if len(self.watch.lives) >= _VIEWERS:
            raise tornado.web.HTTPError(503, reason="Too Many Pages")

    def open(self, *_args: str, **_kwargs: str) -> None:
        """Count the page in."""
        self.set_nodelay(True)
        self.watch.lives.add(self)

    def on_close(self) -> None:
        """Count the page out."""
        self.watch.lives.discard(self)

    def on_message(self, message: str | bytes) -> None:
        """Obey an order; its answer is shown on every page."""
        try:
            order = json.loads(message)
        except (ValueError, RecursionError):
            order = None
        if isinstance(order, dict) and order.get("do") == "show":
            self.viewer.wish(order)
            return
        answer = self.watch.orders.obey(order)
        if answer is not None:
            self.watch.tell(answer)

    def send(self, make: Callable[["LiveHandler"], bytes]) -> None:
        """Send a message, unless the last one is still on its way: a slow page gets fewer."""
        if self._sending is not None and not self._sending.done():
            return
        self._sending = self._written(make(self), binary=True)

    def say(self, text: str) -> None:
        """Send a line of text."""
        self._written(text, binary=False)

    def _written(self, message: str | bytes, *, binary: bool) -> Any:  # noqa: ANN401  # a future
        try:
            return asyncio.ensure_future(_quietly(self.write_message(message, binary=binary)))
        except tornado.websocket.WebSocketClosedError:
            self.watch.lives.discard(self)
            return None


async def _quietly(writing: Any) -> None:  # noqa: ANN401  # a future
    try:
        await writing
    except (tornado.websocket.WebSocketClosedError, tornado.iostream.StreamClosedError):
        return
