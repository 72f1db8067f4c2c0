"""Plans: the wanted uncertainty is reached within every limit, or the plan says why not."""

import dataclasses
import math
from importlib.resources import files

import pytest

from metro.bench import Bench, BenchError, load_bench
from metro.depths import compressions
from metro.errors import MetroError
from metro.kernel.noise import LEAST_SNR
from metro.plan import PlanError, load_plan
from metro.planner import make_plan

BENCH = load_bench(str(files("firmware_bridge.simulated").joinpath("bench.toml")))
PIEZO = {
    "wavelength": {"value": "633 nm", "u": "0.001 nm"},
    "power": "80 uW",
    "responsivity": "0.4 A/W",
    "transimpedance": "50 kohm",
    "adc_bits": 16,
    "adc_range": "10 V",
    "adc__rate": "4 kHz",
    "actuator__gain": "35 nm/V",
}


def test_the_wanted_uncertainty_is_reached():
    """u² = floor² + S/(2T)/A² at every line, with what the plan itself prints."""
    plan = make_plan(BENCH, 0.0022)
    assert plan.duration_s > 10
    assert plan.limit == "the fringe takes 1 % of a line"
    assert plan.all_reasons == []
    for line in plan.lines:
        # drives are cut to three digits, the time rounded up to two
        assert line.expected_u == pytest.approx(0.0022, rel=3e-3)
        density = 0.2e-3 / math.sqrt(2000) * 10 * 35e-9  # of the drive reading, as displacement
        shape = 1 / abs(complex(1 - (line.frequency_hz / 1800) ** 2, line.frequency_hz / 1800 / 20))
        filtered = math.hypot(
            1.0, line.frequency_hz / 1500
        )  # makes the drive smaller, not its noise
        noise = math.hypot(line.noise_m, density * shape * filtered)
        share = noise / line.displacement_m / math.sqrt(2 * plan.duration_s)
        assert math.hypot(line.floor_u, share) == pytest.approx(line.expected_u, rel=1e-9)
        root = line.noise_m / math.sqrt(plan.duration_s)
        assert line.snr == pytest.approx(line.displacement_m / root)
        assert line.phase_rad == pytest.approx(
            4 * math.pi * line.displacement_m * BENCH.index().magnitude / 632.9908e-9, rel=1e-9
        )
        assert line.terminals_v == line.drive_v
        assert line.displacement_m == pytest.approx(line.terminals_v * 35e-9 * shape)


def test_within_the_linear_range():
    plan = make_plan(BENCH, 0.0022)
    losses = compressions([line.phase_rad for line in plan.lines])
    assert [line.compression for line in plan.lines] == pytest.approx(losses)
    assert 0.0095 < max(losses) <= 0.01
    gentle = make_plan(BENCH, 0.0022, loss=0.001)
    assert max(line.compression for line in gentle.lines) <= 0.001
    assert gentle.duration_s == pytest.approx(10 * plan.duration_s, rel=0.1)


def test_a_forgotten_per_cent_sign_is_asked_about_and_every_line_is_seen():
    """0.3 is 30 %: by u alone √(1/2)/0.3 = 2.4 of signal to noise would do, where a fit needs 5."""
    plan = make_plan(BENCH, 0.3)
    assert plan.cautions[0].startswith("an uncertainty of 0.3 is 30 %: did you mean 0.3%?")
    assert plan.all_reasons == []
    for line in plan.lines:
        # three times what a fit needs, less the two digits of the drive's rounding
        assert 3 * LEAST_SNR * 0.99 <= line.snr < 3.5 * LEAST_SNR
        assert line.expected_u < 0.3
    assert not any("did you mean" in text for text in make_plan(BENCH, 0.05).cautions)


def test_a_line_that_no_fit_would_see_is_a_reason():
    """A drive limit so low that the time asked for leaves less signal to noise than 5."""
    bench = BENCH.override({"actuator.drive_limit": "0.2 mV"})
    plan = make_plan(bench, 0.9, duration_s=10.0)
    weak = [line for line in plan.lines if line.snr < LEAST_SNR]
    assert weak
    for line in weak:
        assert any(f"signal to noise {line.snr:.2g}, 5 is needed" in text for text in line.reasons)


def test_a_modest_wish_takes_the_least_time_and_less_drive():
    strict, modest = make_plan(BENCH, 0.003), make_plan(BENCH, 0.01)
    assert (strict.duration_s, modest.duration_s) == (10.0, 10.0)
    assert modest.limit is None
    for a, b in zip(strict.lines, modest.lines, strict=True):
        assert b.drive_v < a.drive_v


def test_the_floor_is_refused_by_name():
    with pytest.raises(PlanError) as caught:
        make_plan(BENCH, 0.002)
    assert str(caught.value) == (
        "uncertainty must be > 0.2152 %, below which no drive and no time lead at 233.9 Hz"
        " (largest: drive reading 0.15 %, ADC reference 0.15 %), got 0.2 %"
    )


