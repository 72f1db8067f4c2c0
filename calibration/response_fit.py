"""The response of an actuator fitted to its lines, with the order that the data ask for.

Gain, delay and loss factor enter the logarithm of the response linearly: for any resonances they
follow from generalised least squares, so that the search runs over the resonances alone.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from math import exp, log, pi

import numpy as np
from numpy.typing import NDArray

from calibration.response import ActuatorResponse
from calibration.response_shape import Shape, log_response
from metro.extras import require

__all__ = ["LINES_MIN", "fit_response", "response_cautions"]

FloatArray = NDArray[np.float64]
ComplexArray = NDArray[np.complex128]

LINES_MIN = 3  # fewer leave nothing to check the simplest model by
SHAPES = (
    Shape(loss=False, resonances=0, damped=False),
    Shape(loss=True, resonances=0, damped=False),
    Shape(loss=False, resonances=1, damped=False),
    Shape(loss=True, resonances=1, damped=False),
    Shape(loss=False, resonances=1, damped=True),
    Shape(loss=True, resonances=1, damped=True),
)
RICH_SHAPES = (  # tried where none of the others describes the lines
    Shape(loss=False, resonances=2, damped=True),
    Shape(loss=True, resonances=2, damped=True),
)
DESCRIBED = 0.05  # probability of a chi-square from which a shape describes the lines
LEAST_LEFT = 2  # degrees of freedom that a shape must leave
STARTS = 3  # of the best points of the search are followed to their minimum
UNLIKELY = 0.01  # probability of a chi-square below which the model is doubted


@dataclass(frozen=True)
class _Lines:
    """Lines as one vector of logarithms: magnitudes, then phases; and what whitens it."""

    at_hz: FloatArray
    response: ComplexArray
    whitener: FloatArray
    reference_hz: float

    def left(self, found: "_Found") -> int:
        """Return the degrees of freedom that a fitted shape leaves."""
        return 2 * self.at_hz.size - found.values.size


@dataclass(frozen=True)
class _Found:
    """One shape fitted."""

    shape: Shape
    sign: float
    values: FloatArray
    covariance: FloatArray
    chi_square: float
    data: int

    @property
    def criterion(self) -> float:
        """Akaike's, corrected for few data: parameters that little speaks for are left out."""
        p = self.values.size
        return self.chi_square + 2.0 * p + 2.0 * p * (p + 1) / max(1, self.data - p - 1)


def fit_response(
    at_hz: FloatArray, response: ComplexArray, covariance: FloatArray
) -> ActuatorResponse | None:
    """Return the response that describes lines, or None where they are too few.

    Parameters
    ----------
    at_hz : ndarray, shape (n,)
        Frequencies of the lines [Hz].
    response : ndarray, shape (n,)
        Complex metres per volt.
    covariance : ndarray, shape (2n, 2n)
        Of the relative magnitudes, then of the phases [rad]; common terms included.

    Returns
    -------
    ActuatorResponse or None
        With the order of least corrected Akaike criterion; None for fewer than three lines.

    References
    ----------
    Akaike, IEEE Trans. Autom. Control 19, 716 (1974); Hurvich and Tsai, Biometrika 76, 297 (1989)
    (correction for few data); from memory.
    """
    order = np.argsort(at_hz)
    lines = _lines(at_hz[order], response[order], covariance, order)
    if lines.at_hz.size < LINES_MIN:
        return None
    found = _fits_of(lines, SHAPES)
    best = min(found, key=lambda one: one.criterion)
    if _p_value(best.chi_square, lines.left(best)) < DESCRIBED:
        found += _fits_of(lines, RICH_SHAPES)
        best = min(found, key=lambda one: one.criterion)
    dof = lines.left(best)
    # a model that the lines contradict is no better than its residuals say (Birge's ratio)
    widened = max(1.0, best.chi_square / dof) if _p_value(best.chi_square, dof) < UNLIKELY else 1.0
    return ActuatorResponse(
        shape=best.shape,
        sign=best.sign,
        reference_hz=lines.reference_hz,
        values=best.values,
        covariance=widened * best.covariance,
        chi_square=best.chi_square,
        dof=dof,
        from_hz=float(lines.at_hz[0]),
        to_hz=float(lines.at_hz[-1]),
        rivals=_rivals(best, found),
    )


