"""Many rehearsals, one a seed, on a good bench or on one with something gone bad."""

from collections.abc import Callable, Iterable, Iterator
from concurrent.futures import ProcessPoolExecutor
from contextlib import ExitStack
from dataclasses import dataclass
from functools import partial
from multiprocessing import get_context
from pathlib import Path
from tempfile import TemporaryDirectory

from calibration.comparison import Comparison
from calibration.errors import CalibrationError
from calibration.rehearsal import rehearse
from calibration.rehearsal_script import LINES_S
from calibration.trial_bench import TRIAL_BENCHES, TrialBench
from metro.bench import Bench

__all__ = ["Trial", "play_trials"]

GOOD = TRIAL_BENCHES["good"]


@dataclass(frozen=True)
class Trial:
    """One session of many.

    Parameters
    ----------
    seed : int
        Of its truth and noise.
    comparisons : list of Comparison
        Each quantity beside its truth; empty where no calibration came of it.
    reasons : list of str
        Why the program distrusts the session or refused it; empty where it does not.
    """

    seed: int
    comparisons: list[Comparison]
    reasons: list[str]

    @property
    def is_trusted(self) -> bool:
        """Whether the program found no reason for distrust."""
        return not self.reasons


def play_trials(
    bench: Bench,
    seeds: Iterable[int],
    *,
    kind: TrialBench = GOOD,
    through_port: bool = False,
    lines_s: float = LINES_S,
    processes: int = 1,
    progress: Callable[[str], None] | None = None,
) -> Iterator[Trial]:
    """Play one session a seed and yield what came of it.

    Parameters
    ----------
    bench : Bench
        The bench to play.
    seeds : iterable of int
        One session each.
    kind : TrialBench
        What is bad about the bench.
    through_port : bool
        Record through a pseudo-terminal; else decode the same bytes in memory.
    lines_s : float
        Duration of a lines recording of a good bench [s].
    processes : int
        Sessions played at a time, each in a process of its own; 1 plays in this one.
    progress : callable, optional
        Told of each session that is done.

    Yields
    ------
    Trial
        In the order of the seeds.
    """
    play = partial(_played, kind.of(bench), through_port, kind.lines_s(lines_s), kind.lean_rad)
    with ExitStack() as stack:
        if processes > 1:
            spawn = get_context("spawn")  # a fork would copy the threads' locks of numpy's BLAS
            pool = stack.enter_context(ProcessPoolExecutor(processes, mp_context=spawn))
            played = pool.map(play, seeds)
        else:
            played = map(play, seeds)
        for trial in played:
            if progress is not None:
                progress(f"{kind.name}, seed {trial.seed}")
            yield trial


def _played(bench: Bench, through_port: bool, lines_s: float, lean_rad: float, seed: int) -> Trial:
    with TemporaryDirectory(prefix="midfringe-") as folder:
        try:
            played = rehearse(
                bench,
                seed,
                Path(folder),
                through_port=through_port,
                lines_s=lines_s,
                lean_rad=lean_rad,
            )
        except CalibrationError as error:
            return Trial(seed, [], [f"refused: {error}"])
    return Trial(seed, played.comparisons, played.calibration.all_reasons)
