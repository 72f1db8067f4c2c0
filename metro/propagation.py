"""Linear propagation of uncertainty through a model, on the ``uncertainties`` library.

References
----------
JCGM 100:2008 (GUM), 5.1.2, 5.1.3 and 5.2.2.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import partial
from typing import TYPE_CHECKING, Any

from metro.budget import Budget

if TYPE_CHECKING:
    from collections.abc import Callable, Mapping, Sequence

    from metro.measured import Measured
    from metro.model_input import Correlation, Input

__all__ = ["Propagated", "propagate", "sensitivities"]


@dataclass(frozen=True)
class Propagated:
    """A model's result with its budget.

    Parameters
    ----------
    value : float
        The model at the inputs' estimates.
    budget : Budget
        One contribution an input, each with its sensitivity.
    """

    value: float
    budget: Budget

    @property
    def measured(self) -> Measured:
        """The result with combined u and effective degrees of freedom."""
        return self.budget.measured(self.value)


def propagate(
    model: Callable[..., Any],
    inputs: Sequence[Input],
    correlations: Mapping[str, Correlation] | None = None,
    unit: str = "1",
) -> Propagated:
    """Return a model's result with its uncertainty to first order.

    Parameters
    ----------
    model : callable
        Takes the inputs' values in their order, as floats, and returns a float. Made of arithmetic
        and the library's ``umath`` its derivatives are exact; with other functions, numpy's for
        one, they are numerical.
    inputs : sequence of Input
        Those of one group are correlated.
    correlations : mapping of str to float or matrix, optional
        By group, as for :class:`metro.budget.Budget`.
    unit : str
        SI unit of the result.

    Returns
    -------
    Propagated
        Value and budget. Degrees of freedom after Welch and Satterthwaite over independent groups;
        a group counts with the least of its members'.

    Raises
    ------
    BudgetError
        If a correlation cannot be, or the result is not finite.
    """
    value, slopes = sensitivities(model, inputs)
    items = [item.contribution(slope) for item, slope in zip(inputs, slopes, strict=True)]
    return Propagated(value, Budget(items, correlations, unit))


def sensitivities(
    model: Callable[..., Any], inputs: Sequence[Input]
) -> tuple[float, tuple[float, ...]]:
    """Return a model at the inputs' estimates, and its derivative by each.

    Parameters
    ----------
    model : callable
        As for :func:`propagate`.
    inputs : sequence of Input
        Estimates, and u as the scale of a numerical derivative.

    Returns
    -------
    tuple of (float, tuple of float)
        Value, and derivatives in the order of the inputs.
    """
    from uncertainties import ufloat, wrap

    # u does not enter a derivative; 1 keeps the library from warning about an u of 0
    variables = [ufloat(item.value, 1.0) for item in inputs]
    try:
        result = model(*variables)
    except (TypeError, AttributeError):  # a function that takes plain numbers only
        slopes = [partial(_slope, model, n, item.u) for n, item in enumerate(inputs)]
        result = wrap(lambda *values: float(model(*values)), slopes)(*variables)
    if not hasattr(result, "derivatives"):
        return float(result), (0.0,) * len(inputs)
    found = result.derivatives
    return float(result.nominal_value), tuple(float(found.get(v, 0.0)) for v in variables)


def _slope(model: Callable[..., Any], place: int, u: float, *values: float) -> float:
    """Return a derivative by differences of fourth order, in steps of a tenth of u.

    The step keeps within what is known of the input (GUM 5.1.3, note 2, takes a whole u); the
    truncation is 3e-6 of the fifth derivative, in units of u.
    """
    step = 0.1 * u if u > 0 else 1e-4 * (abs(values[place]) or 1.0)

    def shifted(steps: float) -> float:
        moved = list(values)
        moved[place] += steps * step
        return float(model(*moved))

    near, far = shifted(1.0) - shifted(-1.0), shifted(2.0) - shifted(-2.0)
    return (8.0 * near - far) / (12.0 * step)
