"""A board for the recorder's tests: it speaks the wire through a pseudo-terminal or a socket."""

import contextlib
import os
import select
import socket
import threading
import time
import tty

import numpy as np
import serial
import serial.rfc2217

from firmware_bridge.announcement import Announcement, ChannelInfo, encode_announcement
from firmware_bridge.decoder import Command, Decoder
from firmware_bridge.frame import encode_frame
from firmware_bridge.message import CommandCode, Reply, encode_reply

__all__ = [
    "RATE_HZ",
    "SLOTS",
    "AskedBoard",
    "PtyLink",
    "Rfc2217Link",
    "SocketLink",
    "WireBoard",
    "announced",
    "asked_board",
    "ramp",
]

RATE_HZ, SLOTS = 2000.0, 50


def announced(stream, *, rate_hz=RATE_HZ, speed=1.0):
    channels = [ChannelInfo("pd", "V", 0.5), ChannelInfo("drive", "V", 1.0)]
    return Announcement(
        stream, rate_hz, "int16", SLOTS, channels, board="test", clock_hz=1_000_000, speed=speed
    )


def ramp(index, n):
    """Samples that say their own index: low and high halves."""
    count = np.arange(index, index + n)
    return np.stack([count % 2**15, count // 2**15], axis=1).astype(np.int16)


class PtyLink:
    """A pseudo-terminal; ``port`` is what a recorder opens."""

    def __init__(self):
        self._master, self._slave = os.openpty()
        tty.setraw(self._slave)
        os.set_blocking(self._master, False)
        self.port = os.ttyname(self._slave)
        self._is_closed = threading.Event()

    def send(self, data):
        view = memoryview(data)
        while view:
            if self._is_closed.is_set():
                raise BrokenPipeError
            try:
                view = view[os.write(self._master, view) :]
            except BlockingIOError:
                select.select([], [self._master], [], 0.1)

    def received(self):
        try:
            return os.read(self._master, 65536)
        except BlockingIOError:
            return b""

    def give_up(self):
        """Let a sender that waits for room, which nobody makes any more, fail."""
        self._is_closed.set()

    def close(self):
        self._is_closed.set()
        time.sleep(0.12)  # a sender that waits for room has seen it
        for handle in (self._master, self._slave):
            os.close(handle)


class SocketLink:
    """A listening socket; sending waits for the recorder to connect."""

    def __init__(self):
        self._server = socket.create_server(("127.0.0.1", 0))
        self.port = f"socket://127.0.0.1:{self._server.getsockname()[1]}"
        self._peer = None

    def accept(self):
        self._peer, _ = self._server.accept()
        self._peer.recv(4096)  # pyserial throws away what comes before it is ready to ask

    def accept_quietly(self):
        """Accept a recorder that says nothing, once it has thrown away what came before."""
        self._peer, _ = self._server.accept()
        time.sleep(0.3)

    def send(self, data):
        if self._peer is None:
            self.accept()
        self._peer.sendall(data)

    def hang_up_for_good(self):
        self._server.close()
        self._peer.shutdown(socket.SHUT_WR)

    def hang_up(self):
        # With unread commands in it, closing at once would reset the connection and what it holds.
        self._peer.shutdown(socket.SHUT_WR)
        with contextlib.suppress(ConnectionResetError):
            while self._peer.recv(4096):
                pass
        self._peer.close()
        self._peer = None

    def close(self):
        if self._peer is not None:
            self._peer.close()
        self._server.close()


class Rfc2217Link:
    """A port server after RFC 2217, with nothing but the test behind it."""

    def __init__(self):
        self._server = socket.create_server(("127.0.0.1", 0))
        self.port = f"rfc2217://127.0.0.1:{self._server.getsockname()[1]}"
        self._serial = serial.serial_for_url("loop://", timeout=0)
        self._lock = threading.Lock()
        self._asked = threading.Event()

    def accept(self):
        self._peer, _ = self._server.accept()
        self._manager = serial.rfc2217.PortManager(self._serial, self)
        threading.Thread(target=self._serve, daemon=True).start()
        self._asked.wait(5)

    def write(self, data):  # what the port manager answers
        with self._lock:
            self._peer.sendall(data)

    def _serve(self):
        with contextlib.suppress(OSError):
            while data := self._peer.recv(4096):
                if b"".join(self._manager.filter(data)):
                    self._asked.set()  # the recorder's first command: the port is open

    def send(self, data):
        self.write(b"".join(self._manager.escape(data)))

    def close(self):
        self._peer.close()
        self._server.close()


class WireBoard:
    """Send a ramp over a link, in real time or as fast as it is taken."""

    def __init__(self, link, *, stream=1, start=0, rate_hz=RATE_HZ, damage=None, says=announced):
        self.link, self.stream, self.next, self.rate_hz = link, stream, start, rate_hz
        self._says = says
        self._damage = damage or (lambda number, frame: frame)
        self._number = 0
        self._stop = threading.Event()

    def announce(self):
        self.link.send(encode_announcement(self._says(self.stream, rate_hz=self.rate_hz)))

    def frame(self):
        data = encode_frame(
            ramp(self.next, SLOTS), index=self.next, sequence=self._number, stream=self.stream
        )
        self.next += SLOTS
        self._number += 1
        return self._damage(self._number - 1, data)

    def send(self, frames, *, paced=False):
        start_s = time.monotonic()
        for k in range(frames):
            if self._stop.is_set():
                return
            self.link.send(self.frame())
            if paced:
                wait_s = start_s + (k + 1) * SLOTS / self.rate_hz - time.monotonic()
                self._stop.wait(max(0.0, wait_s))

    def run(self, frames, *, paced=False):
        """Announce and send; the recorder hanging up ends it."""
        with contextlib.suppress(OSError):
            self.announce()
            self.send(frames, paced=paced)


class AskedBoard:
    """A board on a terminal that sends in real time once it is asked, and answers commands."""

    def __init__(self, link, *, status=0, answers=True, **settings):
        self.link, self.board = link, WireBoard(link, **settings)
        self.status, self._answers = status, answers
        self.heard, self._stop = [], threading.Event()
        self._thread = threading.Thread(target=self._run, daemon=True)
        self._thread.start()

    def _run(self):
        decoder, begun_s = Decoder(), None
        with contextlib.suppress(OSError):
            while not self._stop.wait(0.002):
                for event in decoder.feed(self.link.received()):
                    if isinstance(event, Command):
                        self.heard.append((time.monotonic(), event))
                        self._answer(event)
                        begun_s = begun_s or time.monotonic()
                sent = self.board.next / self.board.rate_hz
                if begun_s is not None and time.monotonic() - begun_s > sent:
                    self.link.send(self.board.frame())

    def _answer(self, command):
        if command.code == CommandCode.IDENTIFY:
            self.board.announce()
        elif command.code == CommandCode.SET_LINE and self.status:
            self.link.send(encode_reply(Reply(command.code, command.request, self.status, "steep")))
        elif command.code != CommandCode.KEEP_ALIVE and self._answers:
            self.link.send(encode_reply(Reply(command.code, command.request)))

    def codes(self):
        return [command.code for _, command in self.heard]

    def close(self):
        self._stop.set()
        self.link.give_up()
        self._thread.join()


@contextlib.contextmanager
def asked_board(**settings):
    with (
        contextlib.closing(PtyLink()) as link,
        contextlib.closing(AskedBoard(link, **settings)) as board,
    ):
        yield board
