"""A board and a recorder as two processes, so that the recorder's memory and time are its own."""

import json
import os
import subprocess
import sys
from pathlib import Path

__all__ = ["record_from"]


def record_from(board_module, order, folder):
    """Record into a folder what a board sends; return what the board and the recorder said.

    The board prints its port, then what it has sent; the recorder prints its files, memory and time.
    """
    order = order | {"folder": str(folder), "said": f"{folder}/board.txt"}
    with _start(board_module, order) as board:
        port = board.stdout.readline().strip()
        record = {"port": port, "file": f"{folder}/a.mfr", "said": f"{folder}/recorder.txt"}
        with _start("recorder_process", record) as recorder:
            sent = json.loads(board.stdout.readline() or "null")
            recorder.stdin.write("\n")
            recorder.stdin.flush()
            recorded = json.loads(recorder.stdout.readline() or "null")
        board.stdin.close()
    if sent is None or recorded is None:
        said = [Path(folder, name).read_text() for name in ("board.txt", "recorder.txt")]
        raise RuntimeError(f"{board_module} {order}: a process failed\n{''.join(said)}")
    return sent, recorded


def _start(module, order):
    environment = os.environ | {"PYTHONPATH": str(Path(__file__).resolve().parents[1])}
    with Path(order["said"]).open("w", encoding="utf-8") as said:
        return subprocess.Popen(
            [sys.executable, "-m", f"long_runs.{module}", json.dumps(order)],
            stdin=subprocess.PIPE,
            stdout=subprocess.PIPE,
            stderr=said,
            text=True,
            env=environment,
        )
