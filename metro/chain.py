"""The signal chain: strain → displacement → phase → fringes → power → current → voltage → counts.

Values at the stages are changes about the working point, signed and linear unless asked for
exactly. Everything that predicts, inverts or converts uses this one object.
"""

from __future__ import annotations

import math
from functools import cached_property
from typing import TYPE_CHECKING, Any

from metro.elementwise import elementwise
from metro.errors import MetroError
from metro.kernel.strain import strain_exact
from metro.links import Link, Links, bench_links
from metro.measured import Measured
from metro.readout import Readout
from metro.stage_response import stage_response
from metro.stages import STAGES, UNITS, stage_si
from metro.working_point import WorkingPoint, rest

if TYPE_CHECKING:
    from metro.bench import Bench
    from metro.units import Quantity

__all__ = ["Chain", "ChainError", "WorkingPoint"]

MID_FRINGE_RISING_RAD = -0.5 * math.pi


class ChainError(MetroError):
    """A way along the chain that the bench does not determine, or that has no inverse."""


class Chain:
    """The stages of one bench about one working point.

    Parameters
    ----------
    bench : Bench
        What is known of the interferometer; nothing in it means arms in vacuum, one round trip,
        contrast 1.
    working_phase_rad : float, default −π/2
        Phase of the working point [rad]; the default is mid-fringe on the rising slope.

    Attributes
    ----------
    bench : Bench
        As given.
    working_phase_rad : float
        As given.
    """

    def __init__(self, bench: Bench, working_phase_rad: float = MID_FRINGE_RISING_RAD) -> None:
        self.bench = bench
        self.working_phase_rad = working_phase_rad
        self._ways: dict[str, dict[str, list[tuple[Link, bool]]]] = {}

    @cached_property
    def links(self) -> Links:
        """What the bench determines."""
        return bench_links(self.bench, self.working_phase_rad)

    @cached_property
    def readout(self) -> Readout:
        """Frequency response of amplifier, filter and converter."""
        return Readout.of(self.bench)

    def forward(self, *, to: str, exact: bool = False, **given: Quantity | float | str) -> Quantity:
        """Return what a change at one stage makes at a later one.

        Parameters
        ----------
        to : str
            Stage wanted.
        exact : bool, default False
            Proper length and fringe law as they are, instead of linear about the working point.
        **given : Quantity, float or str
            The one stage given by its name, ``strain=1e-21`` or ``displacement="1 pm"``; scalar or
            array.

        Returns
        -------
        Quantity
            Change at ``to``, in SI units.

        Raises
        ------
        ChainError
            If the bench does not determine the way, or ``to`` lies before the stage given.
        """
        return self._move(given, to, exact, 1)

    def inverse(self, *, to: str, exact: bool = False, **given: Quantity | float | str) -> Quantity:
        """Return the change at an earlier stage that a change at a later one means.

        Parameters
        ----------
        to : str
            Stage wanted.
        exact : bool, default False
            Proper length and fringe law as they are, on the working point's slope.
        **given : Quantity, float or str
            The one stage given by its name, ``voltage="1 mV"``; scalar or array.

        Returns
        -------
        Quantity
            Change at ``to``, in SI units; exact, NaN in an array where no phase gives the value.

        Raises
        ------
        ChainError
            If the bench does not determine the way, the working point is at a fringe extreme, or
            ``to`` lies behind the stage given.
        """
        return self._move(given, to, exact, -1)

    def _move(self, given: dict[str, Any], to: str, exact: bool, direction: int) -> Quantity:
        from metro.units import quantity

        if len(given) != 1:
            raise ChainError(f"one stage must be given, got {', '.join(given) or 'none'}")
        ((start, value),) = given.items()
        for name in (start, to):
            if name not in UNITS:
                raise ChainError(f"stage must be one of {', '.join(STAGES)}, got {name!r}")
        if (STAGES.index(to) - STAGES.index(start)) * direction < 0:
            other = "inverse" if direction > 0 else "forward"
            raise ChainError(f"from {start} to {to} is the way of {other}()")
        return quantity(self.convert(stage_si(start, value), start, to, exact=exact), UNITS[to])

    def convert(self, value: Any, start: str, to: str, *, exact: bool = False) -> Any:  # noqa: ANN401  # floats and arrays alike
        """Return the change at one stage that belongs to a change at another, in plain numbers.

        Parameters
        ----------
        value : float or ndarray
            Change at ``start``, in its unit of :data:`metro.stages.UNITS`.
        start, to : str
            Names of the stages, in either order.
        exact : bool, default False
            Proper length and fringe law as they are.

        Returns
        -------
        float or ndarray
            Change at ``to``.

        Raises
        ------
        ChainError
            If the bench does not determine the way.
        """
        way = self.way(start, to)
        if exact:
            for link, with_it in way:
                value = self._pass_exactly(value, link, with_it)
            return value
        factor = 1.0  # one product over an array instead of one a link
        for link, with_it in way:
            factor = factor * link.gain if with_it else factor / link.gain
        return value * factor

    def way(self, start: str, to: str) -> list[tuple[Link, bool]]:
        """Return the links from one stage to another, each with whether it is passed forwards.

        Parameters
        ----------
        start, to : str
            Names of the stages.

        Returns
        -------
        list of (Link, bool)
            In the order to take; empty if the stages are the same.

        Raises
        ------
        ChainError
            If the bench does not determine the way; the message says what to give.
        """
        found = self.maybe_way(start, to)
        if found is None:
            raise ChainError(
                f"cannot go from {start} to {to}: give {self.what_is_missing(start, to)}"
            )
        return found

    def maybe_way(self, start: str, to: str) -> list[tuple[Link, bool]] | None:
        """Return the links from one stage to another, or None where the bench leaves it open.

        Parameters
        ----------
        start, to : str
            Names of the stages.

        Returns
        -------
        list of (Link, bool) or None
            As :meth:`way`.
        """
        if start not in self._ways:  # the bench does not change, and noise asks again and again
            self._ways[start] = self._ways_from(start)
        return self._ways[start].get(to)

    def _ways_from(self, start: str) -> dict[str, list[tuple[Link, bool]]]:
        ways: dict[str, list[tuple[Link, bool]]] = {start: []}
        open_ends = [start]
        while open_ends:
            here = open_ends.pop()
            for link in self.links.known:
                for near, far, with_it in (
                    (link.start, link.end, True),
                    (link.end, link.start, False),
                ):
                    if near == here and far not in ways and (with_it or link.gain != 0.0):
                        ways[far] = [*ways[here], (link, with_it)]
                        open_ends.append(far)
        return ways

    def what_is_missing(self, start: str, to: str) -> str:
        """Return what would have to be given to get from one stage to another.

        Parameters
        ----------
        start, to : str
            Names of the stages.

        Returns
        -------
        str
            Options or places in the bench file.
        """
        if any(link.gain == 0.0 for link in self.links.known):
            return "a working phase off the fringe's extremes, where the slope is zero"
        first, last = STAGES.index(start), STAGES.index(to)
        stages = STAGES[first : last + 1] if first <= last else STAGES[last : first + 1][::-1]
        reached = max(i for i, s in enumerate(stages) if self.maybe_way(start, s) is not None)
        ends = stages[reached + 1 :] if first <= last else stages[reached:-1]
        wanted = [self.links.missing[s] for s in ends if s in self.links.missing]
        return ", ".join(dict.fromkeys(wanted))

    def gain(self, start: str, to: str, frequency_hz: float = 0.0) -> Measured:
        """Return the linear change at one stage per change at another, with its uncertainty.

        Parameters
        ----------
        start, to : str
            Names of the stages.
        frequency_hz : float, default 0
            Frequency at which the readout's poles act [Hz].

        Returns
        -------
        Measured
            In the unit of ``to`` over that of ``start``; u from the inputs' u alone.

        Raises
        ------
        ChainError
            If the bench does not determine the way.
        """
        gain = self.convert(1.0, start, to)
        if frequency_hz:
            gain *= abs(self.response(frequency_hz, start, to))
        effects = self.effects(start, to, frequency_hz)
        u = abs(gain) * math.sqrt(sum(e * e for e in effects.values())) if effects else None
        return Measured.of(gain, _ratio_unit(UNITS[to], UNITS[start]), u)

    def effects(self, start: str, to: str, frequency_hz: float = 0.0) -> dict[str, float]:
        """Return the relative change of a gain for one standard uncertainty of each input.

        Parameters
        ----------
        start, to : str
            Names of the stages.
        frequency_hz : float, default 0
            Frequency at which the readout's poles act [Hz].

        Returns
        -------
        dict of str to float
            By the bench's key (``air.index`` for the air), signed; an input that acts twice is
            added up.
        """
        total: dict[str, float] = {}
        for link, with_it in self.way(start, to):
            for key, effect in link.effects.items():
                total[key] = total.get(key, 0.0) + (effect if with_it else -effect)
        sign, poles = self._poles_between(start, to)
        for pole in poles:
            effect = sign * pole.relative_effect(frequency_hz)
            if effect:
                total[pole.key] = total.get(pole.key, 0.0) + effect
        return total

    def _poles_between(self, start: str, to: str) -> tuple[float, list[Any]]:
        first, last = sorted((STAGES.index(start), STAGES.index(to)))
        between = {
            "voltage": self.readout.amplifier,
            "counts": self.readout.antialias,
        }
        poles = [p for s, p in between.items() if p is not None and first < STAGES.index(s) <= last]
        return (1.0 if STAGES.index(start) <= STAGES.index(to) else -1.0), poles

    def response(
        self, frequency_hz: float, start: str = "displacement", to: str = "counts"
    ) -> complex:
        """Return the complex response between two stages, relative to frequency zero.

        Parameters
        ----------
        frequency_hz : float
            Frequency [Hz].
        start, to : str
            Names of the stages; backwards it is the reciprocal.

        Returns
        -------
        complex
            Arm (normal incidence) from strain to displacement, folded or Fabry–Perot arms up to the
            phase, amplifier up to the voltage, filter and aperture up to the counts.
        """
        first, last = STAGES.index(start), STAGES.index(to)
        if first > last:
            return 1.0 / self.response(frequency_hz, to, start)
        total = 1.0 + 0.0j
        for stage in STAGES[first + 1 : last + 1]:
            total *= stage_response(self, frequency_hz, stage)
        return total

    def working_point(self) -> WorkingPoint:
        """Return phase, power, current, voltage and slope where the interferometer rests.

        Returns
        -------
        WorkingPoint
            None for what the bench does not determine.
        """
        return rest(self)

    def _pass_exactly(self, value: Any, link: Link, with_it: bool) -> Any:  # noqa: ANN401  # floats and arrays alike
        if link.law == "length":
            return _proper_length(value, link.gain, with_it)
        if link.law == "fringe":
            return _fringe_change(value, link.half_height, self.working_phase_rad, with_it)
        return _pass(value, link, with_it)


def _pass(value: Any, link: Link, with_it: bool) -> Any:  # noqa: ANN401  # floats and arrays alike
    return value * link.gain if with_it else value / link.gain


def _proper_length(value: Any, length_m: float, with_it: bool) -> Any:  # noqa: ANN401  # floats and arrays alike
    from metro.strain import differential_m

    if with_it:
        return differential_m(value, length_m, exact=True)
    return elementwise(strain_exact, value, length_m)


def _fringe_change(value: Any, half_height: float, phase_rad: float, with_it: bool) -> Any:  # noqa: ANN401  # floats and arrays alike
    from metro.fringe_arrays import phase_changes, signal_changes

    if with_it:
        return half_height * signal_changes(value, phase_rad)
    return phase_changes(value / half_height, phase_rad)


def _ratio_unit(above: str, below: str) -> str:
    if above == below:
        return "1"
    return above if below == "1" else f"{above}/{below}"
