"""The calibration file: its schema, samples of every version, and whatever else may be in a file."""

import copy
import json
from importlib.resources import files
from pathlib import Path

import numpy as np
import pytest
from hypothesis import HealthCheck, example, given, settings
from hypothesis import strategies as st
from jsonschema import Draft202012Validator
from sessions import built_in_bench, play

from calibration.analysis import calibrate
from calibration.record import CalibrationFileError, load
from calibration.schema import calibration_schema, misfit

SAMPLE = Path(__file__).parent / "samples" / "calibration-1.json"
DOCUMENT = json.loads(SAMPLE.read_text(encoding="utf-8"))


@pytest.fixture(scope="module")
def calibration(tmp_path_factory):
    _, recordings = play(built_in_bench(), 6, tmp_path_factory.mktemp("session"), lines_s=4.0)
    return calibrate(built_in_bench(), **recordings)


def test_schema_is_one_and_published_with_the_package():
    Draft202012Validator.check_schema(calibration_schema())
    assert calibration_schema()["$schema"] == "https://json-schema.org/draft/2020-12/schema"
    assert files("calibration").joinpath("calibration.schema.json").is_file()


def test_a_sample_of_the_first_version_stays_readable():
    """Written before response, covariance, series and validity were kept."""
    kept = load(SAMPLE)
    assert kept.is_trustworthy
    assert len(kept.actuator) == 4
    assert kept.actuator[1].magnitude.magnitude == pytest.approx(33.4e-9, rel=0.05)
    assert (kept.response, kept.line_covariance, kept.open_loop) == (None, None, None)
    again = kept.to_dict()
    assert {key: again[key] for key in DOCUMENT} == DOCUMENT


def test_what_is_written_fits_and_comes_back(calibration, tmp_path):
    document = calibration.to_dict()
    assert misfit(document) is None
    path = tmp_path / "cal.json"
    path.write_text(json.dumps(document), encoding="utf-8")
    assert load(path).to_dict() == document


def test_lines_err_together_as_their_budgets_say(calibration):
    matrix, count = calibration.line_covariance, len(calibration.actuator)
    assert matrix.shape == (2 * count, 2 * count)
    for place, entry in enumerate(calibration.actuator):
        assert matrix[place, place] == pytest.approx(entry.magnitude.relative_u**2, rel=1e-9)
        u = entry.phase.u_magnitude
        assert matrix[count + place, count + place] == pytest.approx(u**2, rel=1e-9)
    assert np.linalg.eigvalsh(matrix).min() > 0
    correlation = matrix[0, 1] / np.sqrt(matrix[0, 0] * matrix[1, 1])
    assert 0.5 < correlation < 1.0  # the drive's reading is common and leads the budget


def changed(path, value):
    document = copy.deepcopy(DOCUMENT)
    place = document
    for key in path[:-1]:
        place = place[key]
    if value is KeyError:
        del place[path[-1]]
    else:
        place[path[-1]] = value
    return document


@pytest.mark.parametrize(
    ("path", "value", "message"),
    [
        (
            ("actuator", 2, "magnitude", "u"),
            -1e-9,
            "$.actuator[2].magnitude.u must be ≥ 0, got -1e-09",
        ),
        (
            ("actuator", 0, "magnitude", "unit"),
            "nm/V",
            "$.actuator[0].magnitude.unit must be 'm/V', got \"nm/V\"",
        ),
        (("actuator", 0, "budget"), KeyError, "$.actuator[0] must have 'budget', got none"),
        (("actuator",), [], "$.actuator must have at least 1 entries, got []"),
        (
            ("chain", "wavelength", "value"),
            "red",
            '$.chain.wavelength.value must be of type number, got "red"',
        ),
        (("chain", "index", "value"), 0.9, "$.chain.index.value must be ≥ 1, got 0.9"),
        (
            ("actuator", 0, "budget", "contributions", 3, "kind"),
            "C",
            "$.actuator[0].budget.contributions[3].kind must be one of ['A', 'B'], got \"C\"",
        ),
        (
            ("recordings", 0, "sha256"),
            "12",
            '$.recordings[0].sha256 must look like ^[0-9a-f]{64}$, got "12"',
        ),
        (("reasons",), None, "$.reasons must be of type array, got null"),
        (("extremes", "low", "value"), 9.0, "the fringe's high must lie above its low, got high "),
    ],
)
def test_what_does_not_fit_is_named_with_its_place(tmp_path, path, value, message):
    file = tmp_path / "cal.json"
    file.write_text(json.dumps(changed(path, value)), encoding="utf-8")
    with pytest.raises(CalibrationFileError) as error:
        load(file)
    assert str(error.value).startswith(f"{file}: {message}")
    assert "\n" not in str(error.value)


@pytest.mark.parametrize("text", ["NaN", "Infinity", "1e999", "[" * 100_000, "", "{", "\x00"])
def test_what_is_no_json_is_refused_in_one_line(tmp_path, text):
    file = tmp_path / "cal.json"
    file.write_text(text, encoding="utf-8")
    with pytest.raises(CalibrationFileError) as error:
        load(file)
    assert str(error.value).startswith(f"{file} is no JSON document: ")
    assert "\n" not in str(error.value)


def places(value, path=()):
    yield path
    inner = value.items() if isinstance(value, dict) else enumerate(value)
    for key, item in inner:
        if isinstance(item, (dict, list)):
            yield from places(item, (*path, key))
        else:
            yield (*path, key)


PLACES = [path for path in places(DOCUMENT) if path]
ANYTHING = st.recursive(
    st.none()
    | st.booleans()
    | st.integers()
    | st.floats(allow_nan=False, allow_infinity=False)
    | st.text(max_size=8),
    lambda inner: (
        st.lists(inner, max_size=3) | st.dictionaries(st.text(max_size=4), inner, max_size=3)
    ),
    max_leaves=6,
)


@pytest.mark.slow
@settings(
    max_examples=150, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture]
)
@given(path=st.sampled_from(PLACES), value=ANYTHING | st.just(KeyError))
@example(path=("actuator", 1, "budget", "correlations"), value={"": [None]})
@example(path=("actuator", 1, "budget", "correlations"), value={"": [[1.0, 0.5], [0.5]]})
def test_any_change_is_read_or_refused_in_one_line(tmp_path, path, value):
    file = tmp_path / "fuzz.json"
    file.write_text(json.dumps(changed(path, value)), encoding="utf-8")
    found = read(file)
    if isinstance(found, str):
        assert found.startswith(f"{file}: ")
        assert "\n" not in found
    else:
        json.dumps(found.to_dict(), allow_nan=False)


def read(file):
    """The calibration, or the words it is refused with; anything else that is raised fails."""
    try:
        return load(file)
    except CalibrationFileError as error:
        return str(error)
