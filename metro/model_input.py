"""An input of a measurement model: estimate, standard uncertainty, distribution, and its draws.

References
----------
JCGM 101:2008 (GUM Supplement 1), 6.4: rectangular (6.4.2), triangular (6.4.5), arcsine (6.4.6),
Gaussian (6.4.7, 6.4.8) and scaled and shifted t (6.4.9).
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from metro.budget import BudgetError, Contribution

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    import numpy as np
    from numpy.typing import NDArray

    Correlation = float | Sequence[Sequence[float]]

__all__ = ["Input", "draw"]


@dataclass(frozen=True, slots=True)
class Input:
    """One input quantity of a model.

    Parameters
    ----------
    name : str
        Such as ``"laser wavelength"``.
    value : float
        Its estimate.
    u : float
        Its standard uncertainty, in the unit of the value. For ``"t"`` the scale of the
        distribution, s/√n as the GUM has it; the standard deviation of the draws is larger.
    distribution : str
        ``"normal"``, ``"rectangular"``, ``"triangular"``, ``"arcsine"`` or ``"t"``.
    dof : float
        Degrees of freedom of ``u``.
    group : str
        Inputs with the same label are correlated with each other; empty for an independent one.
    kind : str
        ``"A"`` from repeated observations, ``"B"`` from other knowledge.
    unit : str
        Of the value, for the table.

    Raises
    ------
    BudgetError
        If u, distribution, dof or kind is none.
    """

    name: str
    value: float
    u: float
    distribution: str = "normal"
    dof: float = math.inf
    group: str = ""
    kind: str = "B"
    unit: str = "1"

    def __post_init__(self) -> None:
        self.contribution(1.0)
        if not math.isfinite(self.value):
            raise BudgetError(f"{self.name}: value must be finite, got {self.value!r}")

    def contribution(self, sensitivity: float) -> Contribution:
        """Return the line of a budget that this input makes.

        Parameters
        ----------
        sensitivity : float
            Signed derivative of the result by this input.

        Returns
        -------
        Contribution
            With the same u, distribution and group.
        """
        return Contribution(
            self.name,
            self.value,
            self.u,
            sensitivity,
            self.kind,
            self.distribution,
            self.dof,
            self.group,
            self.unit,
        )


def draw(
    inputs: Sequence[Input],
    count: int,
    rng: np.random.Generator,
    correlations: Mapping[str, Correlation] | None = None,
) -> NDArray[np.float64]:
    """Return draws of every input from its distribution.

    Parameters
    ----------
    inputs : sequence of Input
        The inputs of a model.
    count : int
        Draws of each.
    rng : numpy.random.Generator
        Source of the draws.
    correlations : mapping of str to float or matrix, optional
        By group: the coefficient between any two members, or the matrix of all; 1 where not given.

    Returns
    -------
    ndarray, shape (n_inputs, count)
        In the inputs' units.

    Raises
    ------
    BudgetError
        If correlated inputs are neither all normal nor all t with the same degrees of freedom: what
        their joint distribution is, the correlation alone does not say.
    """
    import numpy as np

    places: dict[str, list[int]] = {}
    for place, item in enumerate(inputs):
        places.setdefault(item.group or f"\0{place}", []).append(place)
    drawn = np.empty((len(inputs), count))
    for label, members in places.items():
        group = [inputs[place] for place in members]
        if len(group) == 1:
            standard = _standard(group[0], count, rng)[None, :]
        else:
            standard = _together(label, group, count, rng, (correlations or {}).get(label, 1.0))
        for place, item, row in zip(members, group, standard, strict=True):
            drawn[place] = item.value + item.u * row
    return drawn


def _standard(item: Input, count: int, rng: np.random.Generator) -> Any:  # noqa: ANN401  # shape (count,)
    """Return draws of mean 0 and standard deviation 1 (scale 1 for t)."""
    import numpy as np

    if item.distribution == "rectangular":
        return rng.uniform(-math.sqrt(3.0), math.sqrt(3.0), count)
    if item.distribution == "triangular":
        return rng.triangular(-math.sqrt(6.0), 0.0, math.sqrt(6.0), count)
    if item.distribution == "arcsine":
        return math.sqrt(2.0) * np.sin(rng.uniform(-math.pi, math.pi, count))
    if item.distribution == "t" and math.isfinite(item.dof):
        return rng.standard_t(item.dof, count)
    return rng.standard_normal(count)


def _together(
    label: str,
    group: Sequence[Input],
    count: int,
    rng: np.random.Generator,
    correlation: Correlation,
) -> NDArray[np.float64]:
    """Return correlated draws, shape (n_members, count): multivariate normal or t."""
    import numpy as np

    from metro.budget import correlation_matrix

    kinds = {(i.distribution, i.dof if i.distribution == "t" else math.inf) for i in group}
    if len(kinds) != 1 or kinds.copy().pop()[0] not in ("normal", "t"):
        raise BudgetError(
            f"correlated inputs of {label} must be all normal, or all t with the same dof, got "
            + ", ".join(f"{i.name}: {i.distribution}" for i in group)
        )
    values, vectors = np.linalg.eigh(np.array(correlation_matrix(label, len(group), correlation)))
    mixing = vectors * np.sqrt(np.maximum(values, 0.0))
    standard = mixing @ rng.standard_normal((len(group), count))
    _, dof = kinds.pop()
    if math.isfinite(dof):  # one common χ² makes normal draws a multivariate t
        standard *= np.sqrt(dof / rng.chisquare(dof, count))
    return np.asarray(standard)
