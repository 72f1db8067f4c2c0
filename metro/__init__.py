"""Unit-safe interferometer core: strain, displacement, phase, power, voltage, counts.

Names load on first use (PEP 562), so that ``import metro.kernel`` costs neither numpy nor pint.
"""

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from metro.air import refractive_index as refractive_index
    from metro.bench import Bench as Bench
    from metro.bench import load_bench as load_bench
    from metro.chain import Chain as Chain
    from metro.errors import MetroError as MetroError
    from metro.fringe import displacement as displacement
    from metro.fringe import fringes as fringes
    from metro.fringe import phase as phase
    from metro.fringe import vacuum_wavelength as vacuum_wavelength
    from metro.measured import Measured as Measured
    from metro.strain import antenna_response as antenna_response
    from metro.strain import arm_displacement as arm_displacement
    from metro.strain import arm_response as arm_response
    from metro.strain import arm_strain as arm_strain
    from metro.strain import one_arm_displacement as one_arm_displacement
    from metro.units import Quantity as Quantity

_HOMES = {
    "refractive_index": "metro.air",
    "Bench": "metro.bench",
    "load_bench": "metro.bench",
    "Chain": "metro.chain",
    "MetroError": "metro.errors",
    "displacement": "metro.fringe",
    "fringes": "metro.fringe",
    "phase": "metro.fringe",
    "vacuum_wavelength": "metro.fringe",
    "Measured": "metro.measured",
    "antenna_response": "metro.strain",
    "arm_displacement": "metro.strain",
    "arm_response": "metro.strain",
    "arm_strain": "metro.strain",
    "one_arm_displacement": "metro.strain",
    "Quantity": "metro.units",
}

__all__ = [
    "Bench",
    "Chain",
    "Measured",
    "MetroError",
    "Quantity",
    "antenna_response",
    "arm_displacement",
    "arm_response",
    "arm_strain",
    "displacement",
    "fringes",
    "load_bench",
    "one_arm_displacement",
    "phase",
    "refractive_index",
    "vacuum_wavelength",
]


def __getattr__(name: str) -> Any:  # noqa: ANN401  # PEP 562: any public name of the package
    if name == "__version__":
        from importlib.metadata import version

        return version("midfringe")
    if name in _HOMES:
        return getattr(import_module(_HOMES[name]), name)
    raise AttributeError(f"module 'metro' has no attribute {name!r}")


def __dir__() -> list[str]:
    return sorted([*__all__, "__version__"])
