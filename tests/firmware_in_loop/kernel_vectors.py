"""Evaluate the kernel on thousands of inputs and print every result as packed hex.

Runs under CPython and MicroPython alike: ``python kernel_vectors.py COUNT`` with the kernel
importable as ``kernel``. Decimal text would not do, the interpreters print it differently.
"""

import struct
import sys

from kernel import (
    air,
    antenna,
    arms,
    beam,
    bessel,
    cavity,
    contrast,
    fringe,
    humidity,
    lines,
    noise,
    phase,
    photodiode,
    ports,
    strain,
    student,
)

_state = [12345]


def uniform(low, high):
    """Return the next number of a linear congruential generator (Park and Miller 1988)."""
    _state[0] = 16807 * _state[0] % 2147483647
    return low + (high - low) * (_state[0] / 2147483647)


def spread(low, high):
    """Return a number whose decades are evenly likely."""
    return 10.0 ** uniform(low, high)


def micrometres():
    return uniform(0.3, 1.7) * 1e-6


def angle():
    return uniform(-7.0, 7.0)


def kelvins():
    return uniform(233.15, 373.15)


def pascals():
    return uniform(1e4, 1.4e5)


# name: function, generators of its arguments
CASES = (
    ("arm_change", strain.arm_change_m, (lambda: spread(-22, -1), lambda: uniform(0.1, 4e3))),
    ("exact_arm_change", strain.exact_arm_change_m, (lambda: spread(-22, -1), lambda: uniform(0.1, 4e3))),
    ("exact_differential", strain.exact_differential_m, (lambda: spread(-22, -1), lambda: uniform(0.1, 4e3))),
    ("arm_excess", strain.arm_excess, (lambda: spread(-22, -1),)),
    ("differential_excess", strain.differential_excess, (lambda: spread(-15, -1),)),
    ("strain_exact", strain.strain_exact, (lambda: spread(-9, -1), lambda: uniform(0.5, 5.0))),
    ("sinc", arms.sinc, (angle,)),
    ("arm_response", arms.arm_response, (lambda: spread(0, 8), lambda: uniform(0.1, 10.0), lambda: uniform(-1, 1))),
    ("null_frequency", arms.null_frequency_hz, (lambda: uniform(0.1, 4e3),)),
    ("antenna_response", antenna.antenna_response, (angle, angle, angle, lambda: uniform(0.1, 3.0))),
    ("bessel0", lambda x: bessel.bessel(0, x), (lambda: uniform(-60, 60),)),
    ("bessel1", lambda x: bessel.bessel(1, x), (lambda: uniform(-60, 60),)),
    ("bessel4", lambda x: bessel.bessel(4, x), (lambda: uniform(-60, 60),)),
    ("jinc", bessel.jinc, (lambda: uniform(0.0, 3.0),)),
    ("phase", phase.phase_rad, (lambda: spread(-21, -3), micrometres, lambda: uniform(1.0, 1.0004))),
    ("fringes", phase.fringes, (lambda: spread(-21, -3), micrometres)),
    ("displacement", phase.displacement_m, (angle, micrometres)),
    ("voltage", fringe.voltage, (angle, lambda: uniform(-1, 1), lambda: uniform(2, 10))),
    ("voltage_slope", fringe.voltage_slope, (angle, lambda: uniform(-1, 1), lambda: uniform(2, 10))),
    ("phase_of_voltage", fringe.phase_of_voltage, (lambda: uniform(1, 2), lambda: uniform(-1, 1), lambda: uniform(2, 10))),
    ("signal_change", fringe.signal_change, (lambda: spread(-12, -1), angle)),
    ("phase_change", fringe.phase_change, (lambda: spread(-12, -1), lambda: uniform(-2.5, -0.6))),
    ("power", contrast.power_w, (angle, lambda: spread(-6, -2), lambda: uniform(0, 1))),
    ("line_responses", lambda a, b, p, s: tuple(lines.line_responses([a, b], p, s)), (lambda: uniform(0, 2), lambda: uniform(0, 2), angle, lambda: uniform(0, 1))),
    ("harmonic", lambda m, p: lines.harmonic_amplitude(3, m, p), (lambda: uniform(0, 6), angle)),
    ("responsivity", photodiode.responsivity_a_w, (lambda: uniform(0.1, 1), micrometres)),
    ("counts", photodiode.counts, (lambda: uniform(-5, 5), lambda: uniform(1, 10), lambda: 16)),
    ("one_pole", photodiode.one_pole_response, (lambda: spread(0, 5), lambda: spread(2, 6))),
    ("aperture", photodiode.aperture_response, (lambda: spread(0, 4), lambda: spread(-6, -3))),
    ("shot", noise.shot_current, (lambda: spread(-9, -2),)),
    ("johnson_voltage", noise.johnson_voltage, (lambda: spread(1, 7), kelvins)),
    ("johnson_current", noise.johnson_current, (lambda: spread(1, 7), kelvins)),
    ("quantisation", noise.quantisation_v, (lambda: spread(-6, -2),)),
    ("root_sum", lambda a, b, c: noise.root_sum([a, b, c]), (lambda: spread(-18, -14), lambda: spread(-18, -14), lambda: spread(-18, -14))),
    ("saturation", humidity.saturation_pressure_pa, (kelvins,)),
    ("enhancement", humidity.enhancement_factor, (kelvins, pascals)),
    ("ciddor", air.ciddor, (kelvins, pascals, lambda: uniform(0, 0.02), micrometres)),
    ("edlen", air.edlen, (kelvins, pascals, lambda: uniform(0, 2e3), micrometres)),
    ("ciddor_u", air.ciddor_u, (kelvins, pascals, lambda: uniform(0, 2e3), micrometres)),
    ("folded", lambda f, n: cavity.folded_response(f, 3e3, int(n)), (lambda: spread(0, 5), lambda: uniform(1, 30))),
    ("cavity", cavity.cavity_response, (lambda: spread(0, 5), lambda: uniform(1, 4e3), lambda: uniform(0.3, 0.999))),
    ("phase_gain", cavity.phase_gain, (lambda: uniform(0.1, 0.99), lambda: uniform(0.995, 1.0))),
    ("finesse", cavity.finesse, (lambda: uniform(0.3, 0.999), lambda: uniform(0.3, 1.0))),
    ("coherence", beam.coherence, (lambda: uniform(-2, 2), lambda: spread(3, 9))),
    ("tilt_contrast", beam.tilt_contrast, (lambda: spread(-7, -4), lambda: spread(-4, -3), micrometres)),
    ("real_fringe", lambda p, c, s: beam.real_fringe(p, 0.5, 9.0, [(c, s)]), (angle, lambda: uniform(-0.1, 0.1), lambda: uniform(-0.1, 0.1))),
    ("quadrature", ports.quadrature_phase, (lambda: uniform(-2, 2), lambda: uniform(-2, 2), lambda: uniform(0.8, 1.2), lambda: uniform(-0.2, 0.2))),
    ("t_quantile", lambda dof: student.t_quantile(0.95, dof), (lambda: uniform(1, 60),)),
)  # fmt: skip


def numbers(result):
    """Return the floats of a float, a complex number or a tuple."""
    if isinstance(result, complex):
        return (result.real, result.imag)
    return result if isinstance(result, tuple) else (result,)


def main(count):
    """Print ``name hex hex …`` for each evaluation."""
    for name, function, generators in CASES:
        for _ in range(count):
            arguments = [generator() for generator in generators]
            packed = [struct.pack("<d", x) for x in numbers(function(*arguments))]
            print(name, " ".join(["".join(["%02x" % byte for byte in p]) for p in packed]))  # noqa: UP031  # MicroPython's bytes.hex came late


if __name__ == "__main__":
    main(int(sys.argv[1]))
