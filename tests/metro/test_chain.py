"""The signal chain: forward, inverse, slope, frequency response, what it needs."""

import cmath
import math

import numpy as np
import pytest
import strategies as values
from hypothesis import given
from hypothesis import strategies as st

import metro
from metro.chain import Chain, ChainError
from metro.kernel.arms import arm_response
from metro.stages import STAGES, UNITS

FULL = {
    "arm": "4 km",
    "wavelength": "1064 nm",
    "power": "80 uW",
    "responsivity": "0.8 A/W",
    "transimpedance": "10 kohm",
    "adc_bits": 16,
    "adc_range": "10 V",
}


def full(working_phase=-math.pi / 2, **changes):
    return Chain(metro.Bench.of(**(FULL | changes)), working_phase)


def test_every_stage_by_hand():
    chain = full()
    phase = 4 * math.pi * 4e-18 / 1064e-9
    expected = {
        "strain": 1e-21,
        "displacement": 4e-18,
        "phase": phase,
        "fringes": phase / (2 * math.pi),
        "power": phase * 80e-6,
        "current": phase * 80e-6 * 0.8,
        "voltage": phase * 80e-6 * 0.8 * 1e4,
        "counts": phase * 80e-6 * 0.8 * 1e4 * 65536 / 10,
    }
    for stage in STAGES:
        found = chain.forward(strain=1e-21, to=stage)
        assert found.magnitude == pytest.approx(expected[stage], rel=1e-12)
        assert metro.Measured(found).unit == UNITS[stage]


@pytest.mark.parametrize("exact", [False, True])
@given(
    start=st.sampled_from(STAGES),
    end=st.sampled_from(STAGES),
    working=values.working_phase_rad,
    size=st.floats(-12, -1.2),
    trips=values.round_trips,
    contrast=values.contrast,
)
def test_inverse_undoes_forward_over_all_stages(exact, start, end, working, size, trips, contrast):
    chain = full(working, round_trips=trips, contrast=contrast)
    first, last = sorted((start, end), key=STAGES.index)
    x = chain.convert(np.array([-1.0, 0.0, 0.3, 1.0]) * 10.0**size, "phase", first)
    there = chain.convert(x, first, last, exact=exact)
    back = chain.convert(there, last, first, exact=exact)
    assert back == pytest.approx(x, rel=1e-11, abs=0.0)
    assert chain.convert(float(there[3]), last, first, exact=exact) == pytest.approx(
        float(x[3]), rel=1e-11
    )


@given(values.displacement_m, st.floats(-3.0, 3.0))
def test_linear_stages_superpose_and_scale(x, factor):
    chain = full()
    once = chain.convert(x, "displacement", "counts")
    both = chain.convert(x + factor * x, "displacement", "counts")
    assert both == pytest.approx(
        once + chain.convert(factor * x, "displacement", "counts"), abs=1e-12 * abs(once)
    )
    assert both == pytest.approx(once * (1 + factor), abs=1e-12 * abs(once))


@pytest.mark.parametrize(
    ("argument", "value", "factor"),
    [
        ("arm", "8 km", 2.0),
        ("wavelength", "532 nm", 2.0),
        ("round_trips", 3, 3.0),
        ("power", "160 uW", 2.0),
        ("contrast", 0.5, 0.5),
        ("responsivity", "0.4 A/W", 0.5),
        ("transimpedance", "30 kohm", 3.0),
        ("adc_bits", 18, 4.0),
        ("adc_range", "5 V", 2.0),
    ],
)
def test_counts_scale_with_every_argument(argument, value, factor):
    once = full().convert(1.0, "strain", "counts")
    assert full(**{argument: value}).convert(1.0, "strain", "counts") == pytest.approx(
        factor * once
    )


def test_motion_and_slope_have_signs():
    for working, sign in ((-math.pi / 2, 1.0), (math.pi / 2, -1.0)):
        chain = full(working)
        assert chain.convert(1e-12, "displacement", "voltage") * sign > 0
        assert chain.convert(-1e-12, "displacement", "voltage") * sign < 0
        assert chain.working_point().slope_v_rad * sign == pytest.approx(0.64)


def test_exact_passes_through_the_fringe():
    chain = full()
    quarter = metro.Quantity(1064 / 8, "nm")  # a quarter fringe: from the middle to the maximum
    exact = chain.forward(displacement=quarter, to="voltage", exact=True)
    assert exact.magnitude == pytest.approx(0.64)
    assert chain.forward(displacement=quarter, to="voltage").magnitude == pytest.approx(
        0.64 * math.pi / 2
    )
    beyond = chain.inverse(
        voltage=metro.Quantity([0.1, 0.7], "V"), to="phase", exact=True
    ).magnitude
    assert beyond[0] == pytest.approx(math.asin(0.1 / 0.64))
    assert math.isnan(beyond[1])
    assert chain.forward(strain=0.1, to="displacement", exact=True).magnitude == pytest.approx(
        400 * 1.0012555012, rel=1e-9
    )


