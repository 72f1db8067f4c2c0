"""Serial bytes to recordings: frames, recordings, ports and a simulated board.

Names load on first use (PEP 562).
"""

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from firmware_bridge.errors import BridgeError as BridgeError

_HOMES = {
    "BridgeError": "firmware_bridge.errors",
}

__all__ = ["BridgeError"]


def __getattr__(name: str) -> Any:  # noqa: ANN401  # PEP 562: any public name of the package
    if name in _HOMES:
        return getattr(import_module(_HOMES[name]), name)
    raise AttributeError(f"module 'firmware_bridge' has no attribute {name!r}")


def __dir__() -> list[str]:
    return sorted(__all__)
