"""What goes beyond one session: servo, drive series, other alignments, routes, validity."""

import json
from dataclasses import replace

import numpy as np
import pytest
from sessions import built_in_bench, play

from calibration.analysis import calibrate
from calibration.drive_series import RAYLEIGH_LAG
from calibration.open_loop import load_open_loop
from calibration.record import load
from metro.bench import BenchLine
from metro.commandline import run
from metro.measured import Measured

RATE_HZ, HIGH_V, LOW_V = 4000.0, 3.9, 0.2
WAVELENGTH_M = 632.9908e-9
LINE_HZ = 87.1


@pytest.fixture(scope="module")
def session(tmp_path_factory):
    folder = tmp_path_factory.mktemp("session")
    simulated, files = play(built_in_bench(), 6, folder, lines_s=6.0)
    return simulated, files, calibrate(built_in_bench(), **files)


def vacuum_bench():
    """One line, one photodiode without poles, the drive read one to one."""
    bench = built_in_bench()
    keep = ("laser.wavelength", "laser.source", "arms.round_trips", "actuator.polarity")
    kept = {key: entry for key, entry in bench.entries.items() if key in keep}
    bench = replace(bench, entries=kept, lines=(BenchLine(LINE_HZ, 1.0),))
    return bench.replace(
        {
            "air.index": Measured.of(1.0, "1", 0.0),
            "fringe.low": Measured.of(LOW_V, "V", 1e-4),
            "fringe.high": Measured.of(HIGH_V, "V", 1e-4),
            "fringe.drift": Measured.of(0.0, "1", 1e-5),
        }
    )


def recording(path, drive_v, moved_m, rng, side=1.0):
    """A photodiode at mid-fringe of the fringe law, with its drive, as NPZ."""
    time_s = np.arange(int(4 * RATE_HZ)) / RATE_HZ
    phase = -side * np.pi / 2 + 4 * np.pi * moved_m(time_s) / WAVELENGTH_M
    volts = (HIGH_V + LOW_V) / 2 + (HIGH_V - LOW_V) / 2 * np.cos(phase)
    volts += 2e-4 * rng.normal(size=time_s.size)
    drive = drive_v(time_s) + 1e-4 * rng.normal(size=time_s.size)
    np.savez(path, time_s=time_s, photodiode=volts, drive=drive)
    return str(path)


def rayleigh_recording(path, amplitude_v, rng, side=1.0, d0=8e-9, alpha=0.8e-9):
    turn = 2 * np.pi * LINE_HZ

    def drive(time_s):
        return amplitude_v * np.cos(turn * time_s)

    def moved(time_s):
        falling = np.where(np.sin(turn * time_s) > 0, 1.0, -1.0)
        loop = falling * alpha / 2 * (amplitude_v**2 - drive(time_s) ** 2)
        return (d0 + alpha * amplitude_v) * drive(time_s) + loop

    return recording(path, drive, moved, rng, side)


def test_a_drive_series_finds_the_coefficient_without_drive(tmp_path):
    """An actuator that follows the Rayleigh law, on both slopes: its d0, α and lag come back."""
    rng = np.random.default_rng(5)
    drives = (0.4, 0.8, 1.6, 2.4, 1.2, 0.6)
    names = [
        rayleigh_recording(tmp_path / f"{k}.npz", v, rng, side=1.0 if k % 2 else -1.0)
        for k, v in enumerate(drives)
    ]
    names = [with_units(name) for name in names]
    rising, falling = (
        with_units(rayleigh_recording(tmp_path / f"{name}.npz", 1.0, rng, side))
        for name, side in (("rising", 1.0), ("falling", -1.0))
    )
    found = calibrate(vacuum_bench(), lines_rising=[rising], lines_falling=[falling], series=names)
    (series,) = found.drive_series
    small = Measured.from_dict(series["small_signal"].copy())
    assert abs(small.magnitude - 8e-9) < 4 * small.u_magnitude
    assert small.relative_u < 0.005
    slope = Measured.from_dict(series["amplitude_slope"])
    assert abs(slope.magnitude - 0.8e-9) < 5 * slope.u_magnitude
    assert Measured.from_dict(series["lag"]).magnitude == pytest.approx(RAYLEIGH_LAG, abs=0.03)
    up_down = Measured.from_dict(series["up_down"])
    assert abs(up_down.magnitude) < 5 * up_down.u_magnitude
    assert series["from"].magnitude == pytest.approx(0.4, rel=1e-3)
    assert series["to"].magnitude == pytest.approx(2.4, rel=1e-3)
    assert not any("hysteresis and creep were not measured" in text for text in found.assumptions)