def test_measured_extremes_stand_for_the_photodiode():
    chain = metro.Bench.of(wavelength="633 nm", low="0.5 V", high="10 V").chain()
    assert chain.forward(phase="1 mrad", to="voltage").magnitude == pytest.approx(4.75e-3)
    here = chain.working_point()
    assert (here.voltage_v, here.slope_v_rad, here.power_w) == (5.25, pytest.approx(4.75), None)
    assert here.slope_v_m == pytest.approx(4.75 * 4 * math.pi / 633e-9)


def test_power_follows_from_measured_extremes():
    bench = metro.Bench.of(**(FULL | {"low": "0.1 V", "high": "1.2 V"}), photodiode__dark="0.02 V")
    chain = bench.chain()
    here = chain.working_point()
    assert here.power_w == pytest.approx((0.65 - 0.02) / (0.8 * 1e4))
    assert chain.forward(phase="1 mrad", to="power").magnitude == pytest.approx(0.55e-3 / 8e3)
    (remark,) = chain.links.remarks
    assert remark == (
        "power, responsivity and transimpedance predict a slope of 0.64 V/rad, the extremes give"
        " 0.55 V/rad; the extremes are used"
    )


def test_uncertainty_of_a_gain_adds_up_the_inputs():
    bench = metro.Bench.of(
        wavelength={"value": "633 nm", "u": "1 pm"},
        power={"value": "80 uW", "u": "0.8 uW"},
        quantum_efficiency={"value": 0.8, "u": 0.004},
    )
    effects = bench.chain().effects("displacement", "current")
    # the wavelength divides the phase and multiplies the responsivity: it drops out
    assert effects["laser.wavelength"] == pytest.approx(0.0, abs=1e-18)
    gain = bench.chain().gain("displacement", "current")
    assert gain.relative_u == pytest.approx(math.hypot(0.01, 0.005))
    assert gain.unit == "A/m"
    back = bench.chain().gain("phase", "displacement")
    assert (back.unit, back.relative_u) == ("m/rad", pytest.approx(1 / 633e3))


def test_uncertainty_of_air_and_converter_reach_the_gain():
    bench = metro.Bench.of(
        wavelength="633 nm",
        low="0 V",
        high={"value": "2 V", "u": "10 mV"},
        adc_bits=12,
        adc_range="5 V",
        air__index={"value": 1.00027, "u": 1e-6},
        adc__reference={"value": 0, "u": 0.002},
    )
    gain = bench.chain().gain("displacement", "counts")
    assert gain.relative_u == pytest.approx(math.sqrt(0.005**2 + 1e-12 + 0.002**2), rel=1e-5)


def test_frequency_response():
    bench = metro.Bench.of(
        **FULL,
        photodiode__bandwidth={"value": "5 kHz", "u": "0.5 kHz"},
        adc__antialias="1.5 kHz",
        adc__aperture="100 us",
        adc__channel_delay="12 us",
    )
    chain = bench.chain()
    f = 1000.0
    amplifier, filtered = 1 / (1 + 0.2j), 1 / (1 + 1j / 1.5)
    aperture = cmath.exp(-0.1j * math.pi) * math.sin(0.1 * math.pi) / (0.1 * math.pi)
    assert chain.response(f, "displacement", "voltage") == pytest.approx(amplifier)
    assert chain.response(f) == pytest.approx(amplifier * filtered * aperture)
    assert chain.response(f, "strain", "phase") == pytest.approx(arm_response(f, 4000.0))
    assert chain.response(f, "counts", "displacement") == pytest.approx(1 / chain.response(f))
    assert chain.readout.drive_response(f) == pytest.approx(cmath.exp(2j * math.pi * f * 12e-6))
    gain = chain.gain("current", "voltage", f)
    assert gain.magnitude == pytest.approx(1e4 * abs(amplifier))
    # |H| = 1/√(1+r²): one per cent of corner is r²/(1+r²) per cent of response
    assert gain.relative_u == pytest.approx(0.1 * 0.04 / 1.04)


