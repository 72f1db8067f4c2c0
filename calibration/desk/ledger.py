"""The ledger: calibrations and periodic line results, kept in one database for years."""

import time
from collections.abc import Iterable
from types import TracebackType
from typing import TYPE_CHECKING, Any, Self

from calibration.desk.calibration_entry import CalibrationEntry
from calibration.desk.database import Database
from calibration.desk.ledger_errors import LedgerError
from calibration.desk.line_entry import LineEntry
from calibration.desk.tables import tables
from calibration.desk.utc import iso_of

if TYPE_CHECKING:
    from sqlalchemy import ColumnElement, Table

__all__ = ["Ledger", "calibrations_if_any"]

_SAME_LINE = 1e-3  # relative: a free fit of a line moves by the clock's error, at most a percent


class Ledger:
    """A ledger that is open; a context manager.

    Parameters
    ----------
    place : str
        An SQLite file, or ``postgresql://user@host/database``.
    create : bool
        Make it where there is none.

    Raises
    ------
    LedgerError
        If it cannot be opened, is no ledger, or is of a newer version.
    MissingExtraError
        If SQLAlchemy, or psycopg for PostgreSQL, is not installed.
    """

    def __init__(self, place: str, *, create: bool = True) -> None:
        self._database = Database(str(place), create=create)

    @property
    def name(self) -> str:
        """The ledger's place, without a password."""
        return self._database.name

    def add_calibration(self, entry: CalibrationEntry) -> bool:
        """Add a calibration.

        Parameters
        ----------
        entry : CalibrationEntry
            From :meth:`CalibrationEntry.of_file`.

        Returns
        -------
        bool
            False where the ledger holds this very file already; nothing is added then.

        Raises
        ------
        LedgerFailedError
            If the database fails; nothing is added then.
        """
        from sqlalchemy import insert, select

        table, row = tables().calibrations, entry.to_row() | {"added": iso_of(time.time())}
        with self._database.writing() as connection:
            same = (table.c.bench == row["bench"]) & (table.c.sha256 == row["sha256"])
            if connection.execute(select(table.c.id).where(same)).first() is not None:
                return False
            result = connection.execute(insert(table).values(row).returning(table.c.id))
            lines = entry.actuator_rows(int(result.scalar_one()))
            if lines:
                connection.execute(insert(tables().actuators), lines)
        return True

    def add_line_result(self, entry: LineEntry) -> bool:
        """Add one line result; it is on the disk when this returns.

        Parameters
        ----------
        entry : LineEntry
            What was measured.

        Returns
        -------
        bool
            False where the ledger holds this line of this very file already.

        Raises
        ------
        LedgerFailedError
            If the database fails; nothing is added then.
        """
        return bool(self.add_line_results([entry]))

    def add_line_results(self, entries: Iterable[LineEntry]) -> int:
        """Add line results, all or none.

        Parameters
        ----------
        entries : iterable of LineEntry
            What was measured.

        Returns
        -------
        int
            How many were added; those of a file that the ledger holds already are not.

        Raises
        ------
        LedgerFailedError
            If the database fails; nothing is added then.
        """
        from sqlalchemy import insert, select

        table = tables().lines
        rows = [entry.to_row() for entry in entries]
        with self._database.writing() as connection:
            hashes = {row["sha256"] for row in rows} - {None}
            known = select(table.c.bench, table.c.line, table.c.sha256).where(
                table.c.sha256.in_(hashes)
            )
            held = {tuple(row) for row in connection.execute(known)} if hashes else set()
            new = [row for row in rows if (row["bench"], row["line"], row["sha256"]) not in held]
            if new:
                connection.execute(insert(table), new)
        return len(new)

    def calibrations(
        self, *, bench: str | None = None, since: str | None = None, until: str | None = None
    ) -> list[CalibrationEntry]:
        """Return calibrations in the order they were made.

        Parameters
        ----------
        bench : str, optional
            Only of this bench.
        since, until : str, optional
            Made from and before these moments, as the ledger keeps them.

        Returns
        -------
        list of CalibrationEntry
            With everything that their files hold.
        """
        table = tables().calibrations
        return [
            CalibrationEntry.from_row(row)
            for row in self._rows(table, "created", bench=bench, since=since, until=until)
        ]

    def line_results(
        self,
        *,
        line_hz: float | None = None,
        bench: str | None = None,
        since: str | None = None,
        until: str | None = None,
    ) -> list[LineEntry]:
        """Return line results in the order of time.

        Parameters
        ----------
        line_hz : float, optional
            Only of this line [Hz], to a part in a thousand.
        bench : str, optional
            Only of this bench.
        since, until : str, optional
            From and before these moments, as the ledger keeps them.

        Returns
        -------
        list of LineEntry
            Distrusted ones too.
        """
        table = tables().lines
        where = []
        if line_hz is not None:
            reach = _SAME_LINE * line_hz
            where = [table.c.line.between(line_hz - reach, line_hz + reach)]
        rows = self._rows(table, "time", where, bench=bench, since=since, until=until)
        return [LineEntry.from_row(row) for row in rows]

    def benches(self) -> list[str]:
        """Return the names of the benches that have entries, in order."""
        from sqlalchemy import select, union

        both = union(*(select(t.c.bench) for t in tables().of_entries))
        with self._database.reading() as connection:
            return sorted(row[0] for row in connection.execute(both))

    def the_bench(self, named: str | None) -> str:
        """Return the bench that is meant: the one named, or the only one.

        Parameters
        ----------
        named : str or None
            As given.

        Returns
        -------
        str
            Its name.

        Raises
        ------
        LedgerError
            If it has no entry, or none was named and there are several.
        """
        known = self.benches()
        if not known:
            raise LedgerError(f"the ledger {self.name} is empty")
        if named is None and len(known) == 1:
            return known[0]
        if named not in known:
            what = "several benches, name one" if named is None else f"no bench {named!r}"
            raise LedgerError(f"the ledger {self.name} has {what}: {', '.join(known)}")
        return named

    def in_force(self, bench: str, at: str | None = None) -> CalibrationEntry | None:
        """Return the calibration in force: the last one made before a moment.

        Parameters
        ----------
        bench : str
            Of which bench.
        at : str, optional
            The moment, as the ledger keeps it; by default now.

        Returns
        -------
        CalibrationEntry or None
            None where there is none.
        """
        rows = self._rows(
            tables().calibrations, "created", bench=bench, since=None, until=at, newest=True
        )
        return CalibrationEntry.from_row(rows[0]) if rows else None

    def close(self) -> None:
        """Close the database."""
        self._database.close()

    def discard_if_new(self) -> None:
        """Close; delete the file of a ledger that was made just now and is empty still."""
        self._database.discard_if_new()

    def __enter__(self) -> Self:
        return self

    def __exit__(
        self,
        kind: type[BaseException] | None,
        error: BaseException | None,
        trace: TracebackType | None,
    ) -> None:
        self.close()

    def _rows(
        self,
        table: "Table",
        moment: str,
        where: "Iterable[ColumnElement[bool]]" = (),
        *,
        bench: str | None,
        since: str | None,
        until: str | None,
        newest: bool = False,
    ) -> list[Any]:
        """Return rows in the order of time, or the newest one alone."""
        from sqlalchemy import select

        column = table.c[moment]
        wanted = list(where)
        if bench is not None:
            wanted.append(table.c.bench == bench)
        if since is not None:
            wanted.append(column >= since)
        if until is not None:
            wanted.append(column < until)
        order = select(table).where(*wanted).order_by(column, table.c.id)
        if newest:
            last = (column.desc(), table.c.id.desc())
            order = select(table).where(*wanted).order_by(*last).limit(1)
        with self._database.reading() as connection:
            return list(connection.execute(order).mappings())


def calibrations_if_any(place: str, bench: str) -> list[CalibrationEntry]:
    """Return the calibrations of a bench, none where there is no ledger yet."""
    try:
        with Ledger(place, create=False) as kept:
            return kept.calibrations(bench=bench)
    except LedgerError:
        return []  # whoever opens it to write says what is wrong with it
