"""The simulated board in a process of its own, in real time, for a page to be tried on."""

from collections.abc import Iterator
from contextlib import contextmanager
from multiprocessing import get_context
from multiprocessing.connection import Connection
from signal import SIG_IGN, SIGINT, signal
from typing import TYPE_CHECKING

from calibration.errors import CalibrationError

if TYPE_CHECKING:
    from metro.bench import Bench

__all__ = ["simulated_board"]

_START_S = 30.0


@contextmanager
def simulated_board(bench: "Bench", seed: int, slope: str) -> Iterator[str]:
    """Run a simulated board while the context is open.

    Parameters
    ----------
    bench : Bench
        The bench behind it.
    seed : int
        Of its truth and its noise.
    slope : str
        ``"rising"`` or ``"falling"``: where its operator holds it.

    Yields
    ------
    str
        The port it sits behind.

    Raises
    ------
    CalibrationError
        If the bench cannot be simulated; the message says why.
    """
    context = get_context("spawn")
    ours, theirs = context.Pipe()
    process = context.Process(
        target=_run, args=(theirs, bench, seed, slope), name="simulated board", daemon=True
    )
    process.start()
    theirs.close()
    try:
        if not ours.poll(_START_S):
            raise CalibrationError(f"the simulated board did not start within {_START_S:g} s")
        is_port, said = ours.recv()
        if not is_port:
            raise CalibrationError(f"the bench cannot be simulated: {said}")
        yield said
    except EOFError:
        raise CalibrationError("the simulated board ended before it began") from None
    finally:
        ours.close()  # which ends it
        process.join(5.0)
        if process.exitcode is None:
            process.terminate()


def _run(connection: Connection, bench: "Bench", seed: int, slope: str) -> None:
    from math import inf

    from firmware_bridge.errors import BridgeError
    from firmware_bridge.simulated.bench import SimulatedBench
    from firmware_bridge.simulated.board import SimulatedBoard
    from firmware_bridge.simulated.setup import Setup
    from metro.errors import MetroError

    signal(SIGINT, SIG_IGN)  # Ctrl-C is for the page's program, which then lets go of us
    try:
        simulated = SimulatedBench(bench, seed)
        setup = Setup(inf, slope=slope)
    except (MetroError, BridgeError) as error:
        connection.send((False, str(error)))
        return
    with SimulatedBoard(simulated, setup, speed=1.0) as board:
        connection.send((True, board.port))
        try:
            connection.recv()
        except (EOFError, OSError):
            return
