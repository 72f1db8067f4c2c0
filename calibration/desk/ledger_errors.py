"""The errors of the ledger: what it holds, what was asked of it, and a database that failed."""

from calibration.errors import CalibrationError

__all__ = ["LedgerError", "LedgerFailedError"]


class LedgerError(CalibrationError):
    """A ledger, or an entry for it, that breaks a rule."""


class LedgerFailedError(LedgerError):
    """The database failed midway; what had been added before is kept."""

    exit_code = 3
