"""What the live page's server answers: the page, its files and figures, and the websocket."""

import asyncio
import json
from collections.abc import Callable
from typing import TYPE_CHECKING, Any

import tornado.iostream
import tornado.web
import tornado.websocket

from calibration.desk.watch.orders import OF_DRIVE
from calibration.desk.watch.sender import Viewer

if TYPE_CHECKING:
    from calibration.desk.watch.server import WatchServer

__all__ = ["FiguresHandler", "FileHandler", "LiveHandler", "PageHandler"]

_VIEWERS = 8  # pages with plots; others show figures, and their stop works
_PAGES = 64
_TOKEN_COOKIE_DAYS = 1.0


class _Guarded(tornado.web.RequestHandler):
    """Refuse, before anything else, what the guard refuses."""

    def initialize(self, server: "WatchServer", **_more: Any) -> None:  # noqa: ANN401  # of tornado
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

    def initialize(self, server: "WatchServer", path: str) -> None:  # type: ignore[override]  # with the server
        """Take the server and the folder."""
        _Guarded.initialize(self, server)
        tornado.web.StaticFileHandler.initialize(self, path)


class LiveHandler(_Guarded, tornado.websocket.WebSocketHandler):
    """A page that is open: messages go out, orders come in."""

    def initialize(self, server: "WatchServer", **more: Any) -> None:  # noqa: ANN401  # of tornado
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
        if len(self.watch.lives) >= _PAGES:
            raise tornado.web.HTTPError(503, reason="Too Many Pages")

    def open(self, *_args: str, **_kwargs: str) -> None:
        """Count the page in."""
        self.set_nodelay(True)
        shown = sum(live.viewer.has_plots for live in self.watch.lives)
        self.viewer.has_plots = shown < _VIEWERS
        self.watch.lives.add(self)

    def on_close(self) -> None:
        """Count the page out; another one gets its plots."""
        self.watch.lives.discard(self)
        waiting = [live for live in self.watch.lives if not live.viewer.has_plots]
        if self.viewer.has_plots and waiting:
            self.viewer.has_plots = False
            waiting[0].viewer.has_plots = True
            waiting[0].viewer.ticks = 0

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
            is_of_drive = isinstance(order, dict) and str(order.get("do")) in OF_DRIVE
            self.watch.tell(answer, is_of_drive=is_of_drive)

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
