"""One line of a plan, one product of its lines, and how a file holds them."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

from metro.budget import Budget
from metro.errors import MetroError
from metro.measured import Measured

if TYPE_CHECKING:
    from collections.abc import Mapping

__all__ = ["PlanError", "PlannedLine", "PlannedProduct", "number_of"]

_LINE_UNITS = {
    "frequency": ("frequency_hz", "Hz"),
    "drive": ("drive_v", "V"),
    "terminals": ("terminals_v", "V"),
    "displacement_amplitude": ("displacement_m", "m"),
    "phase_amplitude": ("phase_rad", "rad"),
    "noise_density": ("noise_m", "m/Hz**0.5"),
    "snr": ("snr", "1"),
    "floor": ("floor_u", "1"),
    "expected_u": ("expected_u", "1"),
    "compression": ("compression", "1"),
    "second_harmonic": ("second_harmonic", "1"),
    "third_harmonic": ("third_harmonic", "1"),
}


class PlanError(MetroError):
    """A plan that cannot be made, or a file that is none."""


@dataclass(frozen=True)
class PlannedLine:
    """One line of a plan; see the module for its keys in the file.

    Parameters
    ----------
    frequency_hz : float
        Frequency [Hz].
    drive_v : float
        What to set, as the bench's ``[drive]`` says where and how it is read [V].
    terminals_v : float
        Amplitude at the actuator's terminals, zero to peak [V].
    displacement_m, phase_rad : float
        Amplitude of differential displacement [m] and of optical phase [rad].
    noise_m : float
        Amplitude density beside the line in the photodiode [m/√Hz].
    snr : float
        Amplitude over √(S/T) in one recording.
    floor_u, expected_u : float
        Relative standard uncertainty that nothing lowers, and that of the planned session.
    compression : float
        What the curve of the fringe takes from the line, all lines together.
    second_harmonic, third_harmonic : float
        In the photodiode, over the line.
    budget : Budget
        What stands behind ``expected_u``, relative.
    reasons : list of str
        Why the line must not be trusted.
    """

    frequency_hz: float
    drive_v: float
    terminals_v: float
    displacement_m: float
    phase_rad: float
    noise_m: float
    snr: float
    floor_u: float
    expected_u: float
    compression: float
    second_harmonic: float
    third_harmonic: float
    budget: Budget
    reasons: list[str] = field(default_factory=list)

    def to_dict(self) -> dict[str, Any]:
        """Return the JSON form.

        Returns
        -------
        dict
            As the module says.
        """
        numbers = {
            key: Measured.of(getattr(self, name), unit) for key, (name, unit) in _LINE_UNITS.items()
        }
        return {
            **numbers,
            "budget": self.budget,
            "trustworthy": not self.reasons,
            "reasons": self.reasons,
        }

    @classmethod
    def from_dict(cls, document: Mapping[str, Any]) -> PlannedLine:
        """Return the line that :meth:`to_dict` wrote.

        Parameters
        ----------
        document : mapping
            The JSON form.

        Returns
        -------
        PlannedLine
            The same line.
        """
        numbers = {
            name: number_of(document[key], key, unit) for key, (name, unit) in _LINE_UNITS.items()
        }
        budget = Budget.from_dict(document["budget"])
        return cls(**numbers, budget=budget, reasons=[str(r) for r in document["reasons"]])


@dataclass(frozen=True, slots=True)
class PlannedProduct:
    """One of the largest harmonics or intermodulation products.

    Parameters
    ----------
    frequency_hz : float
        Where it appears [Hz].
    relative : float
        Over the smallest line.
    text : str
        Of which lines it is made.
    """

    frequency_hz: float
    relative: float
    text: str

    def to_dict(self) -> dict[str, Any]:
        """Return the JSON form.

        Returns
        -------
        dict
            As the module says.
        """
        return {
            "frequency": Measured.of(self.frequency_hz, "Hz"),
            "relative": Measured.of(self.relative, "1"),
            "text": self.text,
        }

    @classmethod
    def from_dict(cls, document: Mapping[str, Any]) -> PlannedProduct:
        """Return the product that :meth:`to_dict` wrote.

        Parameters
        ----------
        document : mapping
            The JSON form.

        Returns
        -------
        PlannedProduct
            The same product.
        """
        return cls(
            number_of(document["frequency"], "frequency", "Hz"),
            number_of(document["relative"], "relative", "1"),
            str(document["text"]),
        )


def number_of(document: Mapping[str, Any], key: str, unit: str) -> float:
    """Return the number of a quantity in a plan's file.

    Parameters
    ----------
    document : mapping
        The quantity's JSON form.
    key : str
        Its name, for the message.
    unit : str
        The unit it must be in.

    Returns
    -------
    float
        In that unit.

    Raises
    ------
    PlanError
        If it is in another unit or no single number.
    """
    found = Measured.from_dict(dict(document))
    if found.unit != unit or isinstance(found.magnitude, bool):
        raise PlanError(f"{key} must be in {unit}, got {found.unit}")
    if not isinstance(found.magnitude, (int, float)):
        raise PlanError(f"{key} must be a number, got {found.magnitude!r}")
    return float(found.magnitude)
