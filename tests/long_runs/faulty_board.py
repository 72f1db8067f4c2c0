"""A board behind a proxy that damages what it sends; started by ``fault_table`` as a process.

It writes down which frames it sent and which of them arrive undamaged. The port is a
pseudo-terminal under a name that outlives unplugging, or a socket.
"""

import contextlib
import fcntl
import json
import os
import select
import socket
import sys
import termios
import time
import tty
from pathlib import Path

import numpy as np
from long_runs.faults import KINDS, damage, undamaged
from long_runs.known_stream import KnownStream

__all__ = ["FaultyBoard", "PtyPort", "SocketPort"]

_FRAMES = 200  # a batch
_LONGEST_S = 60.0  # a recorder that takes nothing for so long is broken


class PtyPort:
    """The recorder's port: ``name`` leads to the pseudo-terminal that is plugged in now."""

    def __init__(self, folder):
        self.name = str(Path(folder) / "port")
        self.plug()

    def plug(self):
        self._master, self._slave = os.openpty()
        tty.setraw(self._slave)
        os.set_blocking(self._master, False)
        Path(self.name).symlink_to(os.ttyname(self._slave))

    def wait_for_commands(self):
        # Opening a terminal throws away what is in it: nothing is sent before the recorder asks.
        if not select.select([self._master], [], [], _LONGEST_S)[0]:
            raise TimeoutError("the recorder does not ask")
        self.commands()

    def commands(self):
        with contextlib.suppress(BlockingIOError):
            return os.read(self._master, 65536)
        return b""

    def send(self, data):
        view = memoryview(data)
        while view:
            try:
                view = view[os.write(self._master, view) :]
            except BlockingIOError:
                if not select.select([], [self._master], [], _LONGEST_S)[1]:
                    raise TimeoutError("the recorder does not read") from None

    def drain(self):
        """Wait until the recorder has read everything."""
        quiet = 0
        while quiet < 10:
            waiting = fcntl.ioctl(self._slave, termios.FIONREAD, bytes(4))
            quiet = 0 if any(waiting) else quiet + 1
            time.sleep(0.005)

    def unplug(self):
        self.drain()
        Path(self.name).unlink()
        for handle in (self._master, self._slave):
            os.close(handle)


class SocketPort:
    """The same through a socket; unplugging hangs up."""

    def __init__(self, folder):
        self._server = socket.create_server(("127.0.0.1", 0))
        self.name = f"socket://127.0.0.1:{self._server.getsockname()[1]}"
        self._peer = None

    def plug(self):
        pass

    def wait_for_commands(self):
        self._peer, _ = self._server.accept()
        self._peer.settimeout(_LONGEST_S)
        self._peer.recv(4096)

    def commands(self):
        return self._peer.recv(4096) if select.select([self._peer], [], [], 0)[0] else b""

    def send(self, data):
        self._peer.sendall(data)

    def drain(self):
        waiting = bytes(1)
        while any(waiting):
            time.sleep(0.01)
            waiting = fcntl.ioctl(self._peer, termios.TIOCOUTQ, bytes(4))
        time.sleep(0.3)  # what is in the recorder's socket by now

    def unplug(self):
        self._peer.shutdown(socket.SHUT_WR)
        with contextlib.suppress(OSError):
            while self._peer.recv(4096):
                pass
        self._peer.close()


