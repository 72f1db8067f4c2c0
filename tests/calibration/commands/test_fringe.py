"""``midfringe fringe``: the JSON that programs rely on, the exit codes, the real recordings."""

import json

import numpy as np
import pytest
from real_data import real_data

from metro.commandline import main

KEYS = {
    "low", "high", "contrast", "slope", "slope_per_metre", "working_phase", "phase_amplitude",
    "displacement_amplitude", "routes", "agreement", "trustworthy", "reasons",
}  # fmt: skip


def run(capsys, *arguments):
    """Return (exit code, stdout, stderr) of the program."""
    with pytest.raises(SystemExit) as ended:
        main(["fringe", *map(str, arguments)])
    out, err = capsys.readouterr()
    return ended.value.code or 0, out, err


@pytest.fixture
def driven(tmp_path):
    """Return a recording of 0.4 rad at 31.7 Hz about 1.4 rad, extremes 0.2 V and 2.2 V."""
    t = np.arange(8000) / 1000
    volts = 1.2 + np.cos(1.4 + 0.4 * np.cos(2 * np.pi * 31.7 * t))
    volts += 0.005 * np.random.default_rng(0).normal(size=len(t))
    path = tmp_path / "driven.csv"
    rows = "\n".join(f"{a:.6f},{b:.7f}" for a, b in zip(t, volts, strict=True))
    path.write_text("time,photodiode\ns,V\n" + rows + "\n")
    return path


@pytest.fixture
def scan(tmp_path):
    """Return a scan over five fringes with the same extremes."""
    t = np.arange(8000) / 1000
    volts = 1.2 + np.cos(4 * t + 0.3 * np.sin(3 * t))
    volts += 0.005 * np.random.default_rng(1).normal(size=len(t))
    path = tmp_path / "scan.csv"
    rows = "\n".join(f"{a:.6f},{b:.7f}" for a, b in zip(t, volts, strict=True))
    path.write_text("time,photodiode\ns,V\n" + rows + "\n")
    return path


def test_json_with_given_extremes(capsys, driven):
    code, out, _ = run(
        capsys, driven, "--line", "31.7Hz", "--low", "0.2V", "--high", "2.2V",
        "--wavelength", "632.99 nm", "--dark", "0V", "--json",
    )  # fmt: skip
    document = json.loads(out)
    assert code == 0
    assert set(document) >= KEYS
    assert document["trustworthy"] is True
    assert document["reasons"] == []
    assert document["phase_amplitude"][0]["value"] == pytest.approx(0.4, abs=5e-4)
    assert document["phase_amplitude"][0]["unit"] == "rad"
    metres = document["displacement_amplitude"][0]
    assert metres["unit"] == "m"
    assert metres["value"] == pytest.approx(0.4 * 632.99e-9 / (4 * np.pi), rel=2e-3)
    assert document["working_phase"]["value"] == pytest.approx(1.4, abs=2e-3)
    assert document["slope"]["value"] == pytest.approx(-np.sin(1.4), abs=2e-3)
    assert document["slope"]["unit"] == "V/rad"
    assert document["contrast"]["value"] == pytest.approx(1 / 1.2, rel=1e-9)
    assert document["slope_per_metre"]["unit"] == "V/m"
    assert {route["route"] for route in document["routes"]} >= {"driven fringe", "mid-fringe slope"}
    assert document["agreement"]["agree"] is True


def test_without_wavelength_and_dark_metres_and_contrast_are_null(capsys, driven):
    code, out, _ = run(
        capsys, driven, "--line", "31.7Hz", "--low", "0.2V", "--high", "2.2V", "--json"
    )
    document = json.loads(out)
    assert code == 0
    assert document["displacement_amplitude"] is None
    assert document["slope_per_metre"] is None
    assert document["contrast"] is None
    assert all(route["displacement_amplitude"] is None for route in document["routes"])


def test_extremes_from_another_recording(capsys, driven, scan):
    code, out, _ = run(capsys, driven, "--line", "31.7Hz", "--extremes", scan, "--json")
    document = json.loads(out)
    assert code == 0
    assert document["phase_amplitude"][0]["value"] == pytest.approx(0.4, abs=2e-3)
    assert document["low"]["value"] == pytest.approx(0.2, abs=3e-3)
    assert document["high"]["u"] > 0