def response_cautions(response: ActuatorResponse | None, lines: int) -> list[str]:
    """Return what to know about a fitted response, or why there is none."""
    if response is None:
        return [
            (
                f"the actuator's response between the lines was not fitted: it needs at least "
                f"{LINES_MIN} trusted lines with phases, got {lines}"
            )
        ]
    p = _p_value(response.chi_square, response.dof)
    if p >= UNLIKELY:
        return []
    return [
        (
            f"the actuator's response ({response.shape.text}) does not describe the lines: chi-square "
            f"{response.chi_square:.3g} for {response.dof} degrees of freedom, probability {p:.1g}; "
            "its u was widened"
        )
    ]


def _p_value(chi_square: float, dof: int) -> float:
    """Return the chance of so large a chi-square: the regularised upper incomplete gamma function."""
    special = require("scipy.special", "bench", "a response between lines")
    return float(special.gammaincc(dof / 2, chi_square / 2))


def _lines(
    at_hz: FloatArray, response: ComplexArray, covariance: FloatArray, order: NDArray[np.intp]
) -> _Lines:
    count = at_hz.size
    both = np.concatenate([order, order + count])
    matrix = covariance[np.ix_(both, both)]
    # a line's phase may rest on nothing uncertain at all: 1e-9 rad keeps the matrix regular
    matrix = matrix + 1e-18 * np.eye(2 * count)
    whitener = np.linalg.inv(np.linalg.cholesky(matrix))
    return _Lines(at_hz, response, whitener, float(np.exp(np.mean(np.log(at_hz)))))


def _fits_of(lines: _Lines, shapes: Sequence[Shape]) -> list[_Found]:
    """Return every shape fitted for which there are lines enough."""
    count = lines.at_hz.size
    asked = [
        shape
        for shape in shapes
        if 2 * count - len(shape.parameters) >= LEAST_LEFT and shape.resonances < count
    ]
    return [_fit(lines, shape) for shape in asked]


def _linear(
    lines: _Lines, shape: Shape, curved: FloatArray
) -> tuple[float, FloatArray, FloatArray]:
    """Return sign, linear parameters and whitened residuals for given resonances."""
    count = lines.at_hz.size
    linear = 3 if shape.loss else 2
    bare = np.concatenate([np.zeros(linear), curved])
    rest = np.log(lines.response) - log_response(shape, bare, lines.reference_hz, lines.at_hz)
    turn = np.unwrap(rest.imag)
    halves = round(float(turn[0]) / pi)
    white = lines.whitener @ np.concatenate([rest.real, turn - halves * pi])
    zero, one = np.zeros(count), np.ones(count)
    columns = [np.concatenate([one, zero]), np.concatenate([zero, -2 * pi * lines.at_hz])]
    if shape.loss:
        away = -np.log(lines.at_hz / lines.reference_hz)
        columns.append(np.concatenate([away, -pi / 2 * one]))
    matrix = lines.whitener @ np.stack(columns, axis=1)
    size = np.linalg.norm(matrix, axis=0)  # seconds and logarithms differ by many powers of ten
    solution = np.linalg.lstsq(matrix / size, white, rcond=None)[0]
    sign = -1.0 if halves % 2 else 1.0
    return sign, solution / size, white - matrix @ (solution / size)


def _left_over(lines: _Lines, shape: Shape, curved: FloatArray) -> FloatArray:
    """Return the whitened residuals for given resonances, all else fitted."""
    return _linear(lines, shape, curved)[2]


def _square(lines: _Lines, shape: Shape, curved: FloatArray) -> float:
    left = _left_over(lines, shape, curved)
    return float(left @ left)


