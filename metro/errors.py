"""The errors of the packages: one root, one base class a package, each with its exit code."""

__all__ = ["MetroError", "MidfringeError"]


class MidfringeError(Exception):
    """Root of every error that the program raises on purpose.

    The message is one line: what, the rule, the value given, where. ``exit_code`` is what the
    command line ends with: 2 for wrong input, 3 where a device or file failed midway.
    """

    exit_code = 2


class MetroError(MidfringeError, ValueError):
    """Base of the errors of ``metro``: a value that breaks a rule."""
