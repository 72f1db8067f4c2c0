"""The fringe that a calibration or a bench knows, in converter codes."""

import numpy as np

from calibration.bench_contradictions import step_contradiction
from calibration.emit.coded_fringe import CodedFringe
from calibration.errors import CalibrationError
from calibration.extremes import Extremes
from calibration.record import Calibration
from metro.bench import Bench
from metro.kernel.phase import phase_per_metre
from metro.measured import Measured

__all__ = ["fringe_of_bench", "fringe_of_calibration"]

_CHAIN = {"adc_bits": "adc.bits", "adc_range": "adc.range", "adc_offset": "adc.offset"}


def fringe_of_calibration(
    calibration: Calibration, bench: Bench, slope: str, *, is_signed: bool
) -> CodedFringe:
    """Return the fringe of a calibration in codes.

    Parameters
    ----------
    calibration : Calibration
        Extremes, wavelength, index, and the converter's bits and range where the bench had them.
    bench : Bench
        What is stated here, above all of the converter, goes before the calibration.
    slope : str
        ``"rising"`` or ``"falling"``.
    is_signed : bool
        Codes on both sides of 0.

    Returns
    -------
    CodedFringe
        Ready to be compiled.

    Raises
    ------
    MidfringeError
        If the converter is not known, contradicts the step of the calibration's recordings, or the
        fringe does not fit it. A converter given as an option is meant to be another one, which
        sees the same volts.
    """
    chain = calibration.chain
    known = {key: chain[name] for name, key in _CHAIN.items() if name in chain}
    known = {key: value for key, value in known.items() if bench.get(key) is None}
    bench = bench.replace(known, "calibration")
    _check_step(calibration, bench)
    round_trips = chain.get("round_trips")
    origin = [
        f"calibration of {calibration.created}, midfringe {calibration.software}",
        *_ruler(chain["wavelength"], chain["index"], round_trips),
    ]
    per_metre = phase_per_metre(
        float(chain["wavelength"].magnitude),
        float(chain["index"].magnitude),
        1.0 if round_trips is None else float(round_trips.magnitude),
    )
    return _coded(calibration.extremes, per_metre, bench, slope, is_signed, origin)


def _check_step(calibration: Calibration, bench: Bench) -> None:
    entries = [bench.entries.get(key) for key in ("adc.bits", "adc.range")]
    if any(entry is not None and entry.source.startswith("option") for entry in entries):
        return
    for record in calibration.recordings:
        step = record.get("step")
        said = None if step is None else step_contradiction(bench, float(step["value"]))
        if said is not None:
            raise CalibrationError(
                f"{record['file']}: {said}: the stated converter must be the one that recorded; "
                "--adc-bits and --adc-range give another one that is meant"
            )


def fringe_of_bench(bench: Bench, slope: str, *, is_signed: bool) -> CodedFringe:
    """Return the fringe that a bench states in codes.

    Parameters
    ----------
    bench : Bench
        With the fringe's low and high, the wavelength, the converter's bits and range.
    slope : str
        ``"rising"`` or ``"falling"``.
    is_signed : bool
        Codes on both sides of 0.

    Returns
    -------
    CodedFringe
        Ready to be compiled.

    Raises
    ------
    MidfringeError
        If the bench does not say enough or the fringe does not fit the converter.
    """
    low, high = bench.magnitude("fringe.low"), bench.magnitude("fringe.high")
    covariance = np.diag([bench.u("fringe.low") ** 2, bench.u("fringe.high") ** 2])
    wavelength_m = bench.magnitude("laser.wavelength")
    index, round_trips = bench.index(), bench.magnitude("arms.round_trips", 1.0)
    per_metre = phase_per_metre(wavelength_m, float(index.magnitude), round_trips)
    wavelength = bench.get("laser.wavelength")
    assert wavelength is not None  # noqa: S101  # its magnitude was there
    origin = [
        "values stated, not calibrated",
        *_ruler(wavelength, index, bench.get("arms.round_trips")),
    ]
    return _coded(Extremes(low, high, covariance), per_metre, bench, slope, is_signed, origin)


def _coded(
    extremes: Extremes,
    per_metre: float,
    bench: Bench,
    slope: str,
    is_signed: bool,
    origin: list[str],
) -> CodedFringe:
    u_zero_m = extremes.u_of(0.0, 1.0) / extremes.swing_v / per_metre
    u_scale = extremes.u_of(1.0, 0.0) / extremes.swing_v
    return CodedFringe(
        extremes,
        slope,
        1.0 / per_metre,
        bench.magnitude("adc.range"),
        bench.magnitude("adc.offset", 0.0),
        round(bench.magnitude("adc.bits")),
        is_signed,
        [
            *origin,
            f"fringe from {extremes.low_v:.7g} V to {extremes.high_v:.7g} V",
            (
                f"the extremes' standard uncertainty moves the zero by {u_zero_m * 1e12:.2g} pm "
                f"and the scale by {u_scale * 100:.2g} %"
            ),
        ],
    )


def _ruler(wavelength: Measured, index: Measured, round_trips: Measured | None) -> list[str]:
    trips = 1.0 if round_trips is None else float(round_trips.magnitude)
    return [
        (
            f"vacuum wavelength {float(wavelength.magnitude) * 1e9:.10g} nm, refractive index "
            f"{float(index.magnitude):.10g}, round trips {trips:g}"
        )
    ]
