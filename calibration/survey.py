"""Survey: a first look at the spectrum of a stretch, before any fit.

It finds how far all lines together stand from where they should be (a clock that is off by percents),
where a free line begins, and which unnamed tones (mains, harmonics) are strong enough to leak into a
line. It costs one Fourier transform of at most 131 072 samples, whatever the length of the recording.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from functools import lru_cache
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

if TYPE_CHECKING:
    from calibration.line_source import SourceChannel

__all__ = [
    "MAINS_ORDERS",
    "SURVEYED",
    "Survey",
    "coarse_offset",
    "look",
    "nearest_peaks",
    "strong_tones",
]

SURVEYED = 1 << 17
_LOBE = 4  # half width of the window's main lobe in bins
_RANGE = 0.02  # boards on an RC oscillator are 1 % off
# log(1 + power/floor), summed over n lines, must be higher elsewhere by 1.5 + 1.8·√n: its standard
# deviation in noise is 0.6·√n, and about 10 000 places are looked at.
_EVIDENCE, _EVIDENCE_EACH = 1.5, 1.8
_CLEAR = 60.0  # power over floor from which a peak's place is known to a tenth of a bin
_TONE = 40.0  # power over floor from which a peak is a tone: e^−40 in noise
_LEAK = 0.1  # a tone counts if it leaks more than this part of a line's u into it
_MOST_TONES = 8
MAINS_ORDERS = 10  # pick-up of higher mains harmonics is rare and weak


@dataclass(frozen=True, slots=True)
class Survey:
    """The spectrum of a stretch, Blackman–Harris window.

    Parameters
    ----------
    power : ndarray, shape (n_bins,)
        |transform|² of the windowed stretch.
    floor : ndarray, shape (n_bins,)
        The noise under it: running median over ln 2.
    length : int
        Samples in the stretch.
    sum_window, power_window : float
        Σ w and Σ w².
    """

    power: NDArray[np.float64]
    floor: NDArray[np.float64]
    length: int
    sum_window: float
    power_window: float

    def excess(self, bins: NDArray[np.float64]) -> NDArray[np.float64]:
        """Return power over floor at the bins nearest to those given."""
        index = np.clip(np.rint(bins).astype(np.int64), 0, len(self.power) - 1)
        return np.asarray(self.power[index] / self.floor[index])

    def peak(self, low: float, high: float) -> tuple[float, float]:
        """Return place [bins] and power over floor of the highest peak between two bins."""
        first = max(1, int(np.floor(low)))
        last = min(len(self.power) - 2, int(np.ceil(high)))
        if last < first:
            return 0.5 * (low + high), 0.0
        ratio = self.power[first : last + 1] / self.floor[first : last + 1]
        top = first + int(ratio.argmax())
        return top + self._shift(top), float(ratio.max())

    def _shift(self, top: int) -> float:
        # A parabola through the logarithms: within a few hundredths of a bin for this window.
        left, middle, right = np.log(np.maximum(self.power[top - 1 : top + 2], 1e-300))
        curve = left - 2 * middle + right
        return float(np.clip(0.5 * (left - right) / curve, -0.5, 0.5)) if curve < 0 else 0.0


def look(channel: "SourceChannel") -> Survey | None:
    """Return the survey of the middle of a recording.

    Parameters
    ----------
    channel : SourceChannel
        Samples, NaN where missing; what is missing is bridged by straight lines.

    Returns
    -------
    Survey or None
        None where less than a fifth of the stretch is there.

    References
    ----------
    Harris, Proc. IEEE 66 (1978) 51, the minimum four-term window: coefficients from memory, checked by
    its side lobes of −92 dB.
    """
    length = min(len(channel), SURVEYED)
    first = (len(channel) - length) // 2
    stretch = np.asarray(channel.stretch(first, first + length), dtype=np.float64)
    good = np.isfinite(stretch)
    if good.sum() < max(16, 0.2 * length):
        return None
    if not good.all():
        n = np.arange(length)
        stretch = np.interp(n, n[good], stretch[good])
    window = _window(length)
    stretch = stretch - float(window @ stretch) / float(window.sum())
    power = np.abs(np.fft.rfft(window * stretch)) ** 2
    return Survey(power, _floor(power), length, float(window.sum()), float((window**2).sum()))


@lru_cache(maxsize=2)
def _window(length: int) -> NDArray[np.float64]:
    turns = 2 * np.pi * (np.arange(length) + 0.5) / length
    terms = zip(range(4), (0.35875, -0.48829, 0.14128, -0.01168), strict=True)
    return np.asarray(sum(weight * np.cos(k * turns) for k, weight in terms))


def _floor(power: NDArray[np.float64]) -> NDArray[np.float64]:
    width = min(len(power), int(np.clip(len(power) // 24, 12, 128)))
    pieces = max(1, len(power) // width)
    levels = np.median(power[: pieces * width].reshape(pieces, width), axis=1) / np.log(2.0)
    centres = (np.arange(pieces) + 0.5) * width
    # Rounding of the samples sets a floor where there is no noise at all.
    lowest = max(float(power.max()) * 1e-30, np.finfo(float).tiny)
    logs = np.log(np.maximum(levels, lowest))
    return np.asarray(np.exp(np.interp(np.arange(len(power)), centres, logs)))


def coarse_offset(surveys: Sequence[Survey], cycles: NDArray[np.float64], mains: float) -> float:
    """Return the common relative offset at which the lines are seen.

    Parameters
    ----------
    surveys : sequence of Survey
        Of the channels.
    cycles : ndarray, shape (n_lines,)
        Where the lines should be, cycles a sample.
    mains : float
        The mains, cycles a sample: its harmonics are no evidence for a line that should be elsewhere.

    Returns
    -------
    float
        0 unless the lines are plainly seen elsewhere, up to ±2 %.
    """
    if not surveys:
        return 0.0
    length = surveys[0].length
    highest = float(cycles.max()) * length
    reach = min(_RANGE * highest, 0.98 * (0.5 * length - highest))
    steps = np.arange(-np.floor(2 * reach), np.floor(2 * reach) + 1) / 2 / highest
    gains = np.array([_gains(s, line, steps, mains) for s in surveys for line in cycles * length])
    evidence = gains.sum(axis=0)
    near = np.flatnonzero(np.abs(steps) * highest <= _LOBE)
    at_home = int(near[evidence[near].argmax()])
    best = int(evidence.argmax())
    seen = np.log1p(_TONE)
    more = (gains[:, best] > seen).sum() > (gains[:, near].max(axis=1) > seen).sum()
    needed = _EVIDENCE + _EVIDENCE_EACH * np.sqrt(len(gains))
    if not more or evidence[best] < evidence[at_home] + needed:
        best = at_home
    return _refined(surveys, cycles, float(steps[best]), mains)


def _gains(
    survey: Survey, line: float, steps: NDArray[np.float64], mains: float
) -> NDArray[np.float64]:
    """Return log(1 + power/floor) of a line at each offset; the mains is no evidence."""
    places = line * (1 + steps)
    gain = np.log1p(survey.excess(places))
    own = np.abs(places - line) <= _LOBE
    return np.where(_on_mains(places, mains * survey.length) & ~own, 0.0, gain)


def _on_mains(places: NDArray[np.float64], mains: float) -> NDArray[np.bool_]:
    order = np.maximum(1.0, np.rint(places / mains))
    return (np.abs(places - order * mains) <= _LOBE + 1e-3 * places) & (order <= MAINS_ORDERS)


def _refined(
    surveys: Sequence[Survey], cycles: NDArray[np.float64], offset: float, mains: float
) -> float:
    """Return the offset from the clearest peak; 0 where it is not clear or within 0.3 bins."""
    best, found = 0.0, 0.0
    for survey in surveys:
        for line in cycles * survey.length:
            crowd = np.abs(cycles * survey.length - line)
            on_mains = _on_mains(np.array([line]), mains * survey.length)[0]
            if on_mains or (crowd[crowd > 0] < 2 * _LOBE).any():
                continue
            place, excess = survey.peak(line * (1 + offset) - 2, line * (1 + offset) + 2)
            weight = line * np.sqrt(excess)  # what the peak knows about the offset
            if excess > _CLEAR and weight > best:
                best, found = weight, place / line - 1
    if best > 0 and abs(found) * float(cycles.max()) * surveys[0].length > 0.3:
        return found
    return offset if abs(offset) * float(cycles.max()) * surveys[0].length > _LOBE else 0.0


def nearest_peaks(surveys: Sequence[Survey], cycles: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return where free lines begin: the highest peak near each.

    Parameters
    ----------
    surveys : sequence of Survey
        Of the channels; the one where the line stands out most decides.
    cycles : ndarray, shape (n_lines,)
        Where the lines should be, cycles a sample.

    Returns
    -------
    ndarray, shape (n_lines,)
        Cycles a sample, within 2 % or two bins, and nearer to its own line than to the next.
    """
    found = cycles.copy()
    for k, own in enumerate(cycles):
        others = np.abs(np.delete(cycles, k) - own)
        for survey in surveys:
            reach = max(_RANGE * own, 2.0 / survey.length)
            reach = min(reach, 0.5 * float(others.min(initial=np.inf)))
            place, excess = survey.peak(
                (own - reach) * survey.length, (own + reach) * survey.length
            )
            if excess > _TONE and abs(place / survey.length - own) <= reach:
                found[k] = place / survey.length
                break
    return found


