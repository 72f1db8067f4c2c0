"""Propagation of distributions by Monte Carlo, with as many trials as the tolerance asks for.

References
----------
JCGM 101:2008 (GUM Supplement 1), clause 7; 7.9.4 (adaptive procedure).
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from metro.coverage_interval import numerical_tolerance, shortest, symmetric
from metro.errors import MetroError
from metro.model_input import draw

if TYPE_CHECKING:
    from collections.abc import Callable, Mapping, Sequence

    import numpy as np
    from numpy.typing import NDArray

    from metro.model_input import Correlation, Input

__all__ = ["MonteCarloError", "Simulation", "simulate"]

_INTERVALS = {"symmetric": symmetric, "shortest": shortest}


class MonteCarloError(MetroError):
    """A model that gives no finite values, or a choice that there is not."""


@dataclass(frozen=True, eq=False)
class Simulation:
    """The distribution of a model's result.

    Parameters
    ----------
    values : ndarray, shape (trials,)
        Draws of the result in ascending order.
    p : float
        Coverage probability of the interval.
    interval : tuple of (float, float)
        End points.
    kind : str
        ``"symmetric"`` or ``"shortest"``.
    tolerance : float
        What was asked of twice the standard error of estimate, u and end points.
    is_settled : bool
        Whether it was reached; False where the most trials allowed were not enough.
    """

    values: NDArray[np.float64]
    p: float
    interval: tuple[float, float]
    kind: str
    tolerance: float
    is_settled: bool

    @property
    def trials(self) -> int:
        """How many draws there are."""
        return int(self.values.size)

    @property
    def estimate(self) -> float:
        """The mean of the draws."""
        return float(self.values.mean())

    @property
    def u(self) -> float:
        """The standard deviation of the draws."""
        return float(self.values.std(ddof=1))


def simulate(
    model: Callable[..., Any],
    inputs: Sequence[Input],
    correlations: Mapping[str, Correlation] | None = None,
    *,
    p: float = 0.95,
    kind: str = "symmetric",
    digits: int = 2,
    tolerance: float | None = None,
    seed: int = 0,
    most_trials: int = 10_000_000,
) -> Simulation:
    """Return the distribution of a model's result, with trials added until its numbers settle.

    Parameters
    ----------
    model : callable
        Takes an array of each input, shape (n,), and returns an array.
    inputs : sequence of Input
        With their distributions.
    correlations : mapping of str to float or matrix, optional
        By group, as for :class:`metro.budget.Budget`.
    p : float
        Coverage probability.
    kind : str
        ``"symmetric"`` or ``"shortest"`` interval.
    digits : int
        Significant digits of u that must settle, where ``tolerance`` is not given.
    tolerance : float, optional
        Bound on twice the standard error of estimate, u and end points, in the unit of the result.
    seed : int
        The same seed gives the same draws.
    most_trials : int
        Where to stop at the latest; 8 bytes each, and as much again for every input of a block.

    Returns
    -------
    Simulation
        Draws, interval, and whether it settled.

    Raises
    ------
    MonteCarloError
        If the model gives values that are not finite, or ``kind`` is none.
    """
    import numpy as np

    if kind not in _INTERVALS:
        raise MonteCarloError(f"kind must be 'symmetric' or 'shortest', got {kind!r}")
    rng = np.random.default_rng(seed)
    # Supplement 1, 7.9.4 b): at least 100/(1 − p) draws lie outside the interval of each block
    block = max(math.ceil(100.0 / (1.0 - p)), 10_000)
    values: list[NDArray[np.float64]] = []
    numbers: list[tuple[float, ...]] = []
    wanted, settled = 0.0, False
    while not settled and (len(values) + 1) * block <= max(most_trials, 2 * block):
        values.append(np.sort(_block(model, draw(inputs, block, rng, correlations))))
        numbers.append(_numbers(values[-1], p, kind))
        if _is_due(len(values)):
            wanted = _tolerance(values, digits) if tolerance is None else tolerance
            spread = np.std(numbers, axis=0, ddof=1) / math.sqrt(len(numbers))
            settled = bool(np.all(2.0 * spread <= wanted))
    ordered = np.sort(np.concatenate(values), kind="stable")  # merges the sorted blocks
    return Simulation(ordered, p, _INTERVALS[kind](ordered, p), kind, wanted, settled)


def _block(model: Callable[..., Any], drawn: NDArray[np.float64]) -> NDArray[np.float64]:
    import numpy as np

    made = np.asarray(model(*drawn), dtype=float)
    if made.shape != drawn.shape[1:]:
        made = np.broadcast_to(made, drawn.shape[1:])
    if not np.all(np.isfinite(made)):
        share = 1.0 - float(np.isfinite(made).mean())
        raise MonteCarloError(
            f"the model must be finite for every draw, {share:.3g} of them are not"
        )
    return made


def _numbers(ordered: NDArray[np.float64], p: float, kind: str) -> tuple[float, ...]:
    return float(ordered.mean()), float(ordered.std(ddof=1)), *_INTERVALS[kind](ordered, p)


def _is_due(blocks: int) -> bool:
    """Whether to look after so many blocks.

    The spread of two or three blocks (7.9.4 begins with two) is too often small by chance.
    """
    return blocks >= 10 and (blocks < 20 or blocks % 10 == 0)


def _tolerance(values: list[NDArray[np.float64]], digits: int) -> float:
    import numpy as np

    variance = float(np.concatenate(values[:20]).var(ddof=1))
    return numerical_tolerance(math.sqrt(variance), digits) if variance > 0 else math.inf
