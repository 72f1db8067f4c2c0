"""Distrust: the reasons not to believe a line.

No statistic can see a pick-up that sits exactly on a line, a working point at a fringe top, or a clipped
top. What gives them away is looked for here, and named.
"""

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from calibration.line_noise import UNSTEADY
from calibration.line_result import FittedChannel
from calibration.survey import MAINS_ORDERS, Survey
from metro.kernel.noise import LEAST_SNR

__all__ = ["TOO_WEAK", "Doubts", "fringe_top_reason", "is_clipped"]

_LEAST_CYCLES = 4.0
_CROWDED = 1.5  # bins of 1/T: nearer, two lines share their amplitude as they please
_MAINS_WANDER = 1e-3  # of the mains frequency; grids stay within 0.05 Hz in 50 Hz nearly always
_MAINS_SHARE = 1e-3  # of the line: a smaller pick-up does not matter beside drive and ADC
_SEEN = 20.0  # power over floor from which a peak is there: e^−20 in noise
_ALIASED = 1.5  # variance over that of a lone line in as many samples without gaps
TOO_WEAK = "too weak"
_UNSTEADY_SHARE = 3e-3  # of the line: less is in its u already, and small
_MODULATED = 0.03  # rms change of the amplitude or phase, relative or rad
_BY_CHANCE = 1e-4
# Parts of 16 groups have 32 degrees of freedom: powers 16 times apart among 8 of them in steady noise are
# rarer than one record in a hundred million.
_PARTS, _GROUPS_A_PART, _UNEVEN = 8, 16, 16.0
_CODES_LOOKED_AT = 1 << 16


