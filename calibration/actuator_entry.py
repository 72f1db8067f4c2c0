"""One line of a calibration: metres per volt, magnitude and phase, each with its budget."""

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field, replace
from typing import Any

from calibration.term import Term
from metro.budget import Budget
from metro.measured import Measured

__all__ = ["ActuatorEntry", "maybe_dict", "maybe_measured"]


@dataclass(frozen=True)
class ActuatorEntry:
    """The actuator at one line.

    Parameters
    ----------
    frequency : Measured
        Frequency of the line [Hz].
    magnitude, phase : Measured
        Differential displacement per volt at the actuator [m/V] and its phase [rad]; no phase
        where the drive was not recorded.
    pickup : Measured or None
        What adds to the photodiode without motion, volts per volt of the drive's reading.
    budget, phase_budget : Budget
        What stands behind both.
    reasons : list of str
        Why the line must not be trusted, empty if there is no reason.
    """

    frequency: Measured
    magnitude: Measured
    phase: Measured | None
    pickup: Measured | None
    budget: Budget
    phase_budget: Budget
    reasons: list[str] = field(default_factory=list)

    def to_dict(self) -> dict[str, Any]:
        """Return the JSON form."""
        return {
            "frequency": self.frequency.to_dict(with_dof=True),
            "magnitude": self.magnitude.to_dict(with_dof=True),
            "phase": maybe_dict(self.phase),
            "pickup": maybe_dict(self.pickup),
            "budget": self.budget.to_dict(),
            "phase_budget": self.phase_budget.to_dict(),
            "reasons": self.reasons,
        }

    @classmethod
    def from_dict(cls, document: Mapping[str, Any]) -> "ActuatorEntry":
        """Return the entry that `to_dict` wrote."""
        return cls(
            frequency=Measured.from_dict(document["frequency"]),
            magnitude=Measured.from_dict(document["magnitude"]),
            phase=maybe_measured(document["phase"]),
            pickup=maybe_measured(document["pickup"]),
            budget=Budget.from_dict(document["budget"]),
            phase_budget=Budget.from_dict(document["phase_budget"]),
            reasons=list(document["reasons"]),
        )

    def with_terms(self, terms: Iterable[Term]) -> "ActuatorEntry":
        """Return the entry with more inputs in its budgets.

        Parameters
        ----------
        terms : iterable of Term
            Independent of all that are there; a ``relative`` or a ``turn`` of zero leaves that
            budget alone.

        Returns
        -------
        ActuatorEntry
            The same values, their uncertainties combined anew.
        """
        terms, size = list(terms), float(self.magnitude.magnitude)
        sizes = [term.contribution(term.relative * size) for term in terms if term.relative]
        turns = [term.contribution(term.turn) for term in terms if term.turn]
        budget = replace(self.budget, contributions=[*self.budget.contributions, *sizes])
        phase_budget = replace(
            self.phase_budget, contributions=[*self.phase_budget.contributions, *turns]
        )
        phase = self.phase
        return replace(
            self,
            magnitude=budget.measured(size),
            phase=None if phase is None else phase_budget.measured(float(phase.magnitude)),
            budget=budget,
            phase_budget=phase_budget,
        )


def maybe_dict(value: Measured | None) -> dict[str, Any] | None:
    """Return the JSON form of a value with its degrees of freedom, None for None."""
    return None if value is None else value.to_dict(with_dof=True)


def maybe_measured(document: Mapping[str, Any] | None) -> Measured | None:
    """Return the value that `maybe_dict` wrote."""
    return None if document is None else Measured.from_dict(dict(document))
