"""``midfringe record``'s own code in a process whose memory and time are measured."""

import json
import resource
import sys
import threading
import time
from pathlib import Path

from firmware_bridge.recorder import record

__all__ = ["main", "peak_mb"]


def peak_mb():
    """Return the most memory this process has held.

    ``ru_maxrss`` of a process begins with what its parent held when it was started; where the
    system tells, the peak of this program's own memory is taken.
    """
    try:
        text = Path("/proc/self/status").read_text(encoding="ascii")
    except OSError:
        peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
        return peak / (1 << 20 if sys.platform == "darwin" else 1 << 10)
    return int(text.split("VmHWM:")[1].split()[0]) / 1024


def main():
    """Record until a line comes in; print what was recorded and what it took."""
    order = json.loads(sys.argv[1])
    stop = threading.Event()
    threading.Thread(target=lambda: (sys.stdin.readline(), stop.set()), daemon=True).start()
    begun_s = time.monotonic()
    peaks = [0.0]  # while it records; reading the file back comes after
    summary = record(
        order["port"],
        order["file"],
        reconnect=True,
        stop=stop,
        progress=lambda _progress: peaks.append(peak_mb()),
    )
    usage = resource.getrusage(resource.RUSAGE_SELF)
    result = {
        "files": [str(path) for path in summary.files],
        "samples": summary.samples,
        "bytes_discarded": summary.bytes_discarded,
        "peak_mb": peaks[-1],
        "read_back_mb": peak_mb(),
        "cpu_s": usage.ru_utime + usage.ru_stime,
        "wall_s": time.monotonic() - begun_s,
    }
    print(json.dumps(result), flush=True)


if __name__ == "__main__":
    main()
