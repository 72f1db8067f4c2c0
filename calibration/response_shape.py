"""The shapes a response of an actuator may have, and the formula with their parameters.

H(f) = s·g · (jf/f0)^(−γ) · exp(−2πifτ) · Σ_k a_k/(1 − (f/f_k)² + if/(f_k·Q_k))

with s = ±1, the first share a_1 = 1 and f0 in the middle of the lines. A power of jf is the response
whose loss angle γπ/2 does not depend on frequency, as ferroelectric ceramics show it: the magnitude
falls by that power and the phase lags by that angle, which belong together (Kramers and Kronig).
"""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

__all__ = ["Shape", "log_response", "shape_of"]

FloatArray = NDArray[np.float64]
ComplexArray = NDArray[np.complex128]


@dataclass(frozen=True)
class Shape:
    """Which parameters a response has.

    Parameters
    ----------
    loss : bool
        Whether the loss factor γ is one.
    resonances : int
        How many resonances; the second brings its share.
    damped : bool
        Whether the resonances' Q are parameters; without, they are taken as undamped, which tells
        them well below the resonance from nothing but the delay.
    """

    loss: bool
    resonances: int
    damped: bool

    @property
    def parameters(self) -> list[str]:
        """Names, in the order of the values: linear ones first."""
        names = ["ln gain", "delay", *(["loss"] if self.loss else [])]
        for number in range(1, self.resonances + 1):
            names.append(f"ln frequency {number}")
            names += [f"1/q {number}"] if self.damped else []
            names += [f"share {number}"] if number > 1 else []
        return names

    @property
    def text(self) -> str:
        """In words."""
        count = ("no resonance", "one resonance", "two resonances")[self.resonances]
        damping = "" if not self.resonances else (", damped" if self.damped else ", undamped")
        return f"{count}{damping}{', loss factor' if self.loss else ''}"


def log_response(
    shape: Shape, values: Sequence[float] | FloatArray, reference_hz: float, at_hz: FloatArray
) -> ComplexArray:
    """Return the logarithm of a response without its sign.

    Parameters
    ----------
    shape : Shape
        Which parameters there are.
    values : sequence of float
        Theirs, in the order of ``shape.parameters``; SI units.
    reference_hz : float
        f0 of the loss factor [Hz].
    at_hz : ndarray, shape (n,)
        Frequencies [Hz], > 0.

    Returns
    -------
    ndarray, shape (n,)
        ln|H/(1 m/V)| + i·phase [rad].
    """
    named = dict(zip(shape.parameters, values, strict=True))
    out = named["ln gain"] - 2j * np.pi * at_hz * named["delay"]
    if shape.loss:
        out = out - named["loss"] * (np.log(at_hz / reference_hz) + 0.5j * np.pi)
    total = np.zeros(at_hz.shape, dtype=np.complex128)
    for number in range(1, shape.resonances + 1):
        # the fit may try logarithms that no frequency has
        ratio = at_hz / np.exp(np.clip(named[f"ln frequency {number}"], -30.0, 60.0))
        damping = named.get(f"1/q {number}", 0.0)
        share = named.get(f"share {number}", 1.0)
        total += share / (1.0 - ratio**2 + 1j * damping * ratio)
    return np.asarray(out + np.log(total)) if shape.resonances else np.asarray(out)


def shape_of(parameters: Sequence[str]) -> Shape:
    """Return the shape that has these parameters.

    Parameters
    ----------
    parameters : sequence of str
        As `Shape.parameters` gives them.

    Returns
    -------
    Shape
        With exactly these.

    Raises
    ------
    ValueError
        If there is none.
    """
    shape = Shape(
        loss="loss" in parameters,
        resonances=sum(name.startswith("ln frequency") for name in parameters),
        damped=any(name.startswith("1/q") for name in parameters),
    )
    if shape.parameters != list(parameters):
        raise ValueError(f"a response has no such parameters: {', '.join(parameters)}")
    return shape
