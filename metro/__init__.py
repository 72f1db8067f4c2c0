"""Unit-safe interferometer core: strain, displacement, phase, power, voltage, counts.

Names load on first use (PEP 562), so that ``import metro.kernel`` costs neither numpy nor pint.
"""

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from metro.bench import Bench as Bench
    from metro.bench import load_bench as load_bench
    from metro.errors import MetroError as MetroError
    from metro.measured import Measured as Measured
    from metro.units import Quantity as Quantity

_HOMES = {
    "load_bench": "metro.bench",
    "Quantity": "metro.units",
    "Measured": "metro.measured",
    "Bench": "metro.bench",
    "MetroError": "metro.errors",
}

__all__ = ["Bench", "Measured", "MetroError", "Quantity", "load_bench"]


def __getattr__(name: str) -> Any:  # noqa: ANN401  # PEP 562: any public name of the package
    if name == "__version__":
        from importlib.metadata import version

        return version("midfringe")
    if name in _HOMES:
        return getattr(import_module(_HOMES[name]), name)
    raise AttributeError(f"module 'metro' has no attribute {name!r}")


def __dir__() -> list[str]:
    return sorted([*__all__, "__version__"])
