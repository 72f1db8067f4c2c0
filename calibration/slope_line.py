"""One line on one slope of the fringe, and both slopes put together.

On the rising slope a line reads A + p/(swing·|sin φ|), on the falling one A − p/(swing·|sin φ|):
A is motion (radians of optical phase per volt of the drive's reading), p what adds to the
photodiode without motion (volts per volt). The two together give both.
"""

from collections.abc import Iterable, Sequence
from dataclasses import dataclass, replace
from math import sqrt

import numpy as np
from numpy.typing import NDArray

from calibration.errors import CalibrationError
from calibration.line_fit import Line
from calibration.pickup import Additive
from calibration.working_point import SLOPE_SIGN, SlopeMeans

__all__ = ["CombinedLine", "SlopeLine", "combine", "is_driven", "is_noise_known"]

DRIVEN_MIN = 10.0  # amplitude over u below which the drive does not hold the line at all

FloatArray = NDArray[np.float64]


@dataclass(frozen=True)
class SlopeLine:
    """A line fitted in the phase record of one slope, per volt of the drive's reading.

    Parameters
    ----------
    slope : str
        ``"rising"`` or ``"falling"``.
    ratio : complex
        Optical phase per volt [rad/V]; its magnitude where the drive was not recorded.
    covariance : ndarray, shape (2, 2)
        Of its real and imaginary part.
    dof : float
        Degrees of freedom of the covariance.
    means : SlopeMeans
        Averages over the record.
    """

    slope: str
    ratio: complex
    covariance: FloatArray
    dof: float
    means: SlopeMeans

    @classmethod
    def of(cls, slope: str, line: Line, means: SlopeMeans, setting_v: float | None) -> "SlopeLine":
        """Return a fitted line over its drive as recorded, else over the generator's setting."""
        if line.ratio is not None:
            covariance, dof = _noise_of(line)
            return cls(slope, line.ratio.phasor, covariance, dof, means)
        if not setting_v:
            raise CalibrationError(
                f"the line at {line.frequency_hz:g} Hz has no drive: the recording has no drive "
                "channel and its [[line]] in the bench names no drive"
            )
        turn = abs(line.phasor) / line.phasor if line.phasor else 1.0
        turned = np.array([[turn.real, -turn.imag], [turn.imag, turn.real]])
        covariance = turned @ line.phasor_covariance @ turned.T / setting_v**2
        return cls(slope, complex(abs(line.phasor) / setting_v), covariance, line.dof, means)


@dataclass(frozen=True)
class CombinedLine:
    """Motion per volt of the drive's reading, free of what adds to the photodiode.

    Parameters
    ----------
    ratio : complex
        Optical phase per volt read [rad/V].
    parts : tuple of (ndarray of shape (2, 2), float)
        Covariance of (real, imaginary) part and degrees of freedom of each independent record.
    weights : tuple of float
        Share of each record; their sum is one.
    means : SlopeMeans
        Averages over the records with the same shares.
    records : tuple of SlopeMeans
        The averages of each record.
    tilt_weight : float
        Change of ``ratio`` for a relative change of the fringe's swing in step with the drive: the
        mean of cos φ/|sin φ|, signed by the slope.
    additive : Additive or None
        What adds to the photodiode: found from the two slopes, or as given for one.
    additive_weight : float
        Change of ``ratio`` per unit of the additive's error [rad], signed; zero with both slopes.
    cosines : tuple of float
        Working points cos φ, each of an equal part of the samples; empty where their mean stands for
        all.
    """

    ratio: complex
    parts: tuple[tuple[FloatArray, float], ...]
    weights: tuple[float, ...]
    means: SlopeMeans
    records: tuple[SlopeMeans, ...]
    tilt_weight: float
    additive: Additive | None
    additive_weight: float
    cosines: tuple[float, ...] = ()

    @property
    def both_slopes(self) -> bool:
        """Whether rising and falling slope were both measured."""
        return self.additive_weight == 0.0

    def one_sided(self, swing_v: float) -> float:
        """Return how much of an additive remains: 1 on one slope, less where both were passed.

        Parameters
        ----------
        swing_v : float
            Half of high − low.

        Returns
        -------
        float
            |⟨1/sin φ⟩| over ⟨1/|sin φ|⟩.
        """
        return min(1.0, abs(self.additive_weight) * swing_v / self.means.inverse_sin)


def combine(
    rising: Sequence[SlopeLine],
    falling: Sequence[SlopeLine],
    swing_v: float,
    additive: Additive | None,
) -> CombinedLine:
    """Return the motion of a line from its records on the slopes.

    Parameters
    ----------
    rising, falling : sequence of SlopeLine
        The same line; one of the two may be empty.
    swing_v : float
        Half of high − low, in the recording's unit.
    additive : Additive, optional
        What adds to the photodiode, from other recordings; used where one slope is missing.

    Returns
    -------
    CombinedLine
        Motion, its parts and what remains of the additive.
    """
    if rising and falling:
        return _both(rising, falling, swing_v)
    return _single(rising or falling, swing_v, additive)