@dataclass(frozen=True, slots=True)
class Doubts:
    """What is asked of each line.

    Parameters
    ----------
    frequencies_hz : ndarray, shape (n_lines,)
        The lines.
    rate_hz, span_s, mains_hz : float
        Sampling rate [Hz], length of the recording [s], mains [Hz].
    surveys : list of Survey or None
        First look at response and drive.
    clipped : list of bool
        Whether response and drive are.
    largest : list of float
        Largest absolute value of response and drive.
    """

    frequencies_hz: NDArray[np.float64]
    rate_hz: float
    span_s: float
    mains_hz: float
    surveys: list[Survey | None]
    clipped: list[bool]
    largest: list[float]

    def reasons(self, channels: list[FittedChannel], line: int) -> tuple[str, ...]:
        """Return why a line must not be trusted, empty where no reason was found."""
        found = [
            self._cycles(line),
            self._crowd(line),
            self._mains(channels[0], line),
            self._second_harmonic(line),
            self._gaps(channels[0], line),
        ]
        for which, channel in enumerate(channels):
            name, clipped = ("", "drive: ")[which], self.clipped[which]
            found += [
                name + reason
                for reason in (
                    self._weak(channel, line, self.largest[which]),
                    self._unsteady(channel, line),
                    self._modulated(channel, line),
                    self._uneven(channel, line),
                    "clipped: the samples pile up at the extreme value" if clipped else None,
                )
                if reason
            ]
        return tuple(reason for reason in found if reason)

    def _cycles(self, line: int) -> str | None:
        cycles = float(self.frequencies_hz[line] * self.span_s)
        if cycles >= _LEAST_CYCLES:
            return None
        return f"too few cycles: {cycles:.2g} in the recording, {_LEAST_CYCLES:g} are needed"

    def _crowd(self, line: int) -> str | None:
        own = self.frequencies_hz[line]
        for other in np.delete(self.frequencies_hz, line):
            if abs(other - own) * self.span_s < _CROWDED:
                return (
                    f"too near the line at {other:g} Hz: {self.span_s:.3g} s cannot tell them apart"
                )
        return None

    def _mains(self, channel: FittedChannel, line: int) -> str | None:
        own = float(self.frequencies_hz[line])
        order = max(1, round(own / self.mains_hz))
        near = max(_CROWDED / self.span_s, _MAINS_WANDER * own)
        if order > MAINS_ORDERS or abs(own - order * self.mains_hz) >= near:
            return None
        if order == 1:
            return f"on the mains ({self.mains_hz:g} Hz): pick-up cannot be told from the line"
        level = self._mains_level(order)
        where = f"on a mains harmonic ({order} × {self.mains_hz:g} Hz): pick-up cannot be told from the line"
        if level is None:
            return f"{where}, and no other harmonic shows how strong it is"
        size = abs(channel.steady(line)[0])
        if level <= max(6 * channel.estimate(line).along_u, _MAINS_SHARE * size):
            return None
        return f"{where}, and other harmonics reach {100 * level / size:.2g} % of it"

    def _mains_level(self, order: int) -> float | None:
        """Return the strongest other mains harmonic, or what may hide under the noise there."""
        survey = self.surveys[0]
        if survey is None:
            return None
        bin_hz = self.rate_hz / survey.length
        levels = []
        for other in range(1, MAINS_ORDERS + 1):
            place = other * self.mains_hz / bin_hz
            apart = np.abs(self.frequencies_hz / bin_hz - place).min()
            if other == order or apart < 9 or not 9 <= place < len(survey.power) - 5:
                continue
            where, _ = survey.peak(place - 2, place + 2)
            index = int(np.rint(where))
            power = max(float(survey.power[index]), 4.0 * float(survey.floor[index]))
            levels.append(2 * np.sqrt(power) / survey.sum_window)
        return float(max(levels)) if levels else None

    def _second_harmonic(self, line: int) -> str | None:
        survey = self.surveys[0]
        own = float(self.frequencies_hz[line])
        if survey is None or 2 * own >= 0.5 * self.rate_hz:
            return None
        bin_hz = self.rate_hz / survey.length
        if (np.abs(self.frequencies_hz - 2 * own) < 5 * bin_hz).any() or own < 6 * bin_hz:
            return None
        powers = [self._peak_power(survey, f / bin_hz) for f in (own, 2 * own)]
        if powers[1][1] < _SEEN or powers[1][0] <= powers[0][0]:
            return None
        times = float(np.sqrt(powers[1][0] / max(powers[0][0], np.finfo(float).tiny)))
        return fringe_top_reason(times, own)

    @staticmethod
    def _peak_power(survey: Survey, place: float) -> tuple[float, float]:
        where, excess = survey.peak(place - 1, place + 1)
        return float(survey.power[int(np.rint(where))]), excess

    def _gaps(self, channel: FittedChannel, line: int) -> str | None:
        whole = channel.fit.used > 0.99 * self.span_s * self.rate_hz
        if whole or self._crowd(line) or channel.fit.inflation[line] < _ALIASED:
            return None
        return (
            "the pattern of the gaps aliases: its variance is"
            f" {channel.fit.inflation[line]:.2g} times that of as many samples without gaps"
        )

    def _weak(self, channel: FittedChannel, line: int, largest: float) -> str | None:
        size = abs(channel.steady(line)[0])
        floor = channel.floor(line, self.rate_hz, largest)
        if size > LEAST_SNR * floor:
            return None
        snr = size / floor if floor else 0.0
        return f"{TOO_WEAK}: signal to noise {snr:.2g}, {LEAST_SNR:g} is needed"

    def _unsteady(self, channel: FittedChannel, line: int) -> str | None:
        noise = channel.fit.noise[line]
        u = np.sqrt(2 * noise.variance / channel.fit.used)
        if u <= _UNSTEADY_SHARE * abs(channel.fit.coefficients[line]):
            return None
        if noise.near > UNSTEADY:
            return (
                f"not steady: what is left over is {noise.near:.2g} times stronger within 2/T of the line than"
                " beside it"
            )
        compared = int(noise.in_reach.sum())
        if compared > 8 and noise.tones > 0.25 * compared:
            return f"what is left over is not noise: tones in {noise.tones} of {compared} bins"
        return None

    @staticmethod
    def _uneven(channel: FittedChannel, line: int) -> str | None:
        fit = channel.fit
        u = np.sqrt(2 * fit.noise[line].variance / fit.used)
        if u <= _UNSTEADY_SHARE * abs(fit.coefficients[line]):
            return None
        held = fit.counts > 0.5 * fit.counts.max()
        power = np.abs(fit.residual[held, line]) ** 2 / fit.counts[held]
        if len(power) < _PARTS * _GROUPS_A_PART:
            return None
        levels = np.array([part.mean() for part in np.array_split(power, _PARTS)])
        ratio = float(levels.max() / max(levels.min(), np.finfo(float).tiny))
        if ratio <= _UNEVEN:
            return None
        return (
            f"what is left over is {np.sqrt(ratio):.2g} times stronger in one part of the recording than in"
            " another: fit its quiet part alone"
        )

    def _modulated(self, channel: FittedChannel, line: int) -> str | None:
        noise, phasor = channel.fit.noise[line], channel.fit.coefficients[line]
        if phasor == 0:
            return None
        # offsets are −m..−1, 1..m: the mirror image of a bin is its place from the other end.
        upper = (noise.offsets > 0) & noise.in_reach & noise.in_reach[::-1]
        above = noise.bins[upper] * np.conj(phasor) / abs(phasor)
        below = noise.bins[::-1][upper] * np.conj(phasor) / abs(phasor)
        pairs, power = int(upper.sum()), float((np.abs(above) ** 2 + np.abs(below) ** 2).sum())
        if pairs < 6 or power == 0:
            return None
        depth = 2 * np.sqrt(power / channel.fit.used) / abs(phasor)
        alike = 2 * float((above * below).real.sum()) / power
        # |C|² of n pairs of independent bins exceeds x with probability (1 − x)^(n−1).
        if depth < _MODULATED or alike**2 < 1 - _BY_CHANCE ** (1 / (pairs - 1)):
            return None
        if alike > 0:
            return f"its amplitude changes by {100 * depth:.2g} % rms in the recording: the working point wandered"
        return f"its phase changes by {depth:.2g} rad rms in the recording"


