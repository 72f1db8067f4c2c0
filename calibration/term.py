"""One entry of a coefficient's budget: what is uncertain and how it moves magnitude and phase."""

from collections.abc import Iterable
from dataclasses import dataclass, replace
from math import inf

from metro.budget import Budget, Contribution

__all__ = [
    "ADC_REFERENCE",
    "DRIVE_SETTING",
    "FRINGE_EXTREMES",
    "LINE_FIT",
    "OPEN_LOOP",
    "OWN_TERMS",
    "PICKUP_ASSUMED",
    "PICKUP_MEASURED",
    "POWER_DRIFT",
    "REALIGNMENT",
    "ROUTES",
    "RULER",
    "Term",
    "budget_of",
]

# Names of terms that others look for in a kept budget.
ADC_REFERENCE = "ADC reference"
FRINGE_EXTREMES = "fringe extremes"
LINE_FIT = "line fit"  # and which record
DRIVE_SETTING = "drive setting"
OPEN_LOOP = "open-loop"  # gain, phase
PICKUP_ASSUMED = "pick-up (not measured, assumed)"
PICKUP_MEASURED = "pick-up (beam blocked)"
REALIGNMENT = "reproducibility after realignment"
ROUTES = "disagreement of the routes"
POWER_DRIFT = "power drift between recordings"
RULER = ("wavelength", "refractive index")
# Terms whose error is each line's own; all others come from causes that the lines share.
OWN_TERMS = (LINE_FIT, DRIVE_SETTING, OPEN_LOOP, PICKUP_ASSUMED, PICKUP_MEASURED)


@dataclass(frozen=True)
class Term:
    """One input of a measurement and its effect on one coefficient.

    Parameters
    ----------
    name : str
        What it is, in the words of the budget table.
    value : float or None
        Its estimate, in ``unit``; None for a term that has none of its own (a fit).
    unit : str
        SI unit of ``value`` and ``u``.
    u : float
        Standard uncertainty, in ``unit``.
    relative : float
        Relative change of the coefficient's magnitude per unit.
    turn : float
        Change of its phase per unit [rad].
    kind : str
        ``"A"`` (from statistics) or ``"B"`` (from other knowledge).
    distribution : str
        ``"normal"`` or ``"rectangular"``.
    dof : float
        Degrees of freedom of ``u``.
    """

    name: str
    value: float | None
    unit: str
    u: float
    relative: float = 0.0
    turn: float = 0.0
    kind: str = "B"
    distribution: str = "normal"
    dof: float = inf

    def contribution(self, sensitivity: float) -> Contribution:
        """Return the term as a row of a budget with one sensitivity."""
        return Contribution(
            name=self.name,
            value=0.0 if self.value is None else self.value,
            unit=self.unit,
            u=self.u,
            sensitivity=sensitivity,
            kind=self.kind,
            distribution=self.distribution,
            dof=self.dof,
        )

    def with_relative(self, relative: float) -> "Term":
        """Return the term with another relative sensitivity."""
        return replace(self, relative=relative)


def budget_of(terms: Iterable[Term], magnitude: float, unit: str) -> tuple[Budget, Budget]:
    """Return the budgets of a coefficient's magnitude and of its phase.

    Parameters
    ----------
    terms : iterable of Term
        Inputs, independent of each other.
    magnitude : float
        The coefficient's magnitude.
    unit : str
        Its SI unit.

    Returns
    -------
    tuple of Budget
        Of the magnitude (in ``unit``) and of the phase [rad].
    """
    terms = list(terms)
    sizes = [term.contribution(term.relative * magnitude) for term in terms if term.relative]
    turns = [term.contribution(term.turn) for term in terms if term.turn]
    size, turn = Budget(sizes, unit=unit), Budget(turns, unit="rad")
    return size, turn
