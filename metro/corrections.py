"""What a first-order, long-wave, small-signal answer leaves out, in numbers."""

from __future__ import annotations

import cmath
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from metro.bench_optics import cavity_mirrors, coherence, phase_trips
from metro.kernel import antenna, beam, cavity, strain
from metro.kernel import lines as line_kernel
from metro.measured import Measured

if TYPE_CHECKING:
    from metro.chain import Chain

__all__ = ["Correction", "Direction", "corrections"]


@dataclass(frozen=True, slots=True)
class Direction:
    """Where a wave comes from and how it is polarised.

    Parameters
    ----------
    theta_rad, phi_rad : float
        Polar angle and azimuth of the source [rad]; the arms lie along x and y.
    psi_rad : float
        Polarisation angle [rad].
    """

    theta_rad: float = 0.0
    phi_rad: float = 0.0
    psi_rad: float = 0.0


@dataclass(frozen=True, slots=True)
class Correction:
    """One correction: its numbers, and what they mean.

    Parameters
    ----------
    values : dict of str to Measured
        Numbers by name.
    text : str
        One sentence for people.
    """

    values: dict[str, Measured]
    text: str

    def number(self, name: str) -> float:
        """Return one of the numbers.

        Parameters
        ----------
        name : str
            As in ``values``.

        Returns
        -------
        float
            In its SI unit.
        """
        return float(self.values[name].magnitude)

    def to_dict(self) -> dict[str, Any]:
        """Return the JSON form.

        Returns
        -------
        dict
            The numbers by name, and ``text``.
        """
        return {**{name: value.to_dict() for name, value in self.values.items()}, "text": self.text}


def corrections(
    chain: Chain,
    stages: dict[str, float | None],
    *,
    frequency_hz: float | None = None,
    direction: Direction | None = None,
    lines: int = 1,
    background_rad: float = 0.0,
) -> dict[str, Correction]:
    """Return the corrections to a first-order answer, as far as the bench determines them.

    Parameters
    ----------
    chain : Chain
        The signal chain.
    stages : dict of str to float or None
        Change at each stage, zero to peak.
    frequency_hz : float, optional
        Frequency of the motion [Hz]; without it arm and readout are left out.
    direction : Direction, optional
        Without it the wave is taken to come from straight above, plus-polarised.
    lines : int, default 1
        Lines driven at once with the same amplitude.
    background_rad : float, default 0
        Root-mean-square phase of all other motion [rad].

    Returns
    -------
    dict of str to Correction
        By name: ``proper_length``, ``arm_travel_time``, ``arm_storage``, ``direction``, ``coherence``,
        ``compression``, ``readout``.
    """
    found: dict[str, Correction | None] = {
        "proper_length": _proper_length(stages["strain"]),
        "arm_travel_time": _arm_travel_time(chain, frequency_hz),
        "arm_storage": _arm_storage(chain, frequency_hz),
        "direction": _direction(chain, direction, frequency_hz),
        "coherence": _coherence(chain),
        "compression": _compression(chain, stages["phase"], lines, background_rad),
        "readout": _readout(chain, frequency_hz),
    }
    return {name: correction for name, correction in found.items() if correction is not None}


def _number(value: float) -> Measured:
    return Measured.of(value, "1")


def _proper_length(h: float | None) -> Correction | None:
    if h is None or abs(h) > 1.0:
        return None
    excess, arm = strain.differential_excess(h), strain.arm_excess(h)
    return Correction(
        {
            "differential": _number(excess),
            "x_arm": _number(arm),
            "y_arm": _number(strain.arm_excess(-h)),
        },
        f"the exact proper length ∫√(1±h) dx makes the differential displacement {excess:.3g} larger than"
        f" hL (relative), the x arm's change {arm:.3g}",
    )


def _arm_travel_time(chain: Chain, frequency_hz: float | None) -> Correction | None:
    if frequency_hz is None or chain.bench.get("arms.length") is None:
        return None
    response = chain.response(frequency_hz, "strain", "displacement")
    size, angle = abs(response), cmath.phase(response)
    return Correction(
        {"magnitude": _number(size), "phase": Measured.of(angle, "rad")},
        f"light takes time to cross the arm: at {frequency_hz:.6g} Hz and normal incidence the response"
        f" is {size:.6g} of strain times length, {angle:.4g} rad in phase",
    )


