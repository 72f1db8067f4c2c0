"""Inputs observed together, several times: the result of a model from such repetitions.

Inputs of one repetition share its circumstances and are correlated, so that Welch and Satterthwaite's
formula, which takes them for independent, counts too many degrees of freedom. One value of the
result a repetition has none of this trouble.

References
----------
JCGM 100:2008 (GUM), annex H.2: approach 1 (means with their correlation), approach 2 (one value of
the result for each set of observations); G.4.1, note 1 (independence).
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from metro.budget import BudgetError
from metro.measured import Measured

if TYPE_CHECKING:
    from collections.abc import Callable, Mapping, Sequence

    from metro.model_input import Input

__all__ = ["Repeated"]


@dataclass(frozen=True)
class Repeated:
    """Several inputs, each observed in every one of n repetitions.

    Parameters
    ----------
    observations : mapping of str to sequence of float, each of length n
        By the name of the input, in the order the model takes them; n ≥ 2.
    units : mapping of str to str, optional
        SI unit by name; "1" where not given.

    Raises
    ------
    BudgetError
        If the inputs were not observed equally often, at least twice, with finite values.
    """

    observations: Mapping[str, Sequence[float]]
    units: Mapping[str, str] | None = None

    def __post_init__(self) -> None:
        lengths = {name: len(values) for name, values in self.observations.items()}
        if len(set(lengths.values())) != 1:
            found = ", ".join(f"{name}: {n}" for name, n in lengths.items()) or "none"
            raise BudgetError(f"inputs must be observed equally often, got {found}")
        if self.repetitions < 2:
            raise BudgetError(f"inputs must be observed at least twice, got {self.repetitions}")
        for name, values in self.observations.items():
            if not all(math.isfinite(v) for v in values):
                raise BudgetError(f"observations of {name} must be finite")

    @property
    def repetitions(self) -> int:
        """How often the inputs were observed."""
        return len(next(iter(self.observations.values())))

    def reduce(self, model: Callable[..., Any], unit: str = "1") -> Measured:
        """Return the mean of the model's value in each repetition: approach 2 of GUM H.2.

        Parameters
        ----------
        model : callable
            Takes one value of each input, as floats, and returns a float.
        unit : str
            SI unit of the result.

        Returns
        -------
        Measured
            u = s/√n with n − 1 degrees of freedom, exact for a model linear over the scatter.
        """
        n = self.repetitions
        values = [float(model(*row)) for row in zip(*self.observations.values(), strict=True)]
        mean = math.fsum(values) / n
        spread = math.sqrt(math.fsum((v - mean) ** 2 for v in values) / (n - 1))
        return Measured.of(mean, unit, spread / math.sqrt(n), n - 1)

    def inputs(
        self, group: str = "observed together"
    ) -> tuple[list[Input], dict[str, list[list[float]]]]:
        """Return the means with their u, and the correlation between them: approach 1 of GUM H.2.

        Parameters
        ----------
        group : str
            Label of their group.

        Returns
        -------
        tuple of (list of Input, dict of str to matrix)
            For :func:`metro.propagation.propagate`, with further inputs or alone. In the budget the
            group counts with n − 1 degrees of freedom.
        """
        import numpy as np

        from metro.model_input import Input

        n = self.repetitions
        table = np.array([list(values) for values in self.observations.values()], dtype=float)
        left = table - table.mean(axis=1, keepdims=True)
        covariance = left @ left.T / (n * (n - 1))
        u = np.sqrt(np.diag(covariance))
        scale = np.where(u > 0, u, 1.0)
        correlation = np.clip(covariance / np.outer(scale, scale), -1.0, 1.0)
        np.fill_diagonal(correlation, 1.0)
        units = self.units or {}
        inputs = [
            Input(name, float(m), float(s), "t", n - 1, group, "A", units.get(name, "1"))
            for name, m, s in zip(self.observations, table.mean(axis=1), u, strict=True)
        ]
        return inputs, {group: correlation.tolist()}
