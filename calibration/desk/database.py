"""The database of a ledger: opened, its schema made or checked, its transactions."""

import contextlib
import logging
from collections.abc import Iterator
from pathlib import Path
from typing import TYPE_CHECKING, Any

from calibration.desk.ledger_errors import LedgerError, LedgerFailedError
from calibration.desk.sqlite_file import identity_of, sqlite_engine
from calibration.desk.tables import VERSION, tables
from metro.extras import require

if TYPE_CHECKING:
    from sqlalchemy import Connection, Engine

__all__ = ["Database"]

_log = logging.getLogger(__name__)

_LOCK = 0x6D66_6C64  # "mfld": any number, the same for everyone who makes a schema


class Database:
    """A ledger's SQLite file or PostgreSQL database.

    Writers never lose an entry to one another: on SQLite each transaction takes the write lock when
    it begins and waits for it, readers go on meanwhile (write-ahead log), and a commit is on the disk
    when it returns. A file that is gone by then, moved or deleted, is made anew in its place.

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
        self._identity = self._identified()

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
        with self._failing():
            while True:
                with self._engine.begin() as connection:
                    # Asked with the write lock, under which alone a ledger is deleted.
                    if self._identified() == self._identity:
                        yield connection
                        return
                self._renew()

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
        if self._file is None or self._was_there:
            self.close()
            return
        with self._failing(), self._engine.begin() as connection:
            if self._identified() == self._identity and self._is_empty(connection):
                with contextlib.suppress(PermissionError):  # of a system that keeps open files
                    for suffix in ("", "-wal", "-shm"):
                        self._file.with_name(self._file.name + suffix).unlink(missing_ok=True)
        self.close()

    def _identified(self) -> tuple[int, int] | None:
        return None if self._file is None else identity_of(self._file)

    def _renew(self) -> None:
        """Make the ledger again where its file is gone or another one."""
        _log.warning("the ledger %s is gone; a new one is made in its place", self.name)
        self.close()
        self._check_or_make(create=True)
        self._identity = self._identified()

    @staticmethod
    def _is_empty(connection: "Connection") -> bool:
        from sqlalchemy import select

        held = (connection.execute(select(t.c.id).limit(1)) for t in tables().of_entries)
        return all(rows.first() is None for rows in held)

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
        return sqlite_engine(place, create=create)
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


def _reason(error: Any) -> str:  # noqa: ANN401  # SQLAlchemy's wrapper of the driver's error
    text = str(error.orig).strip() or type(error.orig).__name__
    return " ".join(text.split())
