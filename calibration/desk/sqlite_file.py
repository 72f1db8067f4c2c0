"""The SQLite file of a ledger: found sound, opened for many writers at once, or for reading alone."""

import contextlib
import os
from pathlib import Path
from typing import TYPE_CHECKING, Any

from calibration.desk.ledger_errors import LedgerError
from calibration.desk.tables import tables

if TYPE_CHECKING:
    import sqlite3

    from sqlalchemy import Connection, Engine

__all__ = ["identity_of", "sqlite_engine"]

_BUSY_S = 60.0  # how long a writer waits for the others before it gives up
_BEGIN = b"SQLite format 3\0"
_MODE_AT, _WAL = (
    18,
    2,
)  # the file's write version: 2 with a write-ahead log (SQLite, file format 1.3)


def sqlite_engine(place: str, *, create: bool) -> "Engine":
    """Return an engine on a ledger's file.

    Parameters
    ----------
    place : str
        The file.
    create : bool
        It shall be made where there is none, and written; else it is only read where nothing can be
        written.

    Returns
    -------
    Engine
        SQLAlchemy's.

    Raises
    ------
    LedgerError
        If there is none, it is none, or what is wanted is not permitted.
    """
    from sqlalchemy import create_engine, event
    from sqlalchemy.engine import URL

    path = Path(place)
    try:
        begin = _begin_of(path, create=create)
        is_writable = _is_writable(path)
        if create and not is_writable:
            raise LedgerError(
                f"the ledger {place} cannot be written: no permission to write the file, or in its folder"
            )
        address = _address(path, begin, is_writable=is_writable)
    except OSError as error:
        raise LedgerError(f"{place}: {(error.strerror or str(error)).lower()}") from None
    if begin:
        _check_own(path, address)
    url = URL.create("sqlite", database=place)
    if not is_writable:
        engine = create_engine(url, creator=lambda: _connected(address))
        event.listen(engine, "connect", _without_transactions)
    else:
        engine = create_engine(url, connect_args={"timeout": _BUSY_S})
        event.listen(engine, "connect", _set_up)
    event.listen(engine, "begin", _begin)
    return engine


def identity_of(path: Path) -> tuple[int, int] | None:
    """Return what tells a file from another one of its name.

    Parameters
    ----------
    path : Path
        Which.

    Returns
    -------
    tuple of int and int, or None
        None where there is none, or it is not told.
    """
    with contextlib.suppress(OSError):
        status = path.stat()
        return status.st_dev, status.st_ino
    return None


def _begin_of(path: Path, *, create: bool) -> bytes:
    """Return the first bytes of the file, none of a new one."""
    if not path.exists():
        if not create:
            raise LedgerError(f"there is no ledger {path}; 'midfringe ledger add' makes one")
        if not path.parent.is_dir():
            raise LedgerError(f"the ledger {path} cannot be made: no directory {path.parent}")
        return b""
    with path.open("rb") as file:
        begin = file.read(_MODE_AT + 1)
    if begin and not begin.startswith(_BEGIN):
        raise LedgerError(f"{path} is no ledger: it is not an SQLite file")
    return begin


def _is_writable(path: Path) -> bool:
    """Return whether the file can be written, and the journal beside it."""
    return os.access(path.parent, os.W_OK | os.X_OK) and (
        not path.exists() or os.access(path, os.W_OK)
    )


def _address(path: Path, begin: bytes, *, is_writable: bool) -> str:
    """Return the URI under which the file is only read.

    A write-ahead log is read through an index in shared memory, a file beside it. Where nobody has
    made that nobody writes, and who cannot write shall leave none: the file is read as it is.
    """
    address = f"{path.resolve().as_uri()}?mode=ro"
    log, index = (path.with_name(path.name + suffix) for suffix in ("-wal", "-shm"))
    is_logged = len(begin) > _MODE_AT and begin[_MODE_AT] == _WAL
    if not is_logged or index.exists() or is_writable:
        return address
    if log.exists() and log.stat().st_size:
        raise LedgerError(
            f"the ledger {path} cannot be read whole: its last entries are in {log.name}, which is "
            "read with permission to write only; copy both"
        )
    return f"{address}&immutable=1"


def _connected(address: str) -> "sqlite3.Connection":
    import sqlite3

    return sqlite3.connect(address, uri=True, timeout=_BUSY_S, check_same_thread=False)


def _check_own(path: Path, address: str) -> None:
    """Refuse someone else's SQLite file before anything, the journal's mode included, is changed."""
    import sqlite3

    try:
        with contextlib.closing(_connected(address)) as connection:
            held = {name for (name,) in connection.execute("SELECT name FROM sqlite_master")}
    except sqlite3.Error as error:
        raise LedgerError(f"the ledger {path} cannot be opened: {error}") from None
    if held and tables().schema.name not in held:
        raise LedgerError(f"{path} is no ledger: it is an SQLite file of another program")


def _without_transactions(connection: Any, _record: object) -> None:  # noqa: ANN401  # sqlite3's
    connection.isolation_level = None  # transactions begin as `_begin` says, not as sqlite3 guesses


def _set_up(connection: Any, record: object) -> None:  # noqa: ANN401  # sqlite3's connection
    _without_transactions(connection, record)
    cursor = connection.cursor()
    cursor.execute(f"PRAGMA busy_timeout={round(1000 * _BUSY_S)}")
    cursor.execute("PRAGMA foreign_keys=ON")
    cursor.execute("PRAGMA synchronous=FULL")
    if cursor.execute("PRAGMA journal_mode").fetchone()[0] != "wal":
        _set_wal(cursor)
    cursor.close()


def _set_wal(cursor: Any) -> None:  # noqa: ANN401  # sqlite3's cursor
    """Change to the write-ahead log; where others are at it too the busy handler is not asked."""
    import sqlite3
    import time

    begun_s = time.monotonic()
    while True:
        try:
            cursor.execute("PRAGMA journal_mode=WAL")
        except sqlite3.OperationalError as error:
            if "locked" not in str(error) or time.monotonic() - begun_s > _BUSY_S:
                raise
            time.sleep(0.01)
        else:
            return


def _begin(connection: "Connection") -> None:
    is_reader = connection.get_execution_options().get("is_reader", False)
    connection.exec_driver_sql("BEGIN" if is_reader else "BEGIN IMMEDIATE")
