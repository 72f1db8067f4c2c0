"""The actuator against frequency: gain, resonances, delay and loss, known between the lines."""

from collections.abc import Mapping
from dataclasses import dataclass
from math import exp, inf, sqrt
from typing import Any

import numpy as np
from numpy.typing import NDArray

from calibration.errors import CalibrationError
from calibration.response_shape import Shape, log_response, shape_of
from metro.measured import Measured

__all__ = ["ActuatorResponse", "ResponseRangeError"]

FloatArray = NDArray[np.float64]
ComplexArray = NDArray[np.complex128]


class ResponseRangeError(CalibrationError):
    """A frequency outside the lines between which a response is known."""


@dataclass(frozen=True, eq=False)
class ActuatorResponse:
    """The response of an actuator between the lowest and the highest line.

    Parameters
    ----------
    shape : Shape
        Order of the model, chosen by the data.
    sign : float
        ±1.
    reference_hz : float
        f0 of the loss factor [Hz].
    values : ndarray, shape (p,)
        Parameters, in the order of ``shape.parameters``.
    covariance : ndarray, shape (p, p)
        Theirs, common terms of the lines included; widened where chi-square asks for it.
    chi_square : float
        Of the residuals with the stated covariance.
    dof : int
        Its degrees of freedom.
    from_hz, to_hz : float
        Lowest and highest line [Hz].
    rivals : tuple of (Shape, ndarray, float)
        Other orders with their parameters and their weight against this one.
    """

    shape: Shape
    sign: float
    reference_hz: float
    values: FloatArray
    covariance: FloatArray
    chi_square: float
    dof: int
    from_hz: float
    to_hz: float
    rivals: tuple[tuple[Shape, FloatArray, float], ...] = ()

    def at(self, frequency_hz: float | FloatArray) -> ComplexArray:
        """Return the response [m/V].

        Parameters
        ----------
        frequency_hz : float or ndarray, shape (n,)
            Between the lines [Hz].

        Returns
        -------
        ndarray, shape (n,)
            Complex metres per volt.

        Raises
        ------
        ResponseRangeError
            If a frequency lies outside the lines.
        """
        return self.extrapolated(self._checked(frequency_hz))

    def extrapolated(self, frequency_hz: FloatArray) -> ComplexArray:
        """Return the model's response anywhere [m/V], shape (n,): without any promise beyond the lines."""
        at_hz = np.asarray(frequency_hz, dtype=np.float64)
        return np.asarray(self.sign * np.exp(self._log(self.shape, self.values, at_hz)))

    def u_at(self, frequency_hz: float | FloatArray) -> tuple[FloatArray, FloatArray]:
        """Return the standard uncertainty of the response: relative, and of its phase [rad].

        Parameters
        ----------
        frequency_hz : float or ndarray, shape (n,)
            Between the lines [Hz].

        Returns
        -------
        tuple of ndarray, shape (n,)
            From the parameters' covariance, and from the choice among orders that describe the
            lines nearly as well.

        Raises
        ------
        ResponseRangeError
            If a frequency lies outside the lines.

        References
        ----------
        Burnham and Anderson, Model Selection and Multimodel Inference, 2nd ed. (2002), section 4.3
        (unconditional variance over models); from memory.
        """
        at_hz = self._checked(frequency_hz)
        here = self._log(self.shape, self.values, at_hz)
        slopes = self._slopes(at_hz)
        own = [np.einsum("pn,pq,qn->n", s, self.covariance, s) for s in (slopes.real, slopes.imag)]
        for shape, values, weight in self.rivals:
            away = self._log(shape, values, at_hz) - here
            own[0] = own[0] + weight * away.real**2
            own[1] = own[1] + weight * away.imag**2
        return np.sqrt(own[0]), np.sqrt(own[1])

    def measured_at(self, frequency_hz: float) -> tuple[Measured, Measured]:
        """Return magnitude [m/V] and phase [rad] at one frequency between the lines."""
        value = complex(self.at(frequency_hz)[0])
        relative, turn = (float(u[0]) for u in self.u_at(frequency_hz))
        size = abs(value)
        return (
            Measured.of(size, "m/V", relative * size),
            Measured.of(float(np.angle(value)), "rad", turn),
        )

    def _log(self, shape: Shape, values: FloatArray, at_hz: FloatArray) -> ComplexArray:
        return log_response(shape, values, self.reference_hz, at_hz)

    def _slopes(self, at_hz: FloatArray) -> ComplexArray:
        """Return the derivatives of the logarithm by the parameters, shape (p, n)."""
        here = self._log(self.shape, self.values, at_hz)
        rows = []
        for place, u in enumerate(np.sqrt(np.diag(self.covariance))):
            step = 1e-3 * u or 1e-12
            moved = self.values.copy()
            moved[place] += step
            rows.append((self._log(self.shape, moved, at_hz) - here) / step)
        return np.array(rows)

    def _checked(self, frequency_hz: float | FloatArray) -> FloatArray:
        at_hz = np.atleast_1d(np.asarray(frequency_hz, dtype=np.float64))
        outside = (at_hz < self.from_hz * (1 - 1e-9)) | (at_hz > self.to_hz * (1 + 1e-9))
        if outside.any():
            raise ResponseRangeError(
                f"the actuator's response is known from {self.from_hz:g} Hz to {self.to_hz:g} Hz, "
                f"between the lines, got {float(at_hz[outside][0]):g} Hz"
            )
        return at_hz

    def _measured(self, name: str, unit: str) -> Measured | None:
        if name not in self.shape.parameters:
            return None
        place = self.shape.parameters.index(name)
        u = sqrt(float(self.covariance[place, place]))
        return Measured.of(float(self.values[place]), unit, u)

    @property
    def gain(self) -> Measured:
        """The gain g [m/V], signed: the response far below the resonances, at f0 where there is a loss."""
        logarithm = self._measured("ln gain", "1")
        assert logarithm is not None  # noqa: S101  # every shape has it
        size = exp(logarithm.magnitude)
        return Measured.of(self.sign * size, "m/V", size * logarithm.u_magnitude)

    @property
    def delay(self) -> Measured:
        """The delay τ [s]: how late the displacement follows the drive, resonances apart."""
        found = self._measured("delay", "s")
        assert found is not None  # noqa: S101  # every shape has it
        return found

    @property
    def loss(self) -> Measured | None:
        """The loss factor γ; None where the data ask for none."""
        return self._measured("loss", "1")

    def resonances(self) -> list[dict[str, Measured | None]]:
        """Return frequency [Hz], Q (None where undamped) and share (None for the first) of each."""
        found = []
        for number in range(1, self.shape.resonances + 1):
            logarithm = self._measured(f"ln frequency {number}", "1")
            assert logarithm is not None  # noqa: S101  # every resonance has it
            at_hz = exp(logarithm.magnitude)
            frequency = Measured.of(at_hz, "Hz", at_hz * logarithm.u_magnitude)
            damping = self._measured(f"1/q {number}", "1")
            found.append(
                {
                    "frequency": frequency,
                    "q": None if damping is None else _inverse(damping),
                    "share": self._measured(f"share {number}", "1"),
                }
            )
        return found

    def to_dict(self) -> dict[str, Any]:
        """Return the JSON form."""
        return {
            "model": self.shape.text,
            "gain": self.gain,
            "delay": self.delay,
            "loss": self.loss,
            "reference_frequency": Measured.of(self.reference_hz, "Hz"),
            "resonances": self.resonances(),
            "parameters": self.shape.parameters,
            "values": self.values,
            "covariance": self.covariance,
            "chi_square": self.chi_square,
            "dof": self.dof,
            "from": Measured.of(self.from_hz, "Hz"),
            "to": Measured.of(self.to_hz, "Hz"),
            "rivals": [
                {"parameters": shape.parameters, "values": values, "weight": weight}
                for shape, values, weight in self.rivals
            ],
        }

    @classmethod
    def from_dict(cls, document: Mapping[str, Any]) -> "ActuatorResponse":
        """Return the response that `to_dict` wrote."""
        shape = shape_of(document["parameters"])
        count = len(shape.parameters)
        return cls(
            shape=shape,
            sign=1.0 if float(document["gain"]["value"]) > 0 else -1.0,
            reference_hz=float(document["reference_frequency"]["value"]),
            values=np.array(document["values"], dtype=np.float64).reshape(count),
            covariance=np.array(document["covariance"], dtype=np.float64).reshape(count, count),
            chi_square=float(document["chi_square"]),
            dof=int(document["dof"]),
            from_hz=float(document["from"]["value"]),
            to_hz=float(document["to"]["value"]),
            rivals=tuple(
                (shape_of(r["parameters"]), np.array(r["values"], float), float(r["weight"]))
                for r in document.get("rivals", ())
            ),
        )


def _inverse(damping: Measured) -> Measured:
    value, u = float(damping.magnitude), float(damping.u_magnitude)
    return Measured.of(1.0 / value, "1", u / value**2) if value else Measured.of(inf, "1", inf)
