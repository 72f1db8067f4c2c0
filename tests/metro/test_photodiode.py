"""Photodiode and noise with units at the door."""

import numpy as np
import pytest

import metro
from metro import noise, photodiode
from metro.kernel import noise as kernel


def test_responsivity():
    # published: 0.510387620355 A/W at 632.8 nm for one electron a photon
    found = photodiode.responsivity(1.0, "632.8 nm")
    assert found.to("A/W").magnitude == pytest.approx(0.510387620355, abs=1e-11)
    assert photodiode.quantum_efficiency(found, "632.8 nm").magnitude == pytest.approx(1.0)
    assert photodiode.responsivity("80 %", "632.8 nm").magnitude == pytest.approx(
        0.8 * 0.510387620355
    )


def test_power_to_counts():
    current = photodiode.photocurrent("80 uW", "0.4 A/W")
    volts = photodiode.voltage(current, "62 kohm")
    assert volts.to("V").magnitude == pytest.approx(80e-6 * 0.4 * 62e3)
    assert photodiode.adc_step("10 V", 16).magnitude == 10 / 65536
    counts = photodiode.adc_counts(volts, "10 V", 16, "-5 V")
    assert counts.magnitude == pytest.approx((volts.magnitude + 5) * 6553.6)


@pytest.mark.parametrize(("signed", "lowest", "highest"), [(True, -2048, 2047), (False, 0, 4095)])
def test_codes_and_over_range(signed, lowest, highest):
    volts = np.array([-9.0, -1e-4, 0.0, 0.6e-3, 0.7e-3, 1.0, 9.0])
    codes, over = photodiode.adc_codes(
        metro.Quantity(volts, "V"), "5 V", 12, "0.0 V", signed=signed
    )
    one = [photodiode.adc_codes(metro.Quantity(v, "V"), "5 V", 12, signed=signed) for v in volts]
    assert list(zip(codes.tolist(), over.tolist(), strict=True)) == one
    assert (codes[0], codes[-1]) == (lowest, highest)
    assert codes[3:6].tolist() == [0, 1, 819]  # 1.2207 mV a count
    assert over.tolist() == [c in (lowest, highest) for c in codes]
    with pytest.raises(metro.MetroError, match=r"bits must be a whole number, got 12\.5"):
        photodiode.adc_codes("1 V", "5 V", 12.5)


def test_noise():
    # published: 1.790070744e-11 A/√Hz and 4.07035478e-9 V/√Hz
    assert noise.shot_current("1 mA").magnitude == pytest.approx(1.790070744e-11, rel=1e-9)
    assert noise.johnson_voltage("1 kohm", "300 K").magnitude == pytest.approx(
        4.07035478e-9, rel=1e-8
    )
    assert noise.johnson_voltage("1 kohm", "26.85 degC").magnitude == pytest.approx(
        4.07035478e-9, rel=1e-8
    )
    assert noise.johnson_current("10 kohm", "300 K").magnitude == pytest.approx(
        1.2871592e-12, rel=1e-7
    )
    assert noise.quantisation_noise("5 V", "12 bit").magnitude == pytest.approx(0.00035238663890968)
    many = noise.shot_current(metro.Quantity([0.0, 1e-6, 1e-3], "A")).magnitude
    assert many.tolist() == [kernel.shot_current(i) for i in (0.0, 1e-6, 1e-3)]
    assert isinstance(many, np.ndarray)


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (
            lambda: photodiode.responsivity(1.2, "633 nm"),
            "quantum_efficiency must be ≤ 1.0, got 1.2",
        ),
        (
            lambda: photodiode.photocurrent("1 V", "0.4 A/W"),
            "power must have a unit of power (such as '80 uW'), got '1 V'",
        ),
        (
            lambda: photodiode.photocurrent("1 W", "0.4"),
            "responsivity must have a unit of current per power (such as '0.4 A/W'), got '0.4'",
        ),
        (lambda: photodiode.adc_step("5 V", 0), "bits must be ≥ 1.0, got 0"),
        (
            lambda: noise.johnson_voltage("1 kohm", "-300 degC"),
            "temperature must be > 0.0 K, got '-300 degC'",
        ),
        (lambda: noise.shot_current("-1 A"), "current must be ≥ 0.0 A, got '-1 A'"),
    ],
)
def test_wrong_arguments(call, message):
    with pytest.raises(metro.MetroError) as caught:
        call()
    assert str(caught.value) == message
