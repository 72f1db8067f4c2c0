"""Optional packages: loaded where they are needed, or named with the line that installs them."""

from importlib import import_module
from types import ModuleType

from metro.errors import MetroError

__all__ = ["MissingExtraError", "require"]


class MissingExtraError(MetroError):
    """An optional package is not installed; the message holds the exact command to run."""


def require(module: str, extra: str, what: str) -> ModuleType:
    """Return an optional package's module.

    Parameters
    ----------
    module : str
        Such as ``"scipy.optimize"``.
    extra : str
        The extra of midfringe that installs it, such as ``"bench"``.
    what : str
        What needs it, for the message.

    Returns
    -------
    module
        Loaded.

    Raises
    ------
    MissingExtraError
        If it is not installed.
    """
    try:
        return import_module(module)
    except ImportError:
        package = module.partition(".")[0]
        raise MissingExtraError(
            f"{what}: needs {package}; run: pip install 'midfringe[{extra}]'"
        ) from None