def _fit(lines: _Lines, shape: Shape) -> _Found:
    ranked = sorted(_starts(lines, shape), key=lambda curved: _square(lines, shape, curved))
    refined = [_refined(lines, shape, curved) for curved in ranked[:STARTS]]
    curved = min(refined, key=lambda one: _square(lines, shape, one))
    sign, linear, left = _linear(lines, shape, curved)
    values = np.concatenate([linear, curved])
    covariance = _covariance(lines, shape, values)
    return _Found(shape, sign, values, covariance, float(left @ left), left.size)


def _starts(lines: _Lines, shape: Shape) -> list[FloatArray]:
    """Return resonances to begin with, from below the lowest line to far above the highest."""
    if not shape.resonances:
        return [np.array([])]
    lowest, highest = float(lines.at_hz[0]), float(lines.at_hz[-1])
    grid = np.linspace(log(0.5 * lowest), log(40.0 * highest), 24 if shape.resonances > 1 else 60)
    dampings = (0.01, 0.04, 0.15, 0.5) if shape.damped else ()
    if shape.resonances == 1:
        return [np.array([g, *d]) for g in grid for d in ([[x] for x in dampings] or [[]])]
    return [
        np.array([a, q, b, q, share])
        for k, a in enumerate(grid)
        for b in grid[k + 1 :: 2]
        for q in (0.02, 0.1)
        for share in (-0.2, 0.2)
    ]


def _refined(lines: _Lines, shape: Shape, curved: FloatArray) -> FloatArray:
    if not curved.size:
        return curved
    optimize = require("scipy.optimize", "bench", "fitting a response")
    low, high = _bounds(lines, shape)
    found = optimize.least_squares(
        lambda values: _left_over(lines, shape, values),
        np.clip(curved, low, high),
        bounds=(low, high),
        x_scale=np.full(curved.size, 0.1),
        xtol=1e-12,
        ftol=1e-12,
        max_nfev=200,
    )
    return np.asarray(found.x)


def _bounds(lines: _Lines, shape: Shape) -> tuple[FloatArray, FloatArray]:
    """Return the limits of what a resonance may be."""
    low, high = [], []
    for number in range(1, shape.resonances + 1):
        low.append(log(0.3 * float(lines.at_hz[0])))
        high.append(log(300.0 * float(lines.at_hz[-1])))
        if shape.damped:
            low.append(1e-5)
            high.append(2.0)  # overdamped twice
        if number > 1:
            low.append(-5.0)
            high.append(5.0)
    return np.array(low), np.array(high)


def _covariance(lines: _Lines, shape: Shape, values: FloatArray) -> FloatArray:
    """Return (JᵀJ)⁻¹ of the whitened model at its minimum."""
    columns = []
    steps = np.where(np.abs(values) > 1e-9, 1e-6 * np.abs(values), 1e-9)
    for place, step in enumerate(steps):
        sides = []
        for side in (+1.0, -1.0):
            moved = values.copy()
            moved[place] += side * step
            sides.append(log_response(shape, moved, lines.reference_hz, lines.at_hz))
        slope = (sides[0] - sides[1]) / (2 * step)
        columns.append(lines.whitener @ np.concatenate([slope.real, slope.imag]))
    matrix = np.stack(columns, axis=1)
    size = np.maximum(np.linalg.norm(matrix, axis=0), 1e-12)  # a resonance that nothing shows
    inverse = np.linalg.pinv(matrix / size)
    return np.asarray(inverse @ inverse.T / np.outer(size, size))


def _rivals(best: _Found, found: list[_Found]) -> tuple[tuple[Shape, FloatArray, float], ...]:
    """Return the other orders with Akaike weights, those of less than one part in a thousand left out."""
    ratios = {id(one): exp(-(one.criterion - best.criterion) / 2) for one in found}
    total = sum(ratios.values())
    return tuple(
        (one.shape, one.values, ratios[id(one)] / total)
        for one in found
        if one is not best and one.sign == best.sign and ratios[id(one)] / total > 1e-3
    )
