"""Line product: a harmonic of a line, or a sum or difference of two, fitted as a line of its own."""

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import combinations
from typing import TYPE_CHECKING, Any

import numpy as np

from calibration.distrust import TOO_WEAK
from calibration.errors import CalibrationError

if TYPE_CHECKING:
    from calibration.line_fit import Line
    from metro.measured import Measured

__all__ = ["Combination", "LineProduct", "combinations_of"]

_HIGHEST_HARMONIC = 20
_APART = 2.0  # bins of 1/T: nearer, two lines share their amplitude


@dataclass(frozen=True, slots=True)
class Combination:
    """A frequency that lines make together.

    Parameters
    ----------
    orders : tuple of int
        Multiple of each line, signed, in the order of the lines.
    frequency_hz : float
        Where it lies [Hz].
    """

    orders: tuple[int, ...]
    frequency_hz: float


@dataclass(frozen=True, eq=False, slots=True)
class LineProduct:
    """A fitted combination.

    Parameters
    ----------
    orders : tuple of int
        Multiple of each line.
    parents : tuple of Line
        The lines with a multiple other than 0.
    line : Line
        As fitted together with them.
    """

    orders: tuple[int, ...]
    parents: "tuple[Line, ...]"
    line: "Line"

    @property
    def relative(self) -> "Measured":
        """Amplitude over that of the line, the weaker one of two."""
        from metro.measured import Measured

        parent = min(self.parents, key=lambda line: abs(line.phasor))
        size, whole = abs(self.line.phasor), abs(parent.phasor)
        if whole == 0:
            return Measured.of(float("nan"), "1")
        value = size / whole
        u = np.hypot(self.line.response.along_u, value * parent.response.along_u) / whole
        return Measured.of(value, "1", float(u), min(self.line.dof, parent.dof))

    @property
    def is_seen(self) -> bool:
        """Whether it stands out of the noise."""
        return not any(reason.startswith(TOO_WEAK) for reason in self.line.distrust_reasons)

    @property
    def text(self) -> str:
        """Such as ``"2 × 31.7 Hz"`` or ``"87.1 Hz − 31.7 Hz"``."""
        parts: list[str] = []
        told = [order for order in self.orders if order]
        for order, parent in sorted(zip(told, self.parents, strict=True), key=lambda p: -p[0]):
            times = "" if abs(order) == 1 else f"{abs(order)} × "
            sign = ("" if order > 0 else "− ") if not parts else ("+ " if order > 0 else "− ")
            parts.append(f"{sign}{times}{parent.frequency_hz:.9g} Hz")
        return " ".join(parts)

    def to_dict(self) -> dict[str, Any]:
        """Return the product as the JSON output has it."""
        return {
            "of": [line.frequency_hz for line in self.parents],
            "orders": [order for order in self.orders if order],
            "frequency": self.line.frequency,
            "amplitude": self.line.amplitude,
            "phase": None if self.line.is_phase_refused else self.line.phase,
            "relative": self.relative,
            "seen": self.is_seen,
            "reasons": [r for r in self.line.distrust_reasons if not r.startswith(TOO_WEAK)],
        }


def combinations_of(
    frequencies_hz: Sequence[float],
    rate_hz: float,
    span_s: float,
    *,
    harmonics: int = 1,
    intermodulation: bool = False,
) -> list[Combination]:
    """Return the harmonics, sums and differences that can be fitted beside the lines.

    Parameters
    ----------
    frequencies_hz : sequence of float
        The lines [Hz].
    rate_hz, span_s : float
        Sampling rate [Hz] and length of the recording [s].
    harmonics : int
        Up to which multiple of each line; 1 for none.
    intermodulation : bool
        Sums and differences of two lines.

    Returns
    -------
    list of Combination
        Those below half the rate that lie at least two bins of 1/T from the lines and each other.

    Raises
    ------
    CalibrationError
        If ``harmonics`` is not 1 to 20.
    """
    if not 1 <= harmonics <= _HIGHEST_HARMONIC:
        raise CalibrationError(f"harmonics must be 1 to {_HIGHEST_HARMONIC}, got {harmonics}")
    n = len(frequencies_hz)
    wanted = [
        tuple(order if i == k else 0 for i in range(n))
        for order in range(2, harmonics + 1)
        for k in range(n)
    ]
    if intermodulation:
        for low, high in combinations(np.argsort(frequencies_hz).tolist(), 2):
            wanted += [
                tuple(1 if i == high else sign if i == low else 0 for i in range(n))
                for sign in (-1, 1)
            ]
    found: list[Combination] = []
    taken = list(frequencies_hz)
    for orders in wanted:
        f = float(sum(m * own for m, own in zip(orders, frequencies_hz, strict=True)))
        near = min(abs(f - other) for other in (0.0, 0.5 * rate_hz, *taken)) * span_s
        if 0 < f < 0.5 * rate_hz and near >= _APART:
            found.append(Combination(orders, f))
            taken.append(f)
    return found