def test_dark_from_a_recording(capsys, driven, tmp_path):
    dark = tmp_path / "dark.csv"
    dark.write_text(
        "time,photodiode\ns,V\n" + "".join(f"{k / 1000},0.{k % 2}\n" for k in range(640))
    )
    code, out, _ = run(
        capsys,
        driven,
        "--line",
        "31.7Hz",
        "--low",
        "0.2V",
        "--high",
        "2.2V",
        "--dark",
        dark,
        "--json",
    )
    assert code == 0
    assert json.loads(out)["contrast"]["value"] == pytest.approx(2 / (2.4 - 0.1), rel=1e-6)


def test_counts(capsys, tmp_path):
    t = np.arange(6000) / 1000
    counts = np.round(2048 + 1500 * np.cos(1.4 + 0.4 * np.cos(2 * np.pi * 31.7 * t)))
    path = tmp_path / "counts.csv"
    path.write_text("\n".join(f"{a:.6f},{b:.0f}" for a, b in zip(t, counts, strict=True)) + "\n")
    code, out, err = run(
        capsys, path, "--channel", "2", "--line", "31.7Hz", "--low", "548", "--high", "3548 counts",
        "--json",
    )  # fmt: skip
    assert code == 0, err
    assert json.loads(out)["phase_amplitude"][0]["value"] == pytest.approx(0.4, abs=1e-3)


def test_a_depth_that_is_not_determined_ends_with_1(capsys, driven):
    code, out, err = run(capsys, driven, "--line", "31.7Hz", "--json")
    document = json.loads(out)
    assert code == 1
    assert document["trustworthy"] is False
    assert "depth not determined by this record" in document["reasons"][0]
    assert "depth not determined by this record" in err


def test_for_people(capsys, driven):
    code, out, _ = run(
        capsys, driven, "--line", "31.7Hz", "--low", "0.2V", "--high", "2.2V",
        "--wavelength", "632.99 nm",
    )  # fmt: skip
    assert code == 0
    assert "31.7 Hz" in out
    assert "(95 %)" in out
    assert "no reason for distrust found" in out
    assert "the arms are taken to be in vacuum" in out


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (["--line", "31.7"], "--line must have a unit"),
        (["--line", "600Hz"], "below half the rate"),
        (["--line", "31.7Hz", "--low", "0.2V"], "low and high must be given together"),
        (["--line", "31.7Hz", "--low", "3V", "--high", "2V"], "high must be above low"),
        (["--line", "31.7Hz", "--low", "3", "--high", "4"], "--low must have a unit"),
        (["--line", "31.7Hz", "--low", "0.2V", "--high", "2.2V", "--extremes", "x.csv"], "one or the other"),
        (["--line", "31.7Hz", "--extremes", "no-such-file.csv"], "no-such-file.csv"),
    ],
)  # fmt: skip
def test_wrong_input_ends_with_2_and_one_line(capsys, driven, arguments, words):
    code, out, err = run(capsys, driven, *arguments)
    assert code == 2
    assert out == ""
    assert len(err.strip().splitlines()) == 1
    assert words in err


def test_out_is_written_and_not_overwritten(capsys, driven, tmp_path):
    target = tmp_path / "fringe.json"
    given = (driven, "--line", "31.7Hz", "--low", "0.2V", "--high", "2.2V", "--out", target)
    assert run(capsys, *given)[0] == 0
    assert json.loads(target.read_text("utf-8"))["trustworthy"] is True
    code, _, err = run(capsys, *given)
    assert code == 2
    assert "exists" in err
    assert run(capsys, *given, "--overwrite")[0] == 0


def fibre(name):
    return real_data(f"fiber-modulator-calline/fom-pa/{name}")


@pytest.mark.parametrize(
    ("low", "high", "least", "most"),
    [("0.5V", "10.2V", 0.366, 0.373), ("0.44V", "9.69V", 0.384, 0.391)],
)
def test_fibre_modulator_at_1_khz(capsys, low, high, least, most):
    code, out, _ = run(
        capsys, fibre("fom-pa-waveform_1kHz.csv"), "--channel", "3", "--line", "1kHz",
        "--low", low, "--high", high, "--json",
    )  # fmt: skip
    assert code == 0
    assert least < json.loads(out)["phase_amplitude"][0]["value"] < most


