"""Many rehearsals: whether the uncertainties cover, quantity by quantity."""

from collections.abc import Callable, Iterable, Iterator, Sequence
from concurrent.futures import ProcessPoolExecutor
from contextlib import ExitStack
from dataclasses import dataclass
from functools import partial
from multiprocessing import get_context
from pathlib import Path
from tempfile import TemporaryDirectory
from typing import Any

import numpy as np

from calibration.comparison import Comparison
from calibration.rehearsal import rehearse
from calibration.rehearsal_script import LINES_S
from metro.bench import Bench
from metro.output import table

__all__ = ["Coverage", "coverage_of", "coverage_table", "play_trials"]


@dataclass(frozen=True)
class Coverage:
    """How one quantity's uncertainty did over many seeds.

    Parameters
    ----------
    name : str
        The quantity.
    trials : int
        Number of sessions.
    inside_95 : float
        Part of them with the truth inside the 95 % interval.
    mean, spread : float
        Mean and standard deviation of the normalised errors (measured − truth)/u.
    relative_u : float or None
        Median of u over the measured value; None for quantities around zero.
    """

    name: str
    trials: int
    inside_95: float
    mean: float
    spread: float
    relative_u: float | None

    def to_dict(self) -> dict[str, Any]:
        """Return the JSON form."""
        return {
            "name": self.name,
            "trials": self.trials,
            "inside_95": self.inside_95,
            "mean": self.mean,
            "spread": self.spread,
            "relative_u": self.relative_u,
        }


def play_trials(
    bench: Bench,
    seeds: Iterable[int],
    *,
    through_port: bool = False,
    lines_s: float = LINES_S,
    processes: int = 1,
    progress: Callable[[str], None] | None = None,
) -> Iterator[list[Comparison]]:
    """Play one session a seed and yield each comparison with its truth.

    Parameters
    ----------
    bench : Bench
        The bench to play.
    seeds : iterable of int
        One session each.
    through_port : bool
        Record through a pseudo-terminal; else decode the same bytes in memory.
    lines_s : float
        Duration of a lines recording [s].
    processes : int
        Sessions played at a time, each in a process of its own; 1 plays in this one.
    progress : callable, optional
        Told of each session that is done.

    Yields
    ------
    list of Comparison
        In the order of the seeds.
    """
    play = partial(_played, bench, through_port, lines_s)
    with ExitStack() as stack:
        if processes > 1:
            spawn = get_context("spawn")  # a fork would copy the threads' locks of numpy's BLAS
            pool = stack.enter_context(ProcessPoolExecutor(processes, mp_context=spawn))
            played = pool.map(play, seeds)
        else:
            played = map(play, seeds)
        for seed, comparisons in played:
            if progress is not None:
                progress(f"seed {seed}")
            yield comparisons


def _played(
    bench: Bench, through_port: bool, lines_s: float, seed: int
) -> tuple[int, list[Comparison]]:
    with TemporaryDirectory(prefix="midfringe-") as folder:
        played = rehearse(bench, seed, Path(folder), through_port=through_port, lines_s=lines_s)
    return seed, played.comparisons


def coverage_of(sessions: Sequence[Sequence[Comparison]]) -> list[Coverage]:
    """Return the coverage of each quantity over sessions, and of all together as the last row."""
    by_name: dict[str, list[Comparison]] = {}
    for session in sessions:
        for comparison in session:
            by_name.setdefault(comparison.name, []).append(comparison)
    rows = [_coverage(name, found) for name, found in by_name.items()]
    everything = [comparison for found in by_name.values() for comparison in found]
    return [*rows, _coverage("all", everything)] if everything else []


def _coverage(name: str, found: Sequence[Comparison]) -> Coverage:
    errors = np.array([comparison.normalised_error for comparison in found])
    sizes = np.array([abs(c.truth) for c in found])
    around_zero = name == "all" or "phase" in name or "clock" in name
    sizes = np.where(sizes > 0, sizes, 1.0)
    relative = [float(c.measured.u_magnitude) / size for c, size in zip(found, sizes, strict=True)]
    return Coverage(
        name=name,
        trials=len(found),
        inside_95=float(np.mean([comparison.inside_95 for comparison in found])),
        mean=float(errors.mean()),
        spread=float(errors.std(ddof=1)) if len(found) > 1 else 0.0,
        relative_u=None if around_zero else float(np.median(relative)),
    )


def coverage_table(rows: Sequence[Coverage]) -> str:
    """Return the coverage as a table for people."""
    lines = [
        [
            row.name,
            row.trials,
            f"{100 * row.inside_95:.1f} %",
            f"{row.mean:+.2f}",
            f"{row.spread:.2f}",
            "" if row.relative_u is None else f"{100 * row.relative_u:.3f} %",
        ]
        for row in rows
    ]
    header = ["quantity", "comparisons", "inside 95 %", "mean", "spread", "median u"]
    return table(lines, header=header)
