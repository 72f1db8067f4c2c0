"""The JSON Schema of the calibration file, and what in a document breaks it."""

import json
from collections.abc import Mapping
from functools import cache
from importlib.resources import files
from typing import TYPE_CHECKING, Any

from metro.extras import require

if TYPE_CHECKING:
    from jsonschema.exceptions import ValidationError

__all__ = ["calibration_schema", "misfit"]

_SHOWN = 60  # characters of a value in a message


@cache
def calibration_schema() -> dict[str, Any]:
    """Return the JSON Schema (draft 2020-12) of a calibration file, format version 1."""
    text = files("calibration").joinpath("calibration.schema.json").read_text(encoding="utf-8")
    return dict(json.loads(text))


def misfit(document: Mapping[str, Any]) -> str | None:
    """Return what in a calibration breaks the schema: the place, the rule and the value.

    Parameters
    ----------
    document : mapping
        As the file holds it.

    Returns
    -------
    str or None
        One line; None where it fits.

    Raises
    ------
    MissingExtraError
        If jsonschema is not installed.
    """
    jsonschema = require("jsonschema", "bench", "checking a calibration file")
    validator = jsonschema.Draft202012Validator(calibration_schema())
    errors = sorted(validator.iter_errors(document), key=lambda error: list(map(str, error.path)))
    return f"{errors[0].json_path} {_rule(errors[0])}" if errors else None


def _rule(error: "ValidationError") -> str:
    """Return a broken rule in words, with the value that breaks it."""
    wanted: Any = error.validator_value
    if error.validator == "required" and isinstance(error.instance, dict):
        missing = next(key for key in wanted if key not in error.instance)
        return f"must have {missing!r}, got none"
    if error.validator == "type":
        wanted = " or ".join([wanted] if isinstance(wanted, str) else wanted)
    words = {
        "type": f"must be of type {wanted}",
        "const": f"must be {wanted!r}",
        "minimum": f"must be ≥ {wanted}",
        "exclusiveMinimum": f"must be > {wanted}",
        "minItems": f"must have at least {wanted} entries",
        "minLength": "must not be empty",
        "pattern": f"must look like {wanted}",
        "enum": f"must be one of {wanted}",
    }
    rule = words.get(str(error.validator), f"breaks {error.validator} {wanted!r}")
    shown = json.dumps(error.instance, ensure_ascii=False, default=str)
    return f"{rule}, got {shown if len(shown) <= _SHOWN else shown[:_SHOWN] + '…'}"