def _arm_storage(chain: Chain, frequency_hz: float | None) -> Correction | None:
    """Return what folded or Fabry–Perot arms lose because light stays in them."""
    if frequency_hz is None or chain.bench.get("arms.length") is None:
        return None
    if phase_trips(chain.bench) == 1.0:
        return None
    response = chain.response(frequency_hz, "displacement", "phase")
    size, angle = abs(response), cmath.phase(response)
    values = {"magnitude": _number(size), "phase": Measured.of(angle, "rad")}
    text = f"light stays in the arms: at {frequency_hz:.6g} Hz {size:.6g} of the phase is left"
    if chain.bench.get("arms.input_reflectance") is not None:
        length_m = chain.bench.magnitude("arms.length")
        pole_hz = cavity.cavity_pole_hz(length_m, *cavity_mirrors(chain.bench))
        values["pole"] = Measured.of(pole_hz, "Hz")
        text += f", the cavity's pole is at {pole_hz:.6g} Hz"
    return Correction(values, f"{text}, {angle:.4g} rad in phase")


def _coherence(chain: Chain) -> Correction | None:
    left = coherence(chain.bench)
    if left is None:
        return None
    length_m = beam.coherence_length_m(chain.bench.magnitude("laser.linewidth"))
    return Correction(
        {"contrast": _number(left), "length": Measured.of(length_m, "m")},
        f"the laser's linewidth leaves {left:.6g} of the contrast at this mismatch (coherence length"
        f" {length_m:.4g} m)",
    )


def _direction(
    chain: Chain, direction: Direction | None, frequency_hz: float | None
) -> Correction | None:
    if direction is None:
        return None
    opening = chain.bench.magnitude("arms.opening_angle", 0.5 * cmath.pi)
    angles = (direction.theta_rad, direction.phi_rad, direction.psi_rad, opening)
    plus, cross = antenna.antenna_response(*angles)
    values = {"plus": _number(plus), "cross": _number(cross)}
    text = f"for this direction and polarisation the response is {plus:.6g} (plus), {cross:.6g} (cross)"
    if frequency_hz is not None and chain.bench.get("arms.length") is not None:
        both = antenna.detector_response(
            frequency_hz, chain.bench.magnitude("arms.length"), *angles
        )
        for name, response in zip(("plus", "cross"), both, strict=True):
            values[f"{name}_at_frequency"] = _number(abs(response))
        text += f", at {frequency_hz:.6g} Hz {abs(both[0]):.6g} and {abs(both[1]):.6g} in size"
    return Correction(values, text + " of strain times length")


def _compression(
    chain: Chain, depth_rad: float | None, lines: int, background_rad: float
) -> Correction | None:
    if depth_rad is None:
        return None
    # relative to the slope at this working point, so sin φ0 drops out: take it at 1
    left = line_kernel.line_responses([abs(depth_rad)] * lines, 0.5 * cmath.pi, background_rad)[0]
    third = abs(line_kernel.harmonic_amplitude(3, abs(depth_rad), chain.working_phase_rad))
    second = abs(line_kernel.harmonic_amplitude(2, abs(depth_rad), chain.working_phase_rad))
    first = abs(line_kernel.harmonic_amplitude(1, abs(depth_rad), chain.working_phase_rad))
    values = {
        "remaining": _number(left),
        "loss": _number(_loss(left, depth_rad, lines, background_rad)),
    }
    if first > 0.0:
        values |= {
            "second_harmonic": _number(second / first),
            "third_harmonic": _number(third / first),
        }
    many = f"{lines} lines of this amplitude at once" if lines > 1 else "a sine of this amplitude"
    loss = 100.0 * float(values["loss"].magnitude)
    return Correction(
        values, f"the curve of the fringe takes {loss:.3g} % from {many} (2·J1(m)/m and its like)"
    )


def _loss(left: float, depth_rad: float, lines: int, background_rad: float) -> float:
    """Return 1 − left, by the leading terms where the difference has no digits left."""
    if abs(depth_rad) < 1e-4 and background_rad < 1e-4:
        return depth_rad**2 * (0.125 + 0.25 * (lines - 1)) + 0.5 * background_rad**2
    return 1.0 - left


def _readout(chain: Chain, frequency_hz: float | None) -> Correction | None:
    readout = chain.readout
    if frequency_hz is None or not (readout.poles or readout.aperture_s):
        return None
    response = readout.response(frequency_hz)
    size, angle = abs(response), cmath.phase(response)
    return Correction(
        {"magnitude": _number(size), "phase": Measured.of(angle, "rad")},
        f"amplifier, filter and aperture leave {size:.6g} of the signal at {frequency_hz:.6g} Hz,"
        f" {angle:.4g} rad in phase",
    )
