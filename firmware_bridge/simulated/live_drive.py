"""The simulated board's drive: lines and an offset that are set over the wire, and move evenly."""

from collections.abc import Callable
from dataclasses import dataclass
from math import pi

import numpy as np
from numpy.typing import NDArray

from firmware_bridge.simulated.setup import Tone

__all__ = ["FADE_S", "LiveDrive"]

FloatArray = NDArray[np.float64]
Response = Callable[[float], complex]

FADE_S = 0.05
"""How long a line takes to another amplitude."""

_OFFSET = -1  # its slot
_KEPT_S = 1.0  # longer than the memory of the readout's filters


@dataclass
class _Fade:
    """One sine whose amplitude goes evenly from one value to another; 0 Hz is the offset."""

    tone: Tone
    before_v: float
    begin_s: float
    length_s: float

    def level_v(self, time_s: FloatArray) -> FloatArray:
        part = np.clip((time_s - self.begin_s) / self.length_s, 0.0, 1.0)
        return np.asarray(self.before_v + (self.tone.amplitude_v - self.before_v) * part)

    def until(self, time_s: float) -> float:
        return float(self.level_v(np.array([time_s]))[0])


class LiveDrive:
    """What moves the actuator, in volts at its terminals, as a function of the board's time.

    A change begins where the bench has been computed to, so that nothing already sent changes.
    """

    def __init__(self) -> None:
        self._fades: list[_Fade] = []
        self._slots: dict[int, _Fade] = {}
        self.now_s = 0.0
        """How far the bench has been computed [s]."""

    def set(self, slot: int, tone: Tone) -> None:
        """Fade the line of a slot into another one.

        Parameters
        ----------
        slot : int
            From 0.
        tone : Tone
            What it shall be; its phase counts from time 0.
        """
        old = self._slots.get(slot)
        kept = old is not None and (old.tone.frequency_hz, old.tone.phase_rad) == (
            tone.frequency_hz,
            tone.phase_rad,
        )
        before_v = 0.0
        if old is not None:
            before_v = old.until(self.now_s)
            self._fades.remove(old)
            if not kept:
                self._end(old, before_v)
        fade = _Fade(tone, before_v if kept else 0.0, self.now_s, FADE_S)
        self._slots[slot] = fade
        self._fades.append(fade)

    def clear(self, slot: int) -> None:
        """Fade the line of a slot away, if there is one.

        Parameters
        ----------
        slot : int
            From 0.
        """
        fade = self._slots.pop(slot, None)
        if fade is not None:
            self._fades.remove(fade)
            self._end(fade, fade.until(self.now_s))

    def clear_lines(self) -> None:
        """Fade every line away; the offset stays."""
        for slot in [slot for slot in self._slots if slot != _OFFSET]:
            self.clear(slot)

    def rest(self) -> None:
        """Fade everything away."""
        self.clear_lines()
        self.clear(_OFFSET)

    def ramp(self, target_v: float, length_s: float) -> None:
        """Move the offset evenly.

        Parameters
        ----------
        target_v : float
            Where to [V].
        length_s : float
            In what time [s], > 0.
        """
        self.set(_OFFSET, Tone(0.0, target_v))
        self._slots[_OFFSET].length_s = length_s

    def peak_v(self, slot: int | None, amplitude_v: float) -> float:
        """Return what everything may reach if one line, or the offset, had another size [V]."""
        slot = _OFFSET if slot is None else slot
        others = (f.tone.amplitude_v for k, f in self._slots.items() if k != slot)
        return abs(amplitude_v) + sum(map(abs, others))

    def volts(self, time_s: FloatArray, response: Response) -> FloatArray:
        """Return the sum of all lines, each times a complex response; slow beside the filters.

        Parameters
        ----------
        time_s : ndarray, shape (n,)
            The board's time [s].
        response : callable
            Complex response at a frequency [Hz].

        Returns
        -------
        ndarray, shape (n,)
            Real.
        """
        total = np.zeros(time_s.size)
        for fade in self._fades:
            tone = fade.tone
            gain = response(tone.frequency_hz)
            turn = 2 * pi * tone.frequency_hz * time_s + tone.phase_rad
            shape = (gain * np.exp(1j * turn)).real if tone.frequency_hz else gain.real
            total += fade.level_v(time_s) * shape
        return total

    def advance(self, now_s: float) -> None:
        """Take note of how far the bench has been computed.

        Parameters
        ----------
        now_s : float
            The board's time [s].
        """
        self.now_s = now_s
        alive = set(map(id, self._slots.values()))
        self._fades = [
            f for f in self._fades if id(f) in alive or now_s < f.begin_s + f.length_s + _KEPT_S
        ]

    def restart(self, now_s: float) -> None:
        """Begin to count at ``now_s``, with the lines that are set and nothing of the past.

        Parameters
        ----------
        now_s : float
            The board's time at which the bench begins to be computed [s].
        """
        self.now_s = now_s
        for fade in self._slots.values():
            fade.before_v, fade.begin_s = fade.tone.amplitude_v, now_s
        self._fades = list(self._slots.values())

    def _end(self, fade: _Fade, level_v: float) -> None:
        tone = Tone(fade.tone.frequency_hz, 0.0, fade.tone.phase_rad)
        self._fades.append(_Fade(tone, level_v, self.now_s, FADE_S))
