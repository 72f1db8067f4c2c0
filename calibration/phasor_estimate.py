"""A phasor with its covariance: amplitude and phase of a line, a drive or a ratio."""

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

if TYPE_CHECKING:
    from metro.measured import Measured

__all__ = ["PhasorEstimate"]


@dataclass(frozen=True, slots=True)
class PhasorEstimate:
    """An estimated A·e^(iφ).

    Parameters
    ----------
    phasor : complex
        The estimate, in ``unit``.
    covariance : ndarray, shape (2, 2)
        Of real and imaginary part.
    dof : float
        Degrees of freedom of the covariance.
    unit : str
        Coherent SI unit, "1" where none is known.
    """

    phasor: complex
    covariance: NDArray[np.float64]
    dof: float
    unit: str = "1"

    @property
    def amplitude(self) -> "Measured":
        """Amplitude, zero to peak."""
        from metro.measured import Measured

        return Measured.of(abs(self.phasor), self.unit, self.along_u, self.dof)

    @property
    def magnitude(self) -> "Measured":
        """The amplitude, as a ratio names it."""
        return self.amplitude

    @property
    def phase(self) -> "Measured":
        """Phase [rad] at t = 0, in (−π, π]."""
        from metro.measured import Measured

        size = abs(self.phasor)
        u = self.across_u / size if size > 0 else np.pi
        return Measured.of(float(np.angle(self.phasor)), "rad", float(u), self.dof)

    @property
    def along_u(self) -> float:
        """Standard uncertainty in the direction of the phasor, that of its amplitude."""
        return self._u_in(self._direction())

    @property
    def across_u(self) -> float:
        """Standard uncertainty across the phasor, its amplitude times that of its phase."""
        return self._u_in(1j * self._direction())

    def _direction(self) -> complex:
        size = abs(self.phasor)
        return self.phasor / size if size > 0 else 1.0 + 0j

    def _u_in(self, direction: complex) -> float:
        axis = np.array([direction.real, direction.imag])
        return float(np.sqrt(max(0.0, axis @ self.covariance @ axis)))
