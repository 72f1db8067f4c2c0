"""Two outputs, cavities and beams with units: arrays element by element against the kernel."""

import math

import numpy as np
import pytest

import metro
from metro import beam, cavity, fringe_law, ports
from metro.kernel import beam as beam_kernel
from metro.kernel import cavity as cavity_kernel
from metro.kernel import lines as line_kernel
from metro.kernel import ports as kernel

PHASES = np.array([-3.0, -1.2, 0.0, 0.4, 1.9, 3.1])


def rows(values):
    return [tuple(row) for row in np.transpose([v.magnitude for v in values]).tolist()]


def test_antiphase_ports():
    found = ports.antiphase_powers(metro.Quantity(PHASES, "rad"), "80 uW", 0.9)
    for row, phase in zip(rows(found), PHASES.tolist(), strict=True):
        assert row == pytest.approx(kernel.antiphase_powers(phase, 80e-6, 0.9), rel=1e-15)
    assert (found[0] + found[1]).to("uW").magnitude == pytest.approx(160.0, rel=1e-15)
    assert ports.antiphase_powers("0 rad", "80 uW")[1].magnitude == 0.0


def test_quadrature():
    found = ports.quadrature_voltages(metro.Quantity(PHASES, "rad"), "2 V", 1.1, "2 deg")
    lag = math.radians(2)
    for row, phase in zip(rows(found), PHASES.tolist(), strict=True):
        assert row == pytest.approx(kernel.quadrature_signals(phase, 2.0, 1.1, lag), rel=1e-14)
    back = ports.quadrature_phase(*found, 1.1, "2 deg")
    assert back.magnitude == pytest.approx(PHASES, abs=1e-14)
    one = ports.quadrature_phase("1 V", "-0.3 V", 1.1, "2 deg")
    assert one.magnitude == kernel.quadrature_phase(1.0, -0.3, 1.1, lag)


def test_cavity():
    many = cavity.phase_gain(metro.Quantity([0.5, 0.97], "1")).magnitude
    assert many.tolist() == [cavity_kernel.phase_gain(0.5), cavity_kernel.phase_gain(0.97)]
    assert cavity.cavity_pole("4 km", "97 %").magnitude == cavity_kernel.cavity_pole_hz(
        4000.0, 0.97
    )
    at = metro.Quantity([0.0, 90.0], "Hz")
    assert cavity.cavity_response(at, "4 km", 0.97).magnitude.tolist() == [
        1.0, cavity_kernel.cavity_response(90.0, 4000.0, 0.97)
    ]  # fmt: skip
    with pytest.raises(metro.MetroError, match="input_reflectance must be below end_reflectance"):
        cavity.phase_gain(0.99, 0.9)
    with pytest.raises(metro.MetroError, match="the mirrors must reflect more"):
        cavity.finesse(0.01, 0.01)


def test_beam():
    paths = metro.Quantity([0.0, -4.0], "cm")
    assert beam.coherence(paths, "1 GHz").magnitude.tolist() == [
        1.0, beam_kernel.coherence(0.04, 1e9)
    ]  # fmt: skip
    # a 1 GHz line is coherent over 9.5 cm
    assert beam.coherence_length("1 GHz").to("cm").magnitude == pytest.approx(9.5427, abs=1e-4)
    assert beam.tilt_displacement("1 urad", "0.3 mm").to("pm").magnitude == pytest.approx(300.0)
    assert beam.tilt_contrast("0 rad", "1 mm", "633 nm").magnitude == 1.0


def test_line_responses():
    six = fringe_law.line_responses(metro.Quantity(np.full(6, 0.2), "rad"))
    assert six.magnitude.tolist() == line_kernel.line_responses([0.2] * 6, math.pi / 2)
    assert 1 - six.magnitude[0] == pytest.approx(0.0536, abs=5e-5)
    one = fringe_law.line_responses("0.2 rad", "30 deg", "0.5 rad").magnitude
    assert one == line_kernel.line_responses([0.2], math.radians(30), 0.5)[0]