def with_units(path):
    """The NPZ with the volts of its columns named, as our own export names them."""
    arrays = dict(np.load(path))
    arrays = {"time_s": arrays["time_s"]} | {
        f"{name} [V]": arrays[name] for name in ("photodiode", "drive")
    }
    out = path.replace(".npz", "-v.npz")
    np.savez(out, **arrays)
    return out


@pytest.mark.slow
def test_a_servo_is_undone(session, tmp_path):
    """Lines read before the servo's own signal are small by 1 + G: the table brings them back."""
    _, files, free = session
    table = tmp_path / "loop.csv"
    at_hz = np.geomspace(5.0, 500.0, 50)
    gain = 30.0 / (1j * at_hz)
    rows = [
        f"{f:.6f},{abs(g):.9f},{np.degrees(np.angle(g)):.6f},{0.01 * abs(g):.9f}"
        for f, g in zip(at_hz, gain, strict=True)
    ]
    header = "frequency [Hz],magnitude,phase [deg],u_magnitude"
    table.write_text("\n".join([header, *rows]) + "\n", encoding="utf-8")
    loop = load_open_loop(table)
    held = calibrate(built_in_bench(), **files, open_loop=loop)
    for entry, other in zip(held.actuator, free.actuator, strict=True):
        factor = 1 + 30.0 / (1j * entry.frequency.magnitude)
        ratio = entry.magnitude.magnitude / other.magnitude.magnitude
        assert ratio == pytest.approx(abs(factor), rel=1e-3)
        turn = entry.phase.magnitude - other.phase.magnitude
        assert turn == pytest.approx(np.angle(factor), abs=1e-3)
        share = abs((1 - 1 / factor).real) * 0.01
        (own,) = [c for c in entry.budget.contributions if c.name == "open-loop gain"]
        assert abs(own.effect) / entry.magnitude.magnitude == pytest.approx(share, rel=0.01)
    assert held.open_loop["file"] == "loop.csv"
    assert any("a servo held the mirror" in text for text in held.assumptions)
    assert all(e.magnitude.u_magnitude > 0 for e in held.actuator)


def test_other_alignments_give_the_reproducibility(session, tmp_path):
    _, files, first = session
    others = []
    for number, factor in enumerate((0.99, 1.01)):
        moved = [
            replace(e, magnitude=Measured.of(factor * e.magnitude.magnitude, "m/V", 1e-12))
            for e in first.actuator
        ]
        path = tmp_path / f"other-{number}.json"
        path.write_text(json.dumps(replace(first, actuator=moved).to_dict()), encoding="utf-8")
        others.append(load(path))
    found = calibrate(built_in_bench(), **files, repeat=others)
    for entry, before in zip(found.actuator, first.actuator, strict=True):
        (term,) = [c for c in entry.budget.contributions if "realignment" in c.name]
        # standard deviation of 0.99, 1, 1.01 of the value
        assert term.u == pytest.approx(0.01, rel=1e-6)
        assert (term.kind, term.dof) == ("A", 2)
        assert entry.magnitude.u_magnitude > before.magnitude.u_magnitude
        u = np.hypot(before.magnitude.u_magnitude, 0.01 * before.magnitude.magnitude)
        assert entry.magnitude.u_magnitude == pytest.approx(u, rel=1e-6)