def is_driven(line: Line) -> bool:
    """Return whether the line is driven: seen in the recorded drive, without one in the response."""
    seen = line.response if line.drive is None else line.drive
    u = sqrt(float(np.trace(seen.covariance)) / 2)
    return bool(abs(seen.phasor) > DRIVEN_MIN * u)


def is_noise_known(line: Line) -> bool:
    """Return whether the noise beside a line's ratio to the drive could be told."""
    ratio = line.ratio
    return ratio is None or bool(ratio.dof >= 1.0 and np.isfinite(ratio.covariance).all())


def _noise_of(line: Line) -> tuple[FloatArray, float]:
    """Return covariance and degrees of freedom of a ratio; without any, those of the response."""
    assert line.ratio is not None  # noqa: S101  # asked before
    if is_noise_known(line) or line.drive is None:
        return line.ratio.covariance, line.ratio.dof
    return line.response.covariance / abs(line.drive.phasor) ** 2, max(1.0, line.dof)


def _both(
    rising: Sequence[SlopeLine], falling: Sequence[SlopeLine], swing_v: float
) -> CombinedLine:
    steep_r, steep_f = _steepness(rising), _steepness(falling)
    share_r, share_f = steep_f / (steep_r + steep_f), steep_r / (steep_r + steep_f)
    records = [*rising, *falling]
    inner = [*_shares(rising), *_shares(falling)]  # of each record within its slope
    outer = [share_r] * len(rising) + [share_f] * len(falling)
    weights = [a * b for a, b in zip(inner, outer, strict=True)]
    scale = swing_v / (steep_r + steep_f)
    shares = [
        scale * share * (1.0 if part.slope == "rising" else -1.0)
        for share, part in zip(inner, records, strict=True)
    ]
    additive = Additive(
        ratio=complex(sum(k * p.ratio for k, p in zip(shares, records, strict=True))),
        covariance=_sum(p.covariance * k**2 for k, p in zip(shares, records, strict=True)),
        dof=min(p.dof for p in records),
    )
    return _combined(records, weights, additive, 0.0)


def _single(
    records: Sequence[SlopeLine], swing_v: float, additive: Additive | None
) -> CombinedLine:
    weights = _shares(records)
    weight = SLOPE_SIGN[records[0].slope] * _steepness(records) / swing_v
    combined = _combined(records, weights, additive, weight)
    if additive is None:
        return combined
    # rising (sign −1 of φ) reads A + p·steep/swing: what is known of p is taken off
    ratio = combined.ratio + weight * additive.ratio
    return replace(combined, ratio=ratio, additive=additive)


def _combined(
    records: Sequence[SlopeLine],
    weights: Sequence[float],
    additive: Additive | None,
    additive_weight: float,
) -> CombinedLine:
    pairs = list(zip(weights, records, strict=True))
    return CombinedLine(
        ratio=complex(sum(w * part.ratio for w, part in pairs)),
        parts=tuple((w**2 * part.covariance, part.dof) for w, part in pairs),
        weights=tuple(weights),
        means=_mean_of([part.means for _, part in pairs], weights),
        records=tuple(part.means for _, part in pairs),
        tilt_weight=-sum(w * SLOPE_SIGN[part.slope] * part.means.cot for w, part in pairs),
        additive=additive,
        additive_weight=additive_weight,
    )


def _shares(records: Sequence[SlopeLine]) -> list[float]:
    """Return inverse-variance weights of records on one slope; their sum is one."""
    inverse = np.array([1.0 / max(np.trace(p.covariance), 1e-300) for p in records])
    return [float(share) for share in inverse / inverse.sum()]


def _steepness(records: Sequence[SlopeLine]) -> float:
    """Return ⟨1/|sin φ|⟩ of the records on one slope, weighted as they are."""
    return sum(
        w * part.means.inverse_sin for w, part in zip(_shares(records), records, strict=True)
    )


def _sum(arrays: Iterable[FloatArray]) -> FloatArray:
    return np.asarray(np.sum(list(arrays), axis=0))


def _mean_of(means: Sequence[SlopeMeans], weights: Sequence[float]) -> SlopeMeans:
    """Return the weighted mean of the averages of several records."""
    names = ("cos", "cot", "inverse_sin", "inverse_sin2", "cos_over_sin2")
    return SlopeMeans(
        **{
            name: float(sum(w * getattr(m, name) for w, m in zip(weights, means, strict=True)))
            for name in names
        }
    )
