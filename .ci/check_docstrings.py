"""Validate the docstring of every public name with numpydoc, imported so that dataclasses are seen.

The checks are those of ``[tool.numpydoc_validation]`` in pyproject.toml. numpydoc's own lint reads
the source only: it takes the parameters of a dataclass for unknown and a property for a function.
A name that its package publishes has all sections; inside a package a section may be left out
where the summary says it all, but those that are there are complete and true.
"""

import inspect
import pkgutil
import sys
import tomllib
from collections.abc import Iterator
from enum import Enum
from importlib import import_module
from pathlib import Path
from typing import Any

from numpydoc.validate import validate

PACKAGES = ("metro", "firmware_bridge", "calibration")
SECTIONS = {"PR01": "Parameters", "RT01": "Returns"}


def public_names() -> Iterator[tuple[str, Any]]:
    """Yield what is in the ``__all__`` of each module, and the public methods of classes there."""
    for package in PACKAGES:
        found = pkgutil.walk_packages(import_module(package).__path__, f"{package}.")
        for name in [package, *(module.name for module in found)]:
            module = import_module(name)
            for public in getattr(module, "__all__", ()):
                item = getattr(module, public)
                if getattr(item, "__module__", None) == name and callable(item):
                    yield f"{name}.{public}", item
                    if inspect.isclass(item):
                        yield from public_methods(item, f"{name}.{public}")


def public_methods(item: type, name: str) -> Iterator[tuple[str, Any]]:
    """Yield the functions that a class itself defines and that have public names."""
    for key, value in vars(item).items():
        if not key.startswith("_") and inspect.isfunction(value):
            yield f"{name}.{key}", value


def published() -> set[int]:
    """Return the identities of what the packages themselves publish."""
    modules = map(import_module, PACKAGES)
    return {id(getattr(module, name)) for module in modules for name in module.__all__}


def is_exempt(item: Any, code: str, public: set[int]) -> bool:  # noqa: ANN401  # any public name
    """Tell whether a section may be missing: within a package, and where attributes stand for it."""
    if code not in SECTIONS:
        return False
    text = inspect.getdoc(item) or ""
    if inspect.isclass(item) and (issubclass(item, Enum) or "\nAttributes\n---" in text):
        return True
    return id(item) not in public and f"\n{SECTIONS[code]}\n---" not in text


def main() -> int:
    """Print what breaks a rule and return the exit code."""
    settings = tomllib.loads(Path("pyproject.toml").read_text(encoding="utf-8"))
    checks = set(settings["tool"]["numpydoc_validation"]["checks"])
    public, broken, count = published(), [], 0
    for name, item in public_names():
        count += 1
        result = validate(name)
        broken += [
            f"{result['file']}:{result['file_line']}: {name}: {code} {text}"
            for code, text in result["errors"]
            if code in checks and not is_exempt(item, code, public)
        ]
    sys.stdout.write(("\n".join(broken) or f"{count} docstrings keep the rules") + "\n")
    return int(bool(broken))


if __name__ == "__main__":
    sys.exit(main())