def fringe_top_reason(times: float, frequency_hz: float) -> str:
    """Return what is said of a line that is weaker than its second harmonic.

    Parameters
    ----------
    times : float
        How much weaker.
    frequency_hz : float
        The line [Hz].

    Returns
    -------
    str
        The reason not to believe it.
    """
    return (
        f"the response is {times:.2g} times stronger at {2 * frequency_hz:g} Hz, twice the line: the working point is"
        " at a fringe top or bottom"
    )


def is_clipped(values: NDArray[Any]) -> bool:
    """Return whether samples pile up at their largest or smallest value.

    Parameters
    ----------
    values : ndarray, shape (n,)
        Samples, NaN where missing.

    Returns
    -------
    bool
        True if an extreme value occurs far more often than the one next to it.

    Notes
    -----
    The top code of an unclipped sine is met arccos(1−δ)/(arccos(1−2δ)−arccos(1−δ)) ≤ 1/(√2−1) = 2.42
    times as often as the next, δ being a code over the amplitude; 5 times, in more than 0.2 % of all
    samples, is clipped. Samples that are no codes repeat an extreme value by clipping alone.
    """
    looked = values[:: max(1, len(values) // _CODES_LOOKED_AT)]
    looked = looked[np.isfinite(looked)]
    codes, counts = np.unique(looked, return_counts=True)
    if len(codes) < 3:
        return False
    for top, second in ((counts[-1], counts[-2]), (counts[0], counts[1])):
        if top > 5 * second + 10 and top > 0.002 * len(looked):
            return True
    if len(codes) < 0.5 * len(looked):
        return False
    return bool(max(counts[0], counts[-1]) > max(3, 1e-3 * len(looked)))
