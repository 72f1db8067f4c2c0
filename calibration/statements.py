"""What the bench file states, as a calibration keeps it: chain, conditions, assumptions."""

from collections.abc import Sequence

from calibration.open_loop import SIGN, OpenLoop
from calibration.realignment import realignment_statement
from calibration.record import Calibration
from metro.bench import Bench
from metro.drive import terminal_factor
from metro.measured import Measured

__all__ = ["assumptions", "chain_values", "conditions"]

_CHAIN = {
    "wavelength": "laser.wavelength",
    "round_trips": "arms.round_trips",
    "arm_length": "arms.length",
    "amplifier_corner": "photodiode.bandwidth",
    "antialias_corner": "adc.antialias",
    "channel_delay": "adc.channel_delay",
    "aperture": "adc.aperture",
    "polarity": "actuator.polarity",
    "adc_bits": "adc.bits",
    "adc_range": "adc.range",
    "adc_offset": "adc.offset",
}


def chain_values(bench: Bench) -> dict[str, Measured]:
    """Return wavelength, index and whatever else of the chain is known."""
    known = {name: bench.get(key) for name, key in _CHAIN.items()}
    chain = {name: value for name, value in known.items() if value is not None}
    # volts at the actuator's terminals per volt of the recorded drive; its u is in the budgets
    factor = Measured.of(terminal_factor(bench, recorded=True), "1")
    return {**chain, "index": bench.index(), "drive_factor": factor}


def conditions(bench: Bench) -> dict[str, Measured]:
    """Return temperature, pressure and humidity as far as they are stated."""
    known = {name: bench.get(f"air.{name}") for name in ("temperature", "pressure", "humidity")}
    return {name: value for name, value in known.items() if value is not None}


def assumptions(
    bench: Bench,
    repeats: Sequence[Calibration] = (),
    loop: OpenLoop | None = None,
    *,
    series: bool = False,
) -> list[str]:
    """Return what was taken as given, one line each.

    Parameters
    ----------
    bench : Bench
        Source of the wavelength, arm, polarity.
    repeats : sequence of Calibration
        Of other alignments.
    loop : OpenLoop, optional
        Of a servo that held the mirror.
    series : bool
        Whether a drive series was measured.

    Returns
    -------
    list of str
        Sentences.
    """
    linear = "the actuator is linear at the drive used"
    if not series:
        linear += "; hysteresis and creep were not measured"
    held = [
        (
            "a servo held the mirror; the drive was read before the point where it acts, and what its "
            f"open-loop gain took off was restored by 1 + G ({SIGN})"
        )
    ]
    return [
        f"the wavelength comes from: {bench.text('laser.source')}",
        f"sign: {_declared(bench)}; rising is the slope on which the voltage grows with the x arm",
        linear,
        *(held if loop is not None else []),
        realignment_statement(bench, repeats),
    ]


def _declared(bench: Bench) -> str:
    arm = bench.text("actuator.arm")
    if bench.get("actuator.polarity") is None:
        return "which way a positive drive moves the mirror was not declared, nor checked"
    sign = "longer" if bench.magnitude("actuator.polarity") > 0 else "shorter"
    named = f"{arm} arm" if arm else "x arm (no arm was named)"
    return f"a positive drive is declared to make the {named} {sign}"
