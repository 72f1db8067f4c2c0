"""What a person should beware of before driving an actuator as planned.

Laser classes and voltages are guide values as commonly quoted; nothing here is a verdict.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

from metro.cautions import bench_cautions
from metro.floor import ASSUMED_DRIFT

if TYPE_CHECKING:
    from collections.abc import Sequence

    from metro.actuator import Actuator
    from metro.bench import Bench
    from metro.motion import LineNoise

__all__ = [
    "actuator_cautions",
    "fringe_checks",
    "noise_cautions",
    "safety_cautions",
    "unstated_cautions",
    "wish_cautions",
]

_VISIBLE_M = (400e-9, 700e-9)
LARGE_WISH = 0.05  # a calibration is seldom wanted so coarse
RESONANT = 3.0  # response, or its reciprocal, from which the drive cannot be foretold


def safety_cautions(bench: Bench, peak_v: float, limit_v: float | None) -> list[str]:
    """Return the cautions about laser, voltage and drive limit.

    Parameters
    ----------
    bench : Bench
        For the wavelength.
    peak_v : float
        All lines' peaks together at the actuator's terminals [V].
    limit_v : float or None
        The bench's drive limit [V].

    Returns
    -------
    list of str
        Always all three; guide values, deferring to those who decide.

    References
    ----------
    IEC 60825-1 (laser classes), IEC 61558-1 and IEC 61140 (extra-low voltage), as commonly quoted.
    """
    visible = "which hold for continuous visible light (400 nm to 700 nm)"
    wavelength = bench.get("laser.wavelength")
    if wavelength is not None and not _VISIBLE_M[0] <= wavelength.magnitude <= _VISIBLE_M[1]:
        visible += f" and not for {1e9 * wavelength.magnitude:.5g} nm, which the eye does not see"
    stated = "no drive limit is stated" if limit_v is None else f"drive_limit is {limit_v:g} V"
    return [
        (
            "laser: guide values often quoted from IEC 60825-1 are class 1 up to 0.39 mW, 2 up to 1 mW,"
            f" 3R up to 5 mW, 3B up to 500 mW, {visible}; [laser] power is what reaches the photodiode,"
            " not what the laser emits; class and eyewear are for the laser safety officer and the"
            " local rules to decide"
        ),
        (
            f"voltage: all lines' peaks together reach {peak_v:.3g} V at the actuator, scans may take"
            " more; guide values for extra-low voltage are 50 V rms or 120 V DC (IEC 61558-1), 25 V"
            " rms or 60 V DC where it can be touched (IEC 61140, as commonly quoted); piezo drivers"
            " can give more than they are asked for, and a piezo stays charged: local rules govern"
        ),
        (
            f"{stated}: a drive limit in software is no interlock; clamp the voltage in hardware, below"
            " what actuator and driver bear"
        ),
    ]


def actuator_cautions(
    actuator: Actuator, bench: Bench, frequencies_hz: Sequence[float]
) -> list[str]:
    """Return what is not known about the actuator.

    Parameters
    ----------
    actuator : Actuator
        As the bench describes it.
    bench : Bench
        For the gain's u.
    frequencies_hz : sequence of float
        The lines [Hz].

    Returns
    -------
    list of str
        One line each.
    """
    share = bench.u("actuator.gain") / actuator.gain_m_v
    known = f" to {100 * share:.2g} %" if share else ", of unstated u"
    cautions = [
        (
            f"the drives rest on actuator.gain{known}: look at the phase amplitudes of the first lines"
            " recording and scale the drives"
        )
    ]
    if actuator.resonance_hz is None:
        cautions.append(
            "no actuator.resonance: the actuator is taken to follow alike at every frequency"
        )
        return cautions
    width_hz = actuator.resonance_hz / actuator.q
    for frequency in frequencies_hz:
        change = actuator.response(frequency) - 1.0
        if abs(change) > 0.05:
            cautions.append(
                f"the actuator's resonance makes the line at {frequency:g} Hz {100 * abs(change):.2g} %"
                f" {'larger' if change > 0 else 'smaller'}; the drive allows for it"
            )
        cautions += [
            f"{order} × {frequency:g} Hz excites the actuator's resonance at {actuator.resonance_hz:g} Hz"
            for order in (2, 3)
            if abs(order * frequency - actuator.resonance_hz) < width_hz
        ]
    return cautions


def noise_cautions(
    bench: Bench, noises: Sequence[LineNoise], frequencies_hz: Sequence[float]
) -> list[str]:
    """Return what the plan assumes about noise and u.

    Parameters
    ----------
    bench : Bench
        What is stated.
    noises : sequence of LineNoise
        Beside each line.
    frequencies_hz : sequence of float
        The lines [Hz].

    Returns
    -------
    list of str
        One line each.
    """
    cautions = bench_cautions(bench)
    if not bench.motion:
        cautions.append(
            "no [[motion]] in the bench file: the arms are assumed to move by 40 pm/√Hz at 30 Hz, falling"
            " as 1/f, as on an ordinary table; drives and time rest on it: record with the drive off"
            " and state what you find"
        )
    else:
        low, high = bench.motion[0].frequency_hz, bench.motion[-1].frequency_hz
        outside = [f for f in frequencies_hz if not low / 1.2 <= f <= high * 1.2]
        if outside:
            names = ", ".join(f"{f:g} Hz" for f in outside)
            cautions.append(
                f"[[motion]] is stated from {low:g} Hz to {high:g} Hz and continued to {names}"
            )
    # of the sources that every bench has; a missing rarer one is what `expect` tells
    unknown = [s for s in ("shot", "adc") if s in noises[0].readout.missing]
    if unknown:
        wanted = "; ".join(f"{s}: give {noises[0].readout.missing[s]}" for s in unknown)
        cautions.append(f"the noise of light and electronics is incomplete ({wanted})")
    return cautions


def unstated_cautions(keys: Sequence[str]) -> list[str]:
    """Return the caution about inputs that count as exactly known.

    Parameters
    ----------
    keys : sequence of str
        Keys of the bench without a u.

    Returns
    -------
    list of str
        One line at most for each kind.
    """
    exact = [key for key in keys if key != "fringe.drift"]
    cautions = []
    if exact:
        cautions.append(
            f"no u is stated for {', '.join(exact)}: taken as exactly known, the floor is too low"
        )
    if "fringe.drift" in keys:
        cautions.append(
            f"no fringe.drift: high − low is assumed to move by up to {100 * ASSUMED_DRIFT:g} % between"
            " recordings"
        )
    return cautions


def wish_cautions(wanted_u: float) -> list[str]:
    """Return the caution about an uncertainty so large that a per cent sign was likely forgotten.

    Parameters
    ----------
    wanted_u : float
        Relative standard uncertainty asked for.

    Returns
    -------
    list of str
        One line at most.
    """
    if wanted_u <= LARGE_WISH:
        return []
    return [
        (
            f"an uncertainty of {wanted_u:g} is {100 * wanted_u:g} %: did you mean {wanted_u:g}%? The"
            " drives are no smaller than a fit needs to see the lines"
        )
    ]


def fringe_checks(
    bench: Bench, swing_v: float | None, mid_v: float | None
) -> tuple[list[str], list[str]]:
    """Return whether the fringe fits the converter.

    Parameters
    ----------
    bench : Bench
        ``[adc]`` range and offset (the middle of the range).
    swing_v, mid_v : float or None
        (high − low)/2 and (high + low)/2 [V].

    Returns
    -------
    tuple of (list of str, list of str)
        Reasons for distrust, cautions.
    """
    if swing_v is None or bench.get("adc.range") is None:
        return [], ["range of the converter not checked: it or the fringe's height is not given"]
    full_v = bench.magnitude("adc.range")
    if 2.0 * swing_v > full_v:
        reason = (
            f"the fringe, {2 * swing_v:.3g} V from end to end, does not fit the converter's"
            f" {full_v:.3g} V: its extremes cannot be found"
        )
        return [reason], []
    if mid_v is None:
        return [], []
    middles = [bench.magnitude("adc.offset", 0.0)]
    if bench.get("adc.offset") is None:
        middles.append(0.5 * full_v)  # the range may as well begin at 0 V
    fits = [abs(mid_v - middle) + swing_v <= 0.5 * full_v for middle in middles]
    ends = f"the fringe, {mid_v - swing_v:.3g} V … {mid_v + swing_v:.3g} V,"
    if not any(fits):
        return [f"{ends} leaves the converter's {full_v:.3g} V"], []
    if not all(fits):
        where = "begins at 0 V" if fits[1] else "lies about 0 V"
        caution = (
            f"{ends} fits the converter's {full_v:.3g} V only if that {where}: state adc.offset, the"
            " middle of the range"
        )
        return [], [caution]
    return [], []
