"""At the desk: the ledger of calibrations and line results, its charts, and unattended logging.

Names load on first use (PEP 562).
"""

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from calibration.desk.ledger import Ledger as Ledger
    from calibration.desk.ledger_errors import LedgerError as LedgerError
    from calibration.desk.line_chart import LineChart as LineChart
    from calibration.desk.line_chart import chart_line as chart_line
    from calibration.desk.line_entry import LineEntry as LineEntry

_HOMES = {
    "Ledger": "calibration.desk.ledger",
    "LedgerError": "calibration.desk.ledger_errors",
    "LineChart": "calibration.desk.line_chart",
    "LineEntry": "calibration.desk.line_entry",
    "chart_line": "calibration.desk.line_chart",
}

__all__ = ["Ledger", "LedgerError", "LineChart", "LineEntry", "chart_line"]


def __getattr__(name: str) -> Any:  # noqa: ANN401  # PEP 562: any public name of the package
    if name in _HOMES:
        return getattr(import_module(_HOMES[name]), name)
    raise AttributeError(f"module 'calibration.desk' has no attribute {name!r}")


def __dir__() -> list[str]:
    return sorted(__all__)
