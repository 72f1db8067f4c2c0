"""Record several states of a simulated bench, one after the other: by the port or in memory."""

from collections.abc import Iterable, Iterator
from contextlib import ExitStack, closing
from pathlib import Path

from firmware_bridge.envelope import Unwrapper
from firmware_bridge.intake import Intake
from firmware_bridge.recorder import record
from firmware_bridge.simulated.bench import SimulatedBench
from firmware_bridge.simulated.board import SimulatedBoard, wire_bytes
from firmware_bridge.simulated.setup import Setup

__all__ = ["record_in_memory", "record_through_port"]


def record_through_port(
    bench: SimulatedBench, recordings: Iterable[tuple[Setup, Path]]
) -> Iterator[Path]:
    """Record each state with the recorder, from a board on a pseudo-terminal.

    Parameters
    ----------
    bench : SimulatedBench
        The bench.
    recordings : iterable of (Setup, Path)
        States and the files to write; existing files are replaced.

    Yields
    ------
    Path
        Each file when it is done.
    """
    with ExitStack() as stack:
        board: SimulatedBoard | None = None
        for setup, path in recordings:
            if board is None:
                board = stack.enter_context(SimulatedBoard(bench, setup))
            else:
                board.set_up(setup)
            record(board.port, path, duration_s=setup.duration_s, overwrite=True)
            yield path


def record_in_memory(
    bench: SimulatedBench, recordings: Iterable[tuple[Setup, Path]]
) -> Iterator[Path]:
    """Record the same bytes without a terminal: unwrapped, checked and written as they would be.

    Parameters
    ----------
    bench : SimulatedBench
        The bench.
    recordings : iterable of (Setup, Path)
        States and the files to write; existing files are replaced.

    Yields
    ------
    Path
        Each file when it is done.
    """
    for number, (setup, path) in enumerate(recordings, start=1):
        unwrapper = Unwrapper()
        with closing(Intake(path, duration_s=setup.duration_s, overwrite=True)) as intake:
            for data in wire_bytes(bench, setup, stream=number, number=number):
                for piece in unwrapper.feed(data):
                    intake.take(piece, 0, 0)
                if intake.is_complete:
                    break
        yield path