def strong_tones(
    survey: Survey | None, cycles: NDArray[np.float64], samples: int
) -> NDArray[np.float64]:
    """Return the unnamed tones that leak into a line.

    Parameters
    ----------
    survey : Survey or None
        Of the channel.
    cycles : ndarray, shape (n_lines,)
        The lines, cycles a sample.
    samples : int
        Length of the recording.

    Returns
    -------
    ndarray, shape (n_tones,)
        Cycles a sample, strongest first, at most eight.

    Notes
    -----
    A tone of amplitude a at d bins leaks a/(πd) into a line of least squares, to be compared with the
    line's own √(2/N)·σ.
    """
    if survey is None:
        return np.empty(0)
    peaks = _peaks(survey, cycles)
    if not len(peaks):
        return np.empty(0)
    amplitude = 2 * np.sqrt(survey.power[np.rint(peaks).astype(np.int64)]) / survey.sum_window
    places = cycles * survey.length
    sigma = np.sqrt(survey.floor[np.rint(places).astype(np.int64)] / survey.power_window)
    distance = np.abs(peaks[:, None] - places) * (samples / survey.length)
    leak = amplitude[:, None] / (np.pi * distance) / (np.sqrt(2 / samples) * sigma)
    order = np.argsort(-leak.max(axis=1))[:_MOST_TONES]
    return np.asarray(peaks[order][leak.max(axis=1)[order] > _LEAK] / survey.length)


def _peaks(survey: Survey, cycles: NDArray[np.float64]) -> NDArray[np.float64]:
    ratio = survey.power / survey.floor
    inner = ratio[1:-1]
    tops = 1 + np.flatnonzero((inner > _TONE) & (inner >= ratio[:-2]) & (inner > ratio[2:]))
    tops = tops[tops > 2 * _LOBE]
    away = np.abs(tops[:, None] - cycles * survey.length).min(axis=1) > _LOBE + 1
    tops = tops[away]
    tops = tops[np.argsort(-survey.power[tops])]
    chosen: list[float] = []
    for top in tops[: 8 * _MOST_TONES]:
        if all(abs(top - other) > _LOBE for other in chosen):
            chosen.append(top + survey._shift(int(top)))  # noqa: SLF001  # own class
    return np.array(chosen)
