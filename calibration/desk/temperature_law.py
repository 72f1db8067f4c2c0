"""How line results follow temperature: not at all, by a coefficient that is known, or by one fitted."""

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from calibration.desk.ledger_errors import LedgerError
from metro.measured import Measured

if TYPE_CHECKING:
    from collections.abc import Sequence

    from calibration.desk.line_entry import LineEntry

__all__ = ["TemperatureLaw", "fitted_coefficient", "parse_law"]

FloatArray = NDArray[np.float64]

_FEWEST = 8
_LEAST_SPAN_K = 0.05  # a coefficient from less than this says more of the thermometer


@dataclass(frozen=True, slots=True)
class TemperatureLaw:
    """A result is its value at the reference temperature times 1 + coefficient·(T − reference).

    Parameters
    ----------
    coefficient : float
        Relative change a kelvin [1/K].
    u : float
        Its standard uncertainty [1/K].
    is_fitted : bool
        The coefficient comes from the results themselves, together with their mean.
    is_used : bool
        Whether temperature enters at all.
    """

    coefficient: float = 0.0
    u: float = 0.0
    is_fitted: bool = False
    is_used: bool = False

    @property
    def measured(self) -> Measured:
        """The coefficient [1/K]."""
        return Measured.of(self.coefficient, "1/K", self.u)

    def corrected(self, value: float, temperature_k: float | None, reference_k: float) -> float:
        """Return a value as it would be at the reference temperature.

        Parameters
        ----------
        value : float
            As measured.
        temperature_k : float or None
            Meanwhile [K].
        reference_k : float
            Where to [K].

        Returns
        -------
        float
            The value itself where temperature does not enter.
        """
        if not self.is_used or temperature_k is None:
            return value
        return value / (1.0 + self.coefficient * (temperature_k - reference_k))

    def holds(self, entry: "LineEntry") -> bool:
        """Return whether the entry says what the law needs."""
        return not self.is_used or entry.temperature_k is not None


def parse_law(coefficient: str | None, u: str | None) -> TemperatureLaw:
    """Return the law that two options name.

    Parameters
    ----------
    coefficient : str or None
        ``"fit"``, or a relative change a kelvin such as ``"-120 ppm/K"``.
    u : str or None
        Its standard uncertainty.

    Returns
    -------
    TemperatureLaw
        Not used where no coefficient is named.

    Raises
    ------
    LedgerError
        If a u is given without a coefficient.
    MetroError
        If a value is none.
    """
    from metro.units import si

    if u is not None and coefficient in (None, "fit"):
        raise LedgerError("--coefficient-u goes with --temperature-coefficient VALUE")
    if coefficient is None:
        return TemperatureLaw()
    if coefficient.strip() == "fit":
        return TemperatureLaw(is_fitted=True, is_used=True)
    return TemperatureLaw(
        si(coefficient, "--temperature-coefficient", "1/K", difference=True),
        0.0 if u is None else si(u, "--coefficient-u", "1/K", minimum=0.0, difference=True),
        is_used=True,
    )


def fitted_coefficient(entries: "Sequence[LineEntry]") -> TemperatureLaw:
    """Return the coefficient that results show, beside a steady drift.

    Parameters
    ----------
    entries : sequence of LineEntry
        Of one line, trustworthy, each with its temperature.

    Returns
    -------
    TemperatureLaw
        With the u of the fit, widened where the residuals hang together.

    Raises
    ------
    LedgerError
        If there are fewer than eight, or the temperature hardly changed.
    """
    from calibration.desk.drift import widening

    if len(entries) < _FEWEST:
        raise LedgerError(
            f"a temperature coefficient needs at least {_FEWEST} results with a temperature, "
            f"got {len(entries)}"
        )
    kelvin = np.array([entry.temperature_k for entry in entries], dtype=np.float64)
    if np.ptp(kelvin) < _LEAST_SPAN_K:
        raise LedgerError(
            f"a temperature coefficient needs temperatures at least {_LEAST_SPAN_K:g} K apart, "
            f"got {np.ptp(kelvin):.2g} K"
        )
    value = np.array([float(entry.value.magnitude) for entry in entries])
    moment = np.array([entry.unix_s for entry in entries])
    design = np.column_stack([np.ones_like(kelvin), kelvin - kelvin.mean(), _unit(moment)])
    estimate, *_ = np.linalg.lstsq(design, value / value.mean(), rcond=None)
    left = value / value.mean() - design @ estimate
    wider, _ = widening(left, 3)
    covariance = np.linalg.pinv(design.T @ design) * float(left @ left) / max(1, len(left) - 3)
    slope = float(estimate[1] / estimate[0])
    u = float(np.sqrt(covariance[1, 1])) * wider / float(estimate[0])
    return TemperatureLaw(slope, abs(u), is_fitted=True, is_used=True)


def _unit(moment: FloatArray) -> FloatArray:
    """Return times moved and scaled into −1..1."""
    middle: FloatArray = moment - moment.mean()
    middle /= max(1.0, float(np.abs(middle).max()))
    return middle