def test_without_other_alignments_the_budget_says_so(session):
    _, files, first = session
    names = [c.name for c in first.actuator[0].budget.contributions]
    assert "reproducibility after realignment (not measured)" in names
    assert "reproducibility after realignment was not measured" in first.assumptions
    bench = built_in_bench().replace({"actuator.reproducibility": Measured.of(0.0, "1", 0.004)})
    stated = calibrate(bench, **files).actuator[0]
    (term,) = [c for c in stated.budget.contributions if "realignment" in c.name]
    assert (term.name, term.u) == ("reproducibility after realignment (stated)", 0.004)


@pytest.mark.slow
def test_the_routes_agree_and_stand_in_the_budget(session):
    _, files, first = session
    assert any("routes (not compared)" in c.name for c in first.actuator[0].budget.contributions)
    found = calibrate(built_in_bench(), **files, compare=True)
    checks = [c for c in found.checks if c["name"].startswith("slope and driven fringe at")]
    assert len(checks) == 4
    assert all(check["agree"] for check in checks)
    for entry in found.actuator:
        (term,) = [c for c in entry.budget.contributions if c.name == "disagreement of the routes"]
        assert abs(term.effect) < 0.002 * entry.magnitude.magnitude


def test_the_response_between_the_lines_is_that_of_the_truth(session):
    simulated, _, found = session
    for at_hz in (50.0, 110.0, 200.0):
        magnitude, phase = found.response.measured_at(at_hz)
        true = simulated.truth.actuator(at_hz)
        assert abs(magnitude.magnitude - abs(true)) < 4.5 * magnitude.u_magnitude
        assert abs(phase.magnitude - np.angle(true)) < 4.5 * phase.u_magnitude


def test_two_lines_are_no_response_and_it_says_so(session):
    _, files, _ = session
    bench = replace(built_in_bench(), lines=built_in_bench().lines[:2])
    found = calibrate(bench, **files)
    assert found.response is None
    assert any("response between the lines was not fitted" in text for text in found.cautions)


def test_validity_is_what_the_actuator_went_through(session):
    _, files, found = session
    validity = found.validity
    assert validity["drive_to"].magnitude == pytest.approx(4 * 0.16, rel=0.25)
    assert validity["drive_from"].magnitude == pytest.approx(-4 * 0.16, rel=0.25)
    assert [v.magnitude for v in validity["amplitudes"]] == pytest.approx([0.16] * 4, rel=0.05)
    assert abs(validity["bias"].magnitude) < 0.02
    assert validity["history"] is None
    assert validity["temperature"].magnitude == pytest.approx(294.45)
    bench = built_in_bench().replace({"actuator.bias": Measured.of(75.0, "V")})
    assert calibrate(bench, **files).validity["bias"].magnitude == 75.0


def test_polarity_that_was_not_given_is_not_called_declared(session):
    _, files, first = session
    assert any(
        "a positive drive is declared to make the x arm longer" in t for t in first.assumptions
    )
    bench = built_in_bench()
    bare = {k: e for k, e in bench.entries.items() if k != "actuator.polarity"}
    found = calibrate(replace(bench, entries=bare), **files)
    assert any("was not declared, nor checked" in text for text in found.assumptions)


def test_command_takes_them_all(session, tmp_path, capsys):
    _, files, first = session
    other = tmp_path / "other.json"
    other.write_text(json.dumps(first.to_dict()), encoding="utf-8")
    table = tmp_path / "loop.csv"
    table.write_text("frequency [Hz],magnitude,phase [deg]\n1,0.02,-90\n1000,0.02,-90\n")
    from sessions import BENCH_FILE

    arguments = ["calibrate", "--bench", str(BENCH_FILE), "--scan", files["scan"][0]]
    arguments += ["--lines-rising", files["lines_rising"][0]]
    arguments += ["--lines-falling", files["lines_falling"][0]]
    arguments += ["--series", files["lines_rising"][0], "--repeat", str(other)]
    arguments += ["--open-loop", str(table), "--no-routes", "--json"]
    assert run(arguments) == 0
    document = json.loads(capsys.readouterr().out)
    assert document["open_loop"]["file"] == "loop.csv"
    assert any("the drive series says nothing" in text for text in document["cautions"])
    assert document["response"]["chi_square"] >= 0
