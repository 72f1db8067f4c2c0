"""What the program says on standard error while it works: the log, as loud as asked."""

import logging
import sys

__all__ = ["set_up_logging"]


class _StandardError(logging.Handler):
    """Writes to whatever standard error is at the time, one line a record."""

    def emit(self, record: logging.LogRecord) -> None:
        """Write one record.

        Parameters
        ----------
        record : logging.LogRecord
            What is logged.
        """
        try:
            sys.stderr.write(
                f"{record.levelname.lower()}: {' '.join(self.format(record).split())}\n"
            )
            sys.stderr.flush()
        except (OSError, ValueError):
            return  # nobody listens


def set_up_logging(level: int = logging.WARNING) -> None:
    """Let the log go to standard error from a level on.

    Parameters
    ----------
    level : int
        ``logging.ERROR`` when quiet, ``logging.INFO`` when verbose.
    """
    root = logging.getLogger()
    if not any(isinstance(handler, _StandardError) for handler in root.handlers):
        root.addHandler(_StandardError())
    root.setLevel(level)
    # Warnings of libraries are for whoever asked for more; they are not ours to show to all.
    logging.captureWarnings(capture=True)
    logging.getLogger("py.warnings").setLevel(
        logging.WARNING if level <= logging.INFO else logging.ERROR
    )
