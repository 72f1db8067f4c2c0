"""Whether the linear result of a model may be used: it is held against a Monte Carlo.

References
----------
JCGM 101:2008 (GUM Supplement 1), clause 8: the end points of both intervals must agree within the
numerical tolerance of u.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from metro.coverage_interval import numerical_tolerance
from metro.display import show
from metro.monte_carlo import Simulation, simulate
from metro.propagation import propagate

if TYPE_CHECKING:
    from collections.abc import Callable, Mapping, Sequence

    from metro.measured import Measured
    from metro.model_input import Correlation, Input

__all__ = ["LinearCheck", "linear_result_holds"]


@dataclass(frozen=True, eq=False)
class LinearCheck:
    """A linear result beside the distribution of the result.

    Parameters
    ----------
    linear : Measured
        The result to first order.
    simulation : Simulation
        The distribution.
    low_difference, high_difference : float
        Distance of the two lower and of the two upper end points, in the result's unit.
    tolerance : float
        Numerical tolerance δ of u, which neither may exceed.
    """

    linear: Measured
    simulation: Simulation
    low_difference: float
    high_difference: float
    tolerance: float

    @property
    def holds(self) -> bool:
        """Whether the linear result may be used."""
        return max(self.low_difference, self.high_difference) <= self.tolerance

    @property
    def reason(self) -> str | None:
        """Why the linear result must not be used, and what to use; None if it may."""
        if self.holds:
            return None
        unit = self.linear.unit
        low, high = (show(v, unit) for v in self.simulation.interval)
        return (
            f"the linear interval misses that of the distribution by {show(self.low_difference, unit, 2)}"
            f" (low) and {show(self.high_difference, unit, 2)} (high), more than"
            f" {show(self.tolerance, unit, 2)}: use {low} … {high}"
            f" ({100 * self.simulation.p:.4g} %, Monte Carlo)"
        )


def linear_result_holds(
    model: Callable[..., Any],
    inputs: Sequence[Input],
    correlations: Mapping[str, Correlation] | None = None,
    *,
    p: float = 0.95,
    digits: int = 2,
    kind: str = "symmetric",
    unit: str = "1",
    seed: int = 0,
    most_trials: int = 2_000_000,
) -> LinearCheck:
    """Return whether a model's linear result may be used, with the numbers that say so.

    Parameters
    ----------
    model : callable
        Takes floats and arrays alike.
    inputs : sequence of Input
        With their distributions; a finite dof makes the linear interval wider, and the draws too
        where the distribution is ``"t"``.
    correlations : mapping of str to float or matrix, optional
        By group.
    p : float
        Coverage probability.
    digits : int
        Significant digits of u that matter; fewer make a larger tolerance.
    kind : str
        ``"symmetric"`` or ``"shortest"`` interval to compare with.
    unit : str
        SI unit of the result.
    seed : int
        Of the draws.
    most_trials : int
        Where the Monte Carlo stops at the latest.

    Returns
    -------
    LinearCheck
        ``holds``, ``reason``, both results, and the differences.

    Notes
    -----
    The tolerance is that of the u of the distribution; the Monte Carlo goes on until it has settled
    to a fifth of it (Supplement 1, 8.2) or the most trials are reached: ``simulation.is_settled``.
    """
    linear = propagate(model, inputs, correlations, unit).measured
    first = simulate(model, inputs, correlations, p=p, kind=kind, seed=seed, most_trials=20_000)
    tolerance = numerical_tolerance(first.u, digits) if first.u > 0 else 0.0
    simulation = simulate(
        model,
        inputs,
        correlations,
        p=p,
        kind=kind,
        tolerance=0.2 * tolerance,
        seed=seed,
        most_trials=most_trials,
    )
    half_width = linear.coverage_factor(p) * float(linear.u_magnitude)
    low, high = simulation.interval
    return LinearCheck(
        linear,
        simulation,
        abs(linear.magnitude - half_width - low),
        abs(linear.magnitude + half_width - high),
        tolerance,
    )
