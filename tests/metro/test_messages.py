import pytest

from metro.commandline import run


def refused(capsys, *arguments):
    assert run([str(a) for a in arguments]) == 2
    said = capsys.readouterr().err
    assert said.count("\n") == 1
    return said


def test_a_pure_number_is_asked_for_without_a_unit(capsys):
    said = refused(capsys, "expect", "--displacement", "1pm", "--adc-bits", "many")
    assert "--adc-bits must be a number, got 'many'" in said


def test_files_that_are_no_calibration_are_named_without_jargon(tmp_path, capsys):
    picture = tmp_path / "a.png"
    picture.write_bytes(b"\x89PNG\r\n\x1a\n")
    run_csv = tmp_path / "run.csv"
    run_csv.write_text("time (s),pd (V)\n0.0,1\n0.1,2\n0.2,3\n")
    text = ["convert", run_csv, "--out", tmp_path / "a.csv", "--calibration"]
    assert f"{picture} is no JSON document" in (said := refused(capsys, *text, picture))
    assert "codec" not in said
    said = refused(capsys, *text, tmp_path / "nope.json")
    assert f"cannot read the calibration {tmp_path / 'nope.json'}: no such file" in said


def test_known_keys_are_listed_where_none_is_near(tmp_path, capsys):
    bench = tmp_path / "bench.toml"
    bench.write_text('format = 1\n[arms]\nlength = { value = "1 m", uncertainty = "1 mm" }\n')
    said = refused(capsys, "expect", "--displacement", "1pm", "--bench", bench)
    assert "unknown key 'uncertainty'; known are 'value', " in said


@pytest.mark.parametrize(
    ("language", "name", "known"),
    [("c", "e.py", ".h or .hpp or .c or .inc"), ("micropython", "e.h", ".py")],
)
def test_a_converter_goes_into_a_file_of_its_language(tmp_path, capsys, language, name, known):
    said = refused(capsys, "emit", language, "--out", tmp_path / name)
    assert f"--out must end in {known} for {language}" in said
    assert list(tmp_path.iterdir()) == []


def test_a_language_that_there_is_not_is_named_plainly(capsys):
    assert "Invalid value for 'LANGUAGE': 'rust' is not one of" in refused(capsys, "emit", "rust")


@pytest.mark.parametrize(
    ("options", "caution"),
    [
        # 4 A/W · 1239.84 V nm / 632 nm (h·c/e, SI Brochure, 9th ed.) = 7.85
        (["--responsivity", "4A/W", "--wavelength", "632nm"], "is 7.85 electrons a photon"),
        (["--responsivity", "0.4A/W", "--wavelength", "632.99um"], "a silicon photodiode sees"),
        (["--responsivity", "0.4A/W", "--wavelength", "632.99nm"], None),
    ],
)
def test_a_photodiode_that_cannot_be_is_cautioned_of(capsys, options, caution):
    assert run(["expect", "--displacement", "1pm", *options]) == 0
    out = capsys.readouterr().out
    if caution is None:
        assert "electrons a photon" not in out
        assert "silicon" not in out
    else:
        assert caution in out