@pytest.mark.parametrize(
    ("move", "message"),
    [
        (
            lambda c: c.forward(strain=1e-21, to="phase"),
            "cannot go from strain to phase: give --arm, --wavelength",
        ),
        (
            lambda c: c.forward(phase="1 rad", to="current"),
            "cannot go from phase to current: give --power, --responsivity or --quantum-efficiency",
        ),
        (
            lambda c: c.inverse(counts=3, to="voltage"),
            "cannot go from counts to voltage: give --adc-bits and --adc-range",
        ),
        (
            lambda c: c.forward(voltage="1 V", to="phase"),
            "from voltage to phase is the way of inverse()",
        ),
        (
            lambda c: c.inverse(phase="1 rad", to="voltage"),
            "from phase to voltage is the way of forward()",
        ),
        (
            lambda c: c.forward(phase="1 rad", to="volts"),
            "stage must be one of strain, displacement, phase, fringes, power, current, voltage, counts, got 'volts'",
        ),
        (lambda c: c.forward(to="phase"), "one stage must be given, got none"),
        (
            lambda c: c.forward(phase="1 rad", strain=1, to="phase"),
            "one stage must be given, got phase, strain",
        ),
    ],
)
def test_ways_that_are_not_known(move, message):
    with pytest.raises(ChainError) as caught:
        move(metro.Bench().chain())
    assert str(caught.value) == message


def test_no_inverse_at_an_extreme_of_the_fringe():
    chain = full(math.pi)
    assert chain.forward(phase="1 mrad", to="voltage").magnitude == 0.0
    assert chain.forward(phase="0.1 rad", to="power", exact=True).magnitude == pytest.approx(
        80e-6 * (1 - math.cos(0.1))
    )
    with pytest.raises(ChainError, match="give a working phase off the fringe's extremes"):
        chain.inverse(voltage="1 mV", to="phase")


def test_a_quarter_fringe_in_any_spelling():
    chain = full()
    expected = chain.convert(math.pi / 2, "phase", "voltage")
    for given_value in (
        0.25,
        "0.25",
        "0.25 fringe",
        metro.Quantity(0.25, "1"),
        metro.Quantity(0.25, "fringe"),
    ):
        assert chain.forward(fringes=given_value, to="voltage").magnitude == pytest.approx(expected)


def test_folded_arms_multiply_the_phase_of_a_displacement():
    assert full(round_trips=5).convert(1e-9, "displacement", "fringes") == pytest.approx(
        metro.fringes("1 nm", "1064 nm", round_trips=5).magnitude
    )


def test_fabry_perot_arms_multiply_phase_and_have_a_pole():
    bench = metro.Bench.of(arm="4 km", wavelength="1064 nm", arms__input_reflectance=0.97)
    chain = bench.chain()
    gain = (1 + math.sqrt(0.97)) / (1 - math.sqrt(0.97))
    once = metro.phase("1 fm", "1064 nm").magnitude
    assert chain.forward(displacement="1 fm", to="phase").magnitude == pytest.approx(gain * once)
    # the pole of arms of finesse 206.2: c/(4LF) = 90.9 Hz
    assert abs(chain.response(90.87, "displacement", "phase")) == pytest.approx(
        math.sqrt(0.5), rel=1e-3
    )
    with pytest.raises(metro.MetroError, match=r"arms.round_trips must be 1 .* got 3"):
        metro.Bench.of(
            wavelength="1 um", round_trips=3, arms__input_reflectance=0.9
        ).chain().forward(displacement="1 fm", to="phase")
    with pytest.raises(metro.MetroError, match=r"\[arms\] input_reflectance must be below"):
        metro.Bench.of(
            wavelength="1 um", arms__input_reflectance=0.9, arms__end_reflectance=0.8
        ).chain().forward(displacement="1 fm", to="phase")


def test_folded_arms_answer_late():
    chain = metro.Bench.of(arm="1 m", wavelength="1064 nm", round_trips=20).chain()
    f = 1e6
    step = 4 * math.pi * f / 299792458
    expected = sum(cmath.exp(-1j * step * k) for k in range(20)) / 20
    assert chain.response(f, "displacement", "phase") == pytest.approx(expected)


def test_coherence_limits_the_contrast_that_is_not_given():
    wide = {"laser__linewidth": "1 GHz", "arms__mismatch": "2 cm"}
    given_power = {"wavelength": "633 nm", "power": "80 uW"}
    chain = metro.Bench.of(**given_power, **wide).chain()
    left = math.exp(-math.pi * 1e9 * 0.04 / 299792458)
    assert chain.forward(phase="1 mrad", to="power").magnitude == pytest.approx(80e-9 * left)
    measured = metro.Bench.of(**given_power, **wide, contrast=0.9).chain()
    assert measured.forward(phase="1 mrad", to="power").magnitude == pytest.approx(72e-9)