def test_the_floor_is_what_the_bench_states():
    plan = make_plan(BENCH, 0.003)
    terms = {c.name: abs(c.effect) for c in plan.lines[0].budget.contributions}
    assert terms["drive reading"] == pytest.approx(1.5e-3)
    assert terms["ADC reference"] == pytest.approx(1.5e-3)
    assert terms["laser wavelength"] == pytest.approx(0.00095 / 632.9908)
    assert terms["power drift between recordings"] == pytest.approx(3e-4)
    assert set(terms) >= {"line fit", "noise of the drive reading", "refractive index"}


def test_too_short_a_time():
    plan = make_plan(BENCH, 0.0022, duration_s=1.0)
    assert plan.duration_s == 1.0
    reasons = [r for line in plan.lines for r in line.reasons if "too short" in r]
    assert len(reasons) == 4
    assert reasons[0].startswith("1 s are too short: u is 0.")
    assert all(line.expected_u > 0.0022 for line in plan.lines)


def test_too_long_a_time():
    loud = dataclasses.replace(
        BENCH,
        motion=tuple(dataclasses.replace(p, density_m=1000 * p.density_m) for p in BENCH.motion),
    )
    plan = make_plan(loud, 0.0022)
    assert plan.duration_s > 3600
    assert "each recording would take" in plan.reasons[0]


def test_time_grows_as_the_square_of_the_noise():
    def twice(point):
        return dataclasses.replace(point, density_m=2 * point.density_m)

    quiet = BENCH.override({"adc.noise": "1 uV", "photodiode.bandwidth": "1 MHz"})
    loud = dataclasses.replace(quiet, motion=tuple(twice(p) for p in quiet.motion))
    times = [make_plan(b, 0.0022, loss=1e-3).duration_s for b in (quiet, loud)]
    assert times[1] / times[0] == pytest.approx(4.0, rel=0.1)  # both rounded up to two digits


def test_the_drive_limit():
    plan = make_plan(BENCH.override({"actuator.drive_limit": "0.1 V"}), 0.0022)
    assert plan.limit == "the lines' peaks together reach the drive limit of 0.1 V"
    assert sum(line.terminals_v for line in plan.lines) == pytest.approx(0.1, rel=0.05)
    assert sum(line.terminals_v for line in plan.lines) <= 0.1


def test_the_drive_as_it_is_set():
    keys = {"drive.point": "amplifier input", "drive.amplifier_gain": 20, "drive.reading": "rms"}
    plan = make_plan(BENCH.override(keys), 0.01)
    assert (plan.drive_point, plan.drive_reading) == ("amplifier input", "rms")
    for line in plan.lines:
        assert line.drive_v == pytest.approx(line.terminals_v / 20 / math.sqrt(2))


def test_bad_neighbours():
    plan = make_plan(BENCH, 0.003, [31.7, 95.1, 50.1])
    assert plan.lines[1].reasons[0] == "3 × 31.7 Hz falls on it (0 Hz away)"
    assert plan.lines[0].reasons[0].startswith("95.1 Hz − 2 × 31.7 Hz falls on it (0 Hz away), 0.")
    assert "the mains' 50 Hz is 0.1 Hz away" in plan.lines[2].reasons[0]
    assert any(reason.startswith("line at 95.1 Hz: ") for reason in plan.all_reasons)


def test_neighbours_take_time():
    assert make_plan(BENCH, 0.01, [87.1, 87.35]).duration_s == 40.0
    assert make_plan(BENCH, 0.01, [2.3]).duration_s == 44.0  # a hundred cycles


def test_a_line_at_the_resonance():
    plan = make_plan(BENCH.override({"photodiode.bandwidth": "1 MHz"}), 0.01, [1788.0, 590.0])
    assert "the drive cannot be foretold" in plan.lines[0].reasons[0]
    assert plan.lines[1].reasons == []
    cautions = " ".join(plan.cautions)
    assert "the resonance" not in cautions
    assert "makes the line at 590 Hz 12 % larger; the drive allows for it" in cautions
    assert "3 × 590 Hz excites the actuator's resonance at 1800 Hz" in cautions


def test_readout_poles_are_told():
    plan = make_plan(BENCH, 0.02, [1210.0])
    told = [
        c
        for c in plan.cautions
        if c.startswith("amplifier, filter and aperture leave 75.6 % of the line")
    ]
    assert len(told) == 1


def test_the_fringe_must_fit_the_converter():
    plan = make_plan(BENCH.override({"adc.range": "3 V"}), 0.01)
    assert plan.reasons[0].startswith("the fringe, 3.78 V from end to end, does not fit")
    off = make_plan(BENCH.override({"adc.range": "5 V", "adc.offset": "0 V"}), 0.01)
    assert off.reasons[0].endswith("leaves the converter's 5 V")
    half = make_plan(BENCH.override({"adc.range": "5 V"}), 0.01)
    assert half.reasons == []
    assert "fits the converter's 5 V only if that begins at 0 V" in " ".join(half.cautions)


