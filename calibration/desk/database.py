"""The database of a ledger: opened, its schema made or checked, its transactions."""

import contextlib
from collections.abc import Iterator
from pathlib import Path
from typing import TYPE_CHECKING, Any

from calibration.desk.ledger_errors import LedgerError, LedgerFailedError
from calibration.desk.tables import VERSION, tables
from metro.extras import require

if TYPE_CHECKING:
    from sqlalchemy import Connection, Engine

__all__ = ["Database"]

_BUSY_S = 60.0  # how long a writer waits for the others before it gives up
_SQLITE_BEGIN = b"SQLite format 3\0"
_LOCK = 0x6D66_6C64  # "mfld": any number, the same for everyone who makes a schema


class Database:
    """A ledger's SQLite file or PostgreSQL database.

    Writers never lose an entry to one another: on SQLite each transaction takes the write lock when
    it begins and waits for it, readers go on meanwhile (write-ahead log), and a commit is on the disk
    when it returns.

    Parameters
    ----------
    place : str
        A file, or a URL that begins with ``postgresql://``.
    create : bool
        Make a ledger that is not there yet.

    Raises
    ------
    LedgerError
        If it cannot be opened, is no ledger, or is of a newer version.
    MissingExtraError
        If SQLAlchemy, or psycopg for PostgreSQL, is not installed.
    """

    def __init__(self, place: str, *, create: bool) -> None:
        require("sqlalchemy", "ledger", "a ledger")
        self._file = None if "://" in place else Path(place)
        self._was_there = self._file is None or self._file.exists()
        self._engine = _engine(place, create=create)
        self._readers = self._engine.execution_options(is_reader=True)
        self.name = self._engine.url.render_as_string(hide_password=True)
        if self._engine.dialect.name == "sqlite":
            self.name = str(self._engine.url.database)
        with self._failing_at_start():
            self._check_or_make(create=create)

    @contextlib.contextmanager
    def writing(self) -> Iterator["Connection"]:
        """Yield a connection in a transaction that is committed at the end.

        Yields
        ------
        Connection
            SQLAlchemy's.

        Raises
        ------
        LedgerFailedError
            If the database fails; nothing of this transaction is kept then.
        """
        with self._failing(), self._engine.begin() as connection:
            yield connection

    @contextlib.contextmanager
    def reading(self) -> Iterator["Connection"]:
        """Yield a connection that only reads: one moment's state, whoever writes meanwhile.

        Yields
        ------
        Connection
            SQLAlchemy's.

        Raises
        ------
        LedgerFailedError
            If the database fails.
        """
        with self._failing(), self._readers.begin() as connection:
            yield connection

    def close(self) -> None:
        """Close every connection."""
        self._engine.dispose()

    def discard_if_new(self) -> None:
        """Close, and delete a file that this opening has made: nothing came of what it was for."""
        self.close()
        if self._file is None or self._was_there:
            return
        for suffix in ("", "-wal", "-shm"):
            self._file.with_name(self._file.name + suffix).unlink(missing_ok=True)

    @contextlib.contextmanager
    def _failing(self) -> Iterator[None]:
        from sqlalchemy.exc import DBAPIError

        try:
            yield
        except DBAPIError as error:
            raise LedgerFailedError(f"the ledger {self.name} failed: {_reason(error)}") from error

    @contextlib.contextmanager
    def _failing_at_start(self) -> Iterator[None]:
        from sqlalchemy.exc import DBAPIError

        try:
            yield
        except DBAPIError as error:
            raise LedgerError(
                f"the ledger {self.name} cannot be opened: {_reason(error)}"
            ) from error

    def _check_or_make(self, *, create: bool) -> None:
        from sqlalchemy import inspect

        schema = tables().schema
        with self._readers.begin() as connection:
            if inspect(connection).has_table(schema.name):
                self._check(connection)
                return
        if not create:
            raise LedgerError(f"{self.name} holds no ledger; 'midfringe ledger add' makes one")
        with self._engine.begin() as connection:
            if connection.dialect.name == "postgresql":
                connection.exec_driver_sql(f"SELECT pg_advisory_xact_lock({_LOCK})")
            if not inspect(connection).has_table(schema.name):  # else another was quicker
                tables().metadata.create_all(connection)
                connection.execute(schema.insert().values(version=VERSION))

    def _check(self, connection: "Connection") -> None:
        from sqlalchemy import select

        version = connection.execute(select(tables().schema.c.version)).scalar()
        if not isinstance(version, int) or version < 1:
            raise LedgerError(f"the ledger {self.name} must have a version from 1, got {version!r}")
        if version > VERSION:
            raise LedgerError(
                f"the ledger {self.name} has version {version}; this program reads up to {VERSION}"
            )


def _engine(place: str, *, create: bool) -> "Engine":
    from sqlalchemy import create_engine, make_url
    from sqlalchemy.engine import URL
    from sqlalchemy.exc import ArgumentError

    if "://" not in place:
        return _sqlite(_checked_file(place, create=create))
    try:
        url: URL = make_url(place)
    except (ArgumentError, ValueError):
        url = URL.create("unknown")
    if url.get_backend_name() not in {"postgresql", "postgres"}:
        raise LedgerError(
            "a ledger is a file, or a URL such as postgresql://user@host/database, got "
            f"{place.partition('://')[0]}://…"
        )
    require("psycopg", "ledger", "a ledger in PostgreSQL")
    return create_engine(url.set(drivername="postgresql+psycopg"), pool_pre_ping=True)


def _checked_file(place: str, *, create: bool) -> Path:
    path = Path(place)
    try:
        if path.exists():
            with path.open("rb") as file:
                begin = file.read(len(_SQLITE_BEGIN))
            if begin not in {b"", _SQLITE_BEGIN}:
                raise LedgerError(f"{place} is no ledger: it is not an SQLite file")
            if begin:
                _check_own(path)
        elif not create:
            raise LedgerError(f"there is no ledger {place}; 'midfringe ledger add' makes one")
        elif not path.parent.is_dir():
            raise LedgerError(f"the ledger {place} cannot be made: no directory {path.parent}")
    except OSError as error:
        raise LedgerError(f"{place}: {(error.strerror or str(error)).lower()}") from None
    return path


def _check_own(path: Path) -> None:
    """Refuse someone else's SQLite file before anything, the journal's mode included, is changed."""
    import sqlite3

    try:
        with contextlib.closing(
            sqlite3.connect(f"{path.resolve().as_uri()}?mode=ro", uri=True, timeout=_BUSY_S)
        ) as connection:
            held = {name for (name,) in connection.execute("SELECT name FROM sqlite_master")}
    except sqlite3.Error as error:
        raise LedgerError(f"the ledger {path} cannot be opened: {error}") from None
    if held and tables().schema.name not in held:
        raise LedgerError(f"{path} is no ledger: it is an SQLite file of another program")


def _sqlite(path: Path) -> "Engine":
    from sqlalchemy import create_engine, event
    from sqlalchemy.engine import URL

    engine = create_engine(
        URL.create("sqlite", database=str(path)), connect_args={"timeout": _BUSY_S}
    )
    event.listen(engine, "connect", _set_up)
    event.listen(engine, "begin", _begin)
    return engine


def _set_up(connection: Any, _record: object) -> None:  # noqa: ANN401  # sqlite3's connection
    connection.isolation_level = None  # transactions begin as `_begin` says, not as sqlite3 guesses
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


def _reason(error: Any) -> str:  # noqa: ANN401  # SQLAlchemy's wrapper of the driver's error
    text = str(error.orig).strip() or type(error.orig).__name__
    return " ".join(text.split())