@pytest.mark.parametrize(
    "extremes", [(), ("--low", "0.5V", "--high", "10.2V"), ("--low", "0.44V", "--high", "9.69V")]
)
def test_fibre_modulator_at_a_fringe_top(capsys, extremes):
    code, _, err = run(
        capsys, fibre("fom-pa-control-actuation.csv"), "--channel", "2", "--line", "30Hz",
        "--to", "0.5s", *extremes,
    )  # fmt: skip
    assert code == 1
    assert "the working point sits at a fringe top" in err


@pytest.mark.parametrize(
    ("extra", "least", "most"),
    [
        ((), 0.555, 0.590),
        (("--extremes", "itself"), 0.555, 0.590),
        (("--low", "0.5V", "--high", "10.2V"), 0.536, 0.549),
    ],
)
def test_fibre_modulator_under_control(capsys, extra, least, most):
    path = fibre("fom-pa-control-actuation.csv")
    extra = [path if part == "itself" else part for part in extra]
    code, out, _ = run(
        capsys, path, "--channel", "2", "--line", "30Hz", "--from", "2.5s", *extra, "--json"
    )
    assert code == 0
    assert least < json.loads(out)["phase_amplitude"][0]["value"] < most


@pytest.fixture
def swept(tmp_path):
    """Return a scan up and down over 12.3 fringes with its drive; no units in the header."""
    time = np.arange(8000) / 1000
    drive = np.abs((np.linspace(0, 2, 8000) + 1) % 2 - 1)
    volts = 2 + np.cos(2 * np.pi * 12.3 * drive + 2.0)
    volts += 0.01 * np.random.default_rng(5).normal(size=8000)
    path = tmp_path / "swept.csv"
    rows = np.column_stack([time, volts, drive])
    np.savetxt(path, rows, delimiter=",", header="time,light,ramp", comments="", fmt="%.7g")
    return path


def test_a_scan_is_counted(capsys, swept):
    arguments = ("--channel", "light", "--drive", "ramp", "--wavelength", "632.9908nm", "--json")
    code, out, _ = run(capsys, swept, *arguments)
    assert code == 0
    document = json.loads(out)
    assert [one["direction"] for one in document["passes"]] == ["up", "down"]
    for one in document["passes"]:
        assert one["fringes"]["value"] == pytest.approx(12.3, abs=0.1)
        # half a wavelength is one fringe
        metres = one["displacement"]["value"]
        assert metres == pytest.approx(one["fringes"]["value"] * 632.9908e-9 / 2, rel=1e-9)
    assert document["low"]["value"] == pytest.approx(1.0, abs=0.01)
    assert document["phase_amplitude"] == []
    assert document["trustworthy"] is True
    assert {one["direction"] for one in document["shape"]["directions"]} == {"up", "down"}


def test_a_scan_for_people_and_as_a_picture(capsys, swept, tmp_path):
    target = tmp_path / "scan.png"
    code, out, _ = run(capsys, swept, "--channel", "light", "--plot", target)
    assert code == 0
    assert "unknown: one photodiode without a drive cannot tell it" in out
    assert "cos 2φ" in out
    assert target.read_bytes().startswith(b"\x89PNG")
    code, _, err = run(capsys, swept, "--channel", "light", "--plot", target)
    assert (code, "--overwrite" in err) == (2, True)


def test_levels_in_volts_give_their_unit_to_a_file_without(capsys, swept):
    levels = ("--low", "1000mV", "--high", "3V", "--json")
    code, out, _ = run(capsys, swept, "--channel", "light", *levels)
    document = json.loads(out)
    assert (document["low"]["value"], document["low"]["unit"]) == (1.0, "V")
    assert document["span"]["unit"] == "V"
    assert code == 0


def test_a_drawing_of_a_driven_fringe(capsys, driven, tmp_path):
    target = tmp_path / "driven.svg"
    levels = ("--low", "0.2V", "--high", "2.2V")
    code, _, _ = run(capsys, driven, "--line", "31.7Hz", *levels, "--plot", target)
    assert code == 0
    text = target.read_text("utf-8")
    assert text.startswith("<?xml")