class FaultyBoard:
    """Sends through a port with one kind of fault, and keeps the truth."""

    def __init__(self, port, kind, rate, seed):
        self._port, self._kind, self._rate = port, kind, rate
        self._rng = np.random.default_rng(seed)
        self._kinds = [k for k in KINDS if kind in (k, "all kinds")]
        self._events = [e for e in ("stalls", "resets", "unpluggings") if kind in (e, "all kinds")]
        self._truth = []
        self._streams = 0
        self.faults = 0
        self.bytes = 0

    def run(self, size):
        """Send ``size`` bytes of clean frames."""
        self._port.wait_for_commands()
        self._start()
        while self.bytes < size:
            batch = self._stream.batch(_FRAMES)
            self.bytes += len(batch.wire)
            if self._is_time(len(batch.wire), size):
                self.faults += 1
                event = self._events[int(self._rng.integers(len(self._events)))]
                getattr(self, f"_{event}")(batch)
            else:
                self._send(batch, len(batch.wire))
            if self._port.commands():
                self._port.send(self._stream.announcement())
        self._port.drain()

    def save(self, path):
        """Write down every frame sent: stream, index, filled, undamaged."""
        np.savez(path, frames=np.concatenate(self._truth))

    def _is_time(self, length, size):
        """Return whether a stall, reset or unplugging falls into this batch; at least one does."""
        if not self._events:
            return False
        is_due = not self._kinds and not self.faults and self.bytes >= size / 2
        return is_due or self._rng.random() < self._event_rate() * length

    def _event_rate(self):
        # Among all kinds of fault the rarer ones, which take long, are a hundredth.
        return self._rate if not self._kinds else self._rate / 100

    def _start(self):
        """Start the board: a new stream, whose announcement and first frame get through."""
        self._streams += 1
        self._stream = KnownStream(self._streams, self._rng)
        self._port.send(self._stream.announcement())
        first = self._stream.batch(1)
        self.bytes += len(first.wire)
        self._port.send(first.wire)
        self._note(first, np.ones(1, bool))

    def _note(self, batch, intact):
        columns = [np.full(len(intact), self._stream.stream), batch.index, batch.filled, intact]
        self._truth.append(np.stack(columns, axis=1).astype(np.int64))

    def _send(self, batch, upto, beyond=None):
        """Send a batch up to a byte, or all but a stretch of it, through the faults."""
        data, stretches, done = damage(
            batch.wire[:upto], self._kinds, self._damage_rate(), self._rng
        )
        if beyond is not None:
            rest, more, again = damage(
                batch.wire[beyond:], self._kinds, self._damage_rate(), self._rng
            )
            stretches = np.concatenate([stretches, more + beyond])
            data, done = data + rest, done + again
        self.faults += done
        self._note(batch, undamaged(batch.starts, batch.ends, stretches))
        self._port.send(data)

    def _damage_rate(self):
        return self._rate if self._kinds else 0.0

    def _cut(self, batch):
        return int(self._rng.integers(1, len(batch.wire)))

    def _stalls(self, batch):
        """Nothing comes for a while, and in half of the cases what was sent meanwhile is lost."""
        time.sleep(float(self._rng.uniform(0.01, 0.1)))
        cut = self._cut(batch)
        lost = int(self._rng.integers(1, 20_000)) if self._rng.random() < 0.5 else 0
        self._send(batch, cut, min(cut + lost, len(batch.wire)) if lost else cut)

    def _resets(self, batch):
        self._send(batch, self._cut(batch))
        self._start()

    def _unpluggings(self, batch):
        """The cable is out for a while; the board counts on, or loses power and starts anew."""
        self._send(batch, self._cut(batch))
        self._port.unplug()
        time.sleep(float(self._rng.uniform(0.0, 0.3)))
        self._port.plug()
        self._port.wait_for_commands()
        if self._rng.random() < 0.5:
            self._stream.next += int(self._rng.integers(0, 100_000))
            self._port.send(self._stream.announcement())
        else:
            self._start()


def main():
    order = json.loads(sys.argv[1])
    port = (SocketPort if order["link"] == "socket" else PtyPort)(order["folder"])
    print(port.name, flush=True)
    board = FaultyBoard(port, order["kind"], order["rate"], order["seed"])
    board.run(order["bytes"])
    board.save(order["truth"])
    print(json.dumps({"bytes": board.bytes, "faults": board.faults}), flush=True)
    sys.stdin.readline()  # until the recorder is done


if __name__ == "__main__":
    main()
