"""``midfringe air``: figures, ways to give humidity, and refusals."""

import json

import pytest
from published import close, records

from metro.commandline import run

POINT = ["--temperature", "20degC", "--pressure", "101325Pa", "--wavelength", "632.9908nm"]


@pytest.fixture(autouse=True)
def no_bench(monkeypatch):
    monkeypatch.delenv("MIDFRINGE_BENCH", raising=False)


def air(capsys, *arguments):
    code = run(["air", "--json", *arguments])
    captured = capsys.readouterr()
    assert (code, captured.err) == (0, "")
    return json.loads(captured.out)


def test_published_point(capsys):
    document = air(capsys, *POINT, "--humidity", "50%")
    record = records("air")["air.point.ciddor.50"]
    found = [document["index"]["value"], 1e9 * document["wavelength_in_air"]["value"]]
    assert found == close(record)
    assert document["index"]["unit"] == "1"
    assert document["index"]["u"] == pytest.approx(2.301e-8 / 2, abs=1e-11)
    assert document["wavelength_in_air"]["unit"] == "m"
    assert document["equation"] == "ciddor"
    assert set(document["sensitivities"]) == {
        "temperature",
        "pressure",
        "humidity",
        "wavelength",
        "co2",
    }
    assert document["sensitivities"]["temperature"] == {
        "value": pytest.approx(-9.54804e-7, abs=2e-11),
        "unit": "1/K",
        "u": None,
    }


@pytest.mark.parametrize(
    ("equation", "key"), [("ciddor", "air.nist.ciddor.09"), ("edlen", "air.nist.edlen.09")]
)
def test_equations(capsys, equation, key):
    document = air(
        capsys, "--temperature", "20degC", "--pressure", "100kPa", "--wavelength", "633nm",
        "--humidity", "1", "--equation", equation,
    )  # fmt: skip
    assert document["index"]["value"] == close(records("air")[key])
    assert document["equation"] == equation


def test_dry_by_default_and_humidity_in_any_way(capsys):
    dry = air(capsys, *POINT)["index"]["value"]
    assert air(capsys, *POINT, "--humidity", "0")["index"]["value"] == dry
    half = air(capsys, *POINT, "--humidity", "0.5")["index"]["value"]
    # 0.5 × 2339.2148 Pa, as a mole fraction times f/p with f = 1.0040254
    assert air(capsys, *POINT, "--vapour-pressure", "1169.6074Pa")["index"][
        "value"
    ] == pytest.approx(half, abs=1e-13)
    assert air(capsys, *POINT, "--mole-fraction", "0.011589593")["index"]["value"] == pytest.approx(
        half, abs=1e-11
    )
    assert air(capsys, *POINT, "--dew-point", "9.27degC")["index"]["value"] == pytest.approx(
        half, abs=1e-9
    )
    assert half < dry


def test_carbon_dioxide(capsys):
    more = air(capsys, *POINT, "--humidity", "0.5", "--co2", "550 umol/mol")["index"]["value"]
    usual = air(capsys, *POINT, "--humidity", "0.5")["index"]["value"]
    assert more - usual == pytest.approx(100 * 1.43463e-10, rel=1e-4)


def test_uncertainties_of_the_bench(capsys, tmp_path):
    bench = tmp_path / "bench.toml"
    bench.write_text(
        '[laser]\nwavelength = "632.9908 nm"\n[air]\ntemperature = { value = "20 degC", u = "0.1 K" }\n'
        'pressure = "101325 Pa"\nhumidity = "50 %"\n'
    )
    document = air(capsys, "--bench", str(bench))
    assert document["contributions"]["temperature"]["value"] == pytest.approx(9.548e-8, rel=1e-4)
    assert document["index"]["u"] == pytest.approx((9.548e-8**2 + 1.1506e-8**2) ** 0.5, rel=1e-3)


def test_larger_uncertainty_outside_an_equations_range(capsys):
    document = air(capsys, *POINT[2:], "--temperature", "50degC", "--equation", "edlen")
    assert document["index"]["u"] > 2e-8
    assert "outside the range" in document["remarks"][0]


def test_page_for_people(capsys):
    assert run(["air", *POINT, "--humidity", "50%"]) == 0
    lines = capsys.readouterr().out.splitlines()
    assert lines[:4] == [
        "refractive index        1.0002713728",
        "standard uncertainty u  1.2e-08",
        "wavelength in air       632.8190701 nm",
        "equation                ciddor: Ciddor, Appl. Opt. 35 (1996) 1566",
    ]


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        (["--humidity", "50"], "--humidity must be ≤ 1.0, got '50'"),
        (["--humidity", "50%", "--dew-point", "9degC"], "humidity must be given in one way, got --dew-point and --humidity"),
        (["--dew-point", "9degC", "--mole-fraction", "0.01"], "humidity must be given in one way, got --dew-point and --mole-fraction"),
        (["--temperature", "-41degC"], "temperature must be 233.15 … 373.15 K, got 232.15 K"),
        (["--pressure", "141kPa"], "pressure must be 10000 … 140000 Pa, got 141000 Pa"),
        (["--wavelength", "299nm"], "wavelength must be 3e-07 … 1.7e-06 m, got 2.99e-07 m"),
        (["--humidity", "101%"], "--humidity must be ≤ 1.0, got '101%'"),
        (["--dew-point", "21degC"], "dew point must be 200 … 293.15 K, got 294.15 K"),
        (["--co2", "450"], "--co2 must be ≤ 0.002, got '450'"),
    ],
)  # fmt: skip
def test_wrong_input_is_one_line(capsys, arguments, message):
    assert run(["air", *POINT, *arguments]) == 2
    captured = capsys.readouterr()
    assert (captured.out, captured.err) == ("", f"midfringe: {message}\n")


@pytest.mark.parametrize("name", ["temperature", "pressure", "wavelength"])
def test_what_must_be_given(capsys, name):
    at = POINT.index(f"--{name}")
    assert run(["air", *POINT[:at], *POINT[at + 2 :]]) == 2
    key = {"wavelength": "laser.wavelength"}.get(name, f"air.{name}")
    assert capsys.readouterr().err == (
        f"midfringe: --{name} must be given, directly or in the bench file as {key}\n"
    )