@pytest.fixture
def freely(tmp_path):
    """Return a bench that runs through its fringes, and two detectors in quadrature on it."""
    time = np.arange(24_000) / 4000
    phase = 3 * time + 0.3 * np.cos(2 * np.pi * 401.3 * time + 0.6)
    phase += 0.15 * np.cos(2 * np.pi * 87.1 * time + 1.0)
    rng = np.random.default_rng(6)
    x, y = (
        2 + part + 0.01 * rng.normal(size=len(time))
        for part in (np.cos(phase), 0.8 * np.sin(phase + 0.1))
    )
    path = tmp_path / "freely.csv"
    rows = np.column_stack([time, x, y, np.cos(2 * np.pi * 401.3 * time + 0.6)])
    np.savetxt(path, rows, delimiter=",", header="time/s,x/V,y/V,drive/V", comments="", fmt="%.8g")
    return path


def test_a_free_bench_is_followed_by_a_pilot(capsys, freely, tmp_path):
    lines = ("--line", "87.1Hz", "--channel", "2", "--drive", "4", "--wavelength", "632.9908nm")
    code, out, _ = run(capsys, freely, "--pilot", "401.3Hz", *lines, "--json")
    document = json.loads(out)
    assert code == 0
    assert document["phase_amplitude"][0]["value"] == pytest.approx(0.15, rel=0.02)
    assert document["displacement_amplitude"][0]["value"] == pytest.approx(
        0.15 * 632.9908e-9 / (4 * np.pi), rel=0.02
    )
    assert any("polarity as declared" in one for one in document["assumptions"])
    code, out, _ = run(capsys, freely, "--pilot", "401.3Hz", *lines)
    assert (code, "assumed: sign" in out) == (0, True)


def test_quadrature(capsys, freely, tmp_path):
    target = tmp_path / "ellipse.png"
    arguments = ("--quadrature", "2,3", "--line", "87.1Hz", "--wavelength", "632.9908nm")
    code, out, _ = run(capsys, freely, *arguments, "--json")
    document = json.loads(out)
    assert code == 0
    assert document["phase_amplitude"][0]["value"] == pytest.approx(0.15, rel=0.02)
    assert document["quadrature"]["angle"]["value"] == pytest.approx(-0.1, abs=0.01)
    assert document["quadrature"]["periodic_error_displacement"]["unit"] == "m"
    code, out, _ = run(capsys, freely, *arguments, "--plot", target)
    assert code == 0
    assert "π is the limit" in out
    assert target.exists()


def test_nulls_over_a_drive_series(capsys, tmp_path):
    rng, files = np.random.default_rng(7), []
    time = np.arange(6000) / 6000
    for drive in np.linspace(0.5, 2.9, 7):
        swing = np.cos(2 * np.pi * 160 * time + 0.8)
        light = 2 + np.cos(rng.uniform(0.5, 1.2) + 2 * drive * swing) + 0.01 * rng.normal(size=6000)
        rows = np.column_stack([time, light, drive * np.cos(2 * np.pi * 160 * time + 0.3)])
        files.append(tmp_path / f"at{len(files)}.csv")
        np.savetxt(
            files[-1], rows, delimiter=",", header="time,light,drive", comments="", fmt="%.8g"
        )
    arguments = ("--null", "--line", "160Hz", "--channel", "light", "--drive", "drive")
    code, out, _ = run(capsys, *files, *arguments, "--wavelength", "632.81nm", "--json")
    document = json.loads(out)
    assert code == 0
    (null,) = document["nulls"]
    # first null of J1: 193 nm for 632.81 nm, ISO 16063-11:1999, method 2 (from memory)
    assert null["displacement"]["value"] == pytest.approx(193.0e-9, abs=0.1e-9)
    assert null["drive"]["value"] == pytest.approx(3.8317 / 2, rel=2e-3)
    assert document["phase_per_drive"]["value"] == pytest.approx(2.0, rel=2e-3)
    code, out, _ = run(capsys, *files, *arguments)
    assert (code, "from the nulls" in out) == (0, True)


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (["--count", "--line", "1Hz"], "--count stands for --line"),
        (["--count", "--pilot", "1Hz"], "--count stands for --pilot"),
        (["--quadrature", "2"], "needs two columns"),
        (["--quadrature", "2,3", "--low", "1V", "--high", "2V"], "leave out --low"),
        (["--null", "--line", "1Hz"], "--null needs --drive"),
        (["--null"], "--null needs one --line"),
        (["--pilot", "1Hz", "--low", "1V"], "must be given together"),
        (["--monitor", "2", "--antiphase", "3"], "one or the other"),
        (["--pilot", "10Hz", "--low", "0V", "--high", "4V", "--plot", "x.png"], "--plot draws"),
    ],
)
def test_ways_that_do_not_go_together(capsys, swept, arguments, words):
    code, out, err = run(capsys, swept, "--channel", "light", *arguments)
    assert (code, out) == (2, "")
    assert words in err
    assert len(err.strip().splitlines()) == 1