def test_what_is_assumed_is_said():
    plan = make_plan(Bench.of(**PIEZO), 0.005, [87.1])
    told = "\n".join(plan.cautions)
    for text in (
        "no [[motion]] in the bench file: the arms are assumed to move by 40 pm/√Hz at 30 Hz",
        "no u is stated for drive.divider, adc.reference: taken as exactly known",
        "no fringe.drift: high − low is assumed to move by up to 0.2 % between recordings",
        "the drives rest on actuator.gain, of unstated u",
        "no actuator.resonance: the actuator is taken to follow alike at every frequency",
        "no mains.frequency: the lines are kept away from 50 Hz and 60 Hz",
    ):
        assert text in told
    assert plan.lines[0].noise_m == pytest.approx(40e-12 * 30 / 87.1, rel=0.01)


def test_motion_beyond_what_is_stated_is_said():
    points = tuple(p for p in BENCH.motion if 31.0 < p.frequency_hz < 234.0)
    told = make_plan(dataclasses.replace(BENCH, motion=points), 0.01, [20.3, 141.3]).cautions
    assert "[[motion]] is stated from 31.7 Hz to 233.9 Hz and continued to 20.3 Hz" in told


def test_laser_and_voltage_are_left_to_those_who_decide():
    """Guide values, no verdict: nothing is ever called safe."""
    for bench in (BENCH, Bench.of(**{**PIEZO, "wavelength": "1064 nm"})):
        told = "\n".join(make_plan(bench, 0.01, [87.1]).cautions)
        assert "the laser safety officer" in told
        assert "guide values" in told
        assert "local rules" in told
        assert "a drive limit in software is no interlock; clamp the voltage in hardware" in told
        assert " safe " not in told.replace("laser safety officer", "")
    assert "not for 1064 nm, which the eye does not see" in told


@pytest.mark.parametrize(
    ("change", "frequencies", "kind", "message"),
    [
        ({}, [2500.0], PlanError, "line must be < 2000 Hz, half of adc.rate, got 2500 Hz"),
        ({}, [87.1, 87.1], PlanError, "each line must be given once, got 87.1 Hz twice"),
        ({}, [-1.0], PlanError, "each line must be finite and > 0, got [-1.0]"),
    ],
)
def test_refused(change, frequencies, kind, message):
    with pytest.raises(kind) as caught:
        make_plan(BENCH.override(change), 0.003, frequencies)
    assert str(caught.value) == message


def test_what_cannot_be_done_without():
    with pytest.raises(PlanError, match="a plan needs lines: give --line"):
        make_plan(Bench.of(**PIEZO), 0.003)
    without = {key: value for key, value in PIEZO.items() if key != "actuator__gain"}
    with pytest.raises(BenchError, match=r"the bench must give actuator\.gain"):
        make_plan(Bench.of(**without), 0.003, [87.1])
    with pytest.raises(MetroError, match="give --wavelength"):
        make_plan(Bench.of(actuator__gain="35 nm/V"), 0.003, [87.1])
    with pytest.raises(PlanError, match=r"uncertainty must be > 0 and < 1, got 1\.5"):
        make_plan(BENCH, 1.5)
    with pytest.raises(PlanError, match="each duration must be finite and > 0"):
        make_plan(BENCH, 0.003, duration_s=math.inf)


def test_a_plan_comes_back_from_its_file(tmp_path):
    from metro.output import to_json

    plan = make_plan(BENCH, 0.003, [31.7, 95.1])
    path = tmp_path / "plan.json"
    path.write_text(to_json(plan.to_dict()), encoding="utf-8")
    loaded = load_plan(path)
    assert loaded.to_dict()["lines"][0]["drive"] == plan.to_dict()["lines"][0]["drive"]
    assert to_json(loaded.to_dict()) == to_json(plan.to_dict())
    assert loaded.bench_lines == plan.bench_lines
    assert [line.drive_v for line in loaded.bench_lines] == [line.drive_v for line in plan.lines]


@pytest.mark.parametrize(
    ("change", "message"),
    [
        ({"format": "x"}, "is no plan: format must be \"midfringe plan\", got 'x'"),
        ({"version": 2}, "is no plan: version must be 1, the only one this program reads, got 2"),
        ({"lines": []}, "is no plan: lines must hold at least one line, got none"),
        (
            {"duration": {"value": 3, "unit": "m", "u": None}},
            "is no plan: duration must be in s, got m",
        ),
        (
            {"duration": {"value": None, "unit": "s", "u": None}},
            "is no plan: duration must be a number, got None",
        ),
        ({"lines": [{}]}, "is no plan: KeyError 'frequency'"),
    ],
)
def test_files_that_are_no_plans(tmp_path, change, message):
    import json

    from metro.output import to_json

    document = json.loads(to_json(make_plan(BENCH, 0.003).to_dict()))
    path = tmp_path / "plan.json"
    path.write_text(json.dumps({**document, **change}), encoding="utf-8")
    with pytest.raises(PlanError) as caught:
        load_plan(path)
    assert str(caught.value) == f"{path} {message}"


def test_files_that_cannot_be_read(tmp_path):
    with pytest.raises(PlanError, match=r"cannot read the plan .*: no such file"):
        load_plan(tmp_path / "none.json")
    (tmp_path / "text.json").write_text("hello", encoding="utf-8")
    with pytest.raises(PlanError, match=r"text\.json is not JSON"):
        load_plan(tmp_path / "text.json")
