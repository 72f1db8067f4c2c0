"""A board without faults, at a steady rate or as fast as it is taken; started as a process."""

import json
import sys
import time

import numpy as np
from long_runs.faulty_board import PtyPort
from long_runs.known_stream import KnownStream

__all__ = ["main"]

_FRAMES = 40  # a batch


def main():
    """Send ``samples`` samples at ``bytes_per_s`` (0: flat out), announced at ``rate_hz``."""
    order = json.loads(sys.argv[1])
    port = PtyPort(order["folder"])
    print(port.name, flush=True)
    stream = KnownStream(1, np.random.default_rng(1), order["rate_hz"])
    port.wait_for_commands()
    port.send(stream.announcement())
    sent, begun_s = 0, time.monotonic()
    while stream.next < order["samples"]:
        wire = stream.batch(_FRAMES).wire
        port.send(wire)
        sent += len(wire)
        if order["bytes_per_s"]:
            time.sleep(max(0.0, begun_s + sent / order["bytes_per_s"] - time.monotonic()))
    took_s = time.monotonic() - begun_s
    port.drain()
    print(json.dumps({"bytes": sent, "samples": stream.next, "took_s": took_s}), flush=True)
    sys.stdin.readline()  # until the recorder is done


if __name__ == "__main__":
    main()