def test_several_files_are_for_nulls_only(capsys, swept):
    code, _, err = run(capsys, swept, swept)
    assert (code, "for --null only, got 2 files" in err) == (2, True)


def lined_bench(tmp_path):
    """Return a bench that names a line, as most do."""
    path = tmp_path / "bench.toml"
    path.write_text('[[line]]\nfrequency = "31.7 Hz"\ndrive = "160 mV"\n')
    return path


def test_a_scan_is_counted_although_the_bench_names_lines(capsys, swept, driven, tmp_path):
    bench = lined_bench(tmp_path)
    code, out, _ = run(capsys, swept, "--channel", "light", "--drive", "ramp", "--bench", bench)
    assert code == 0
    assert "the bench's lines are not seen and fringes pass: fringes are counted" in out
    code, out, err = run(capsys, driven, "--channel", "photodiode", "--bench", bench)
    assert code == 1
    assert "phase amplitude" in out
    assert "a scan, ramp or motor run is counted with --count" in err


def test_json_says_what_the_page_says(capsys, swept, driven, tmp_path):
    bench = lined_bench(tmp_path)
    code, out, _ = run(
        capsys, swept, "--channel", "light", "--drive", "ramp", "--bench", bench, "--json"
    )
    assert code == 0
    said = "the bench's lines are not seen and fringes pass: fringes are counted"
    assert any(text.startswith(said) for text in json.loads(out)["remarks"])
    code, out, _ = run(capsys, driven, "--channel", "photodiode", "--bench", bench, "--json")
    assert code == 1
    assert any("is counted with --count" in text for text in json.loads(out)["remarks"])


def test_json_has_the_recordings_own_reasons(capsys, driven, tmp_path):
    """Rows that cannot be read, 5 % of the file: the result is distrusted, and JSON says so too."""
    rows = driven.read_text().splitlines()
    holed = tmp_path / "holed.csv"
    holed.write_text("\n".join(rows[:2] + [r if k % 20 else "?,?" for k, r in enumerate(rows[2:])]))
    levels = ("--low", "0.2V", "--high", "2.2V", "--line", "31.7Hz")
    code, out, err = run(capsys, holed, *levels, "--json")
    document = json.loads(out)
    assert code == 1
    assert document["trustworthy"] is False
    own = [text for text in document["reasons"] if text.startswith(str(holed))]
    assert own
    assert own[0] in err


def test_a_real_sweep_is_followed_by_its_line(capsys):
    """From a fringe's top through a sweep of a whole fringe to the lock, by the 30 Hz line alone.

    Depth 0.555 to 0.590 rad is what independent fits of the locked part find with these extremes.
    """
    path = real_data("fiber-modulator-calline/fom-pa/fom-pa-control-actuation.csv")
    code, out, _ = run(
        capsys, path, "--channel", "2", "--drive", "3", "--pilot", "30Hz", "--low", "0.44V",
        "--high", "9.69V", "--json",
    )  # fmt: skip
    document = json.loads(out)
    assert code == 1  # the sweep is too fast for a line of 30 Hz, which is said
    assert "the phase is lost for" in document["reasons"][0]
    assert 0.555 < document["phase_amplitude"][0]["value"] < 0.590
    assert document["pilot"]["frequency"]["value"] == pytest.approx(30.0001, abs=2e-3)
    assert document["known_fraction"] > 0.9
