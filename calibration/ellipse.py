"""The ellipse of two detectors in quadrature: offsets, gains and quadrature angle.

Two signals that should be R·cos φ and R·sin φ come as an ellipse. Its five parameters are found by
least squares and undone before the phase is read.
"""

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from calibration.errors import CalibrationError

__all__ = ["Ellipse", "conic_of", "ellipse_of_conic", "fit_ellipse"]

FloatArray = NDArray[np.float64]

_FEWEST = 12
_NAMES = ("offset_x", "offset_y", "gain_ratio", "angle_rad", "radius")


@dataclass(frozen=True)
class Ellipse:
    """The ellipse x = R·cos φ + p, y = R·sin(φ − α)/r + q.

    Attributes
    ----------
    offset_x, offset_y : float
        p and q, in the signals' unit.
    gain_ratio : float
        r, gain of the first signal over that of the second.
    angle_rad : float
        α, departure from quadrature [rad].
    radius : float
        R, in the signals' unit.
    covariance : ndarray, shape (5, 5)
        Of (p, q, r, α, R).
    """

    offset_x: float
    offset_y: float
    gain_ratio: float
    angle_rad: float
    radius: float
    covariance: FloatArray

    @property
    def parameters(self) -> FloatArray:
        """Parameters p, q, r, α and R in this order.

        Returns
        -------
        ndarray, shape (5,)
            Units as the attributes.
        """
        return np.array([getattr(self, name) for name in _NAMES])

    def corrected(self, x: FloatArray, y: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Return the two signals as they should be, R·cos φ and R·sin φ.

        Parameters
        ----------
        x, y : ndarray, shape (n,)
            As recorded.

        Returns
        -------
        tuple of ndarray, shape (n,)
            Corrected signals, same unit.
        """
        return _corrected(self.parameters, x, y)

    def periodic_error_rad(self) -> float:
        """Return the peak phase error that no correction would leave [rad].

        Returns
        -------
        float
            Half of the range of atan2(y, x) − φ.
        """
        phase = np.linspace(0.0, 2.0 * math.pi, 14401)[:-1]
        x = self.radius * np.cos(phase) + self.offset_x
        y = self.radius * np.sin(phase - self.angle_rad) / self.gain_ratio + self.offset_y
        error = np.angle(np.exp(1j * (np.arctan2(y, x) - phase)))
        return 0.5 * float(np.ptp(error))


def _corrected(theta: FloatArray, x: FloatArray, y: FloatArray) -> tuple[FloatArray, FloatArray]:
    p, q, r, alpha = (float(part) for part in theta[:4])
    one = x - p
    return one, (one * math.sin(alpha) + r * (y - q)) / math.cos(alpha)


def conic_of(x: FloatArray, y: FloatArray) -> FloatArray:
    """Return the conic A·x² + B·y² + C·x·y + D·x + E·y = 1 nearest to some points.

    Parameters
    ----------
    x, y : ndarray, shape (n,)
        Points, any unit.

    Returns
    -------
    ndarray, shape (5,)
        A, B, C, D, E by linear least squares.

    References
    ----------
    P. L. M. Heydemann, Appl. Opt. 20 (1981) 3382 (formulas from memory).
    """
    columns = np.stack([x * x, y * y, x * y, x, y], axis=1)
    return np.asarray(np.linalg.lstsq(columns, np.ones(len(x)), rcond=None)[0])


def ellipse_of_conic(conic: FloatArray) -> FloatArray:
    """Return p, q, r, α and R of a conic.

    Parameters
    ----------
    conic : ndarray, shape (5,)
        A, B, C, D, E.

    Returns
    -------
    ndarray, shape (5,)
        p, q, r, α and R.

    Raises
    ------
    CalibrationError
        If it is no ellipse.

    References
    ----------
    P. L. M. Heydemann, Appl. Opt. 20 (1981) 3382 (formulas from memory).
    """
    a, b, c, d, e = (float(part) for part in conic)
    if not (a > 0.0 and b > 0.0 and 4.0 * a * b > c * c):
        raise CalibrationError(
            "the two signals lie on no ellipse: too short an arc, or not in quadrature"
        )
    alpha = math.asin(c / math.sqrt(4.0 * a * b))
    r = math.sqrt(b / a)
    bottom = c * c - 4.0 * a * b
    p, q = (2.0 * b * d - e * c) / bottom, (2.0 * a * e - d * c) / bottom
    sine = math.sin(alpha)
    square = 1.0 / a + p * p + r * r * q * q + 2.0 * r * p * q * sine
    return np.array([p, q, r, alpha, math.sqrt(square) / math.cos(alpha)])


def _equations(theta: FloatArray, x: FloatArray, y: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Return the points' distances from the ellipse and their derivatives by the parameters.

    The derivatives are taken at the foot points: at the points themselves the noise in them would
    go with that of the distances and bend the result.
    """
    r, alpha, radius = (float(part) for part in theta[2:])
    tangent, secant = math.tan(alpha), 1.0 / math.cos(alpha)
    one, two = _corrected(theta, x, y)
    size = np.maximum(np.hypot(one, two), 1e-300)
    cosine, sine = one / size, two / size
    by_x, by_y = cosine + tangent * sine, r * secant * sine
    steep = np.hypot(by_x, by_y)
    # equal noise of both signals lifts the distance from the middle by that along the circle, u²/2R
    along = (tangent * cosine - sine) ** 2 + (r * secant * cosine) ** 2
    noise = float(np.mean(((size - radius) / steep) ** 2))
    distance = (size - radius - noise * along / (2.0 * radius)) / steep
    foot_x, foot_y = x - distance * by_x / steep, y - distance * by_y / steep
    one, two = _corrected(theta, foot_x, foot_y)
    size = np.maximum(np.hypot(one, two), 1e-300)
    cosine, sine = one / size, two / size
    above = foot_y - theta[1]
    columns = np.stack(
        [
            -(cosine + tangent * sine),
            -r * secant * sine,
            above * secant * sine,
            (one * secant + r * above * tangent) * secant * sine,
            -np.ones_like(sine),
        ],
        axis=1,
    )
    return distance, columns / steep[:, None]


def _memory(rest: FloatArray) -> float:
    """Return by how much neighbouring residuals that go together lift a variance."""
    norm = float(rest @ rest)
    if norm <= 0.0:
        return 1.0
    lift, lag = 1.0, 1
    while lag < len(rest) // 10:
        share = float(rest[lag:] @ rest[:-lag]) / norm
        if share < 3.0 / math.sqrt(len(rest)):
            break
        lift += 2.0 * share
        lag += 1
    return lift


def fit_ellipse(x: FloatArray, y: FloatArray) -> Ellipse:
    """Fit the ellipse of two signals in quadrature.

    Parameters
    ----------
    x, y : ndarray, shape (n,)
        Signals over a good part of a fringe at least, same unit; no NaN.

    Returns
    -------
    Ellipse
        Parameters with covariance.

    Raises
    ------
    CalibrationError
        If there are fewer than 12 samples, or they lie on no ellipse.

    Notes
    -----
    Heydemann's linear fit in centred and scaled signals, then Gauss–Newton on the distances from
    the ellipse, equal noise of both signals assumed, which that noise does not bend.

    References
    ----------
    P. L. M. Heydemann, Appl. Opt. 20 (1981) 3382 (formulas from memory).
    """
    if len(x) < _FEWEST:
        raise CalibrationError(f"an ellipse needs {_FEWEST} samples, got {len(x)}")
    middle = np.array([0.5 * (part.min() + part.max()) for part in (x, y)])
    scale = 0.5 * max(float(np.ptp(x)), float(np.ptp(y)), 1e-300)
    u, v = (x - middle[0]) / scale, (y - middle[1]) / scale
    theta = ellipse_of_conic(conic_of(u, v))
    for _ in range(60):
        rest, columns = _equations(theta, u, v)
        step = np.linalg.lstsq(columns, -rest, rcond=None)[0]
        theta = theta + step
        if not (theta[2] > 0.0 and abs(theta[3]) < 1.5 and theta[4] > 0.0):
            raise CalibrationError("the two signals lie on no ellipse: too short an arc")
        if float(np.abs(step).max()) < 1e-14:
            break
    rest, columns = _equations(theta, u, v)
    variance = float(rest @ rest) / max(len(rest) - 5, 1) * _memory(rest)
    covariance = np.linalg.pinv(columns.T @ columns) * variance
    units = np.array([scale, scale, 1.0, 1.0, scale])
    p, q, r, alpha, radius = theta.tolist()
    return Ellipse(
        p * scale + float(middle[0]),
        q * scale + float(middle[1]),
        r,
        alpha,
        radius * scale,
        np.asarray(covariance * np.outer(units, units), dtype=np.float64),
    )
