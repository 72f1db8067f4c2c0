"""The tables of a ledger: calibrations, their actuator coefficients, and line results."""

from dataclasses import dataclass
from functools import cache
from typing import TYPE_CHECKING

from metro.extras import require

if TYPE_CHECKING:
    from sqlalchemy import MetaData, Table

__all__ = ["VERSION", "Tables", "tables"]

VERSION = 1
"""Of the schema: a ledger of a newer one is refused by name, older ones stay readable."""


@dataclass(frozen=True, slots=True)
class Tables:
    """The tables of a ledger.

    Parameters
    ----------
    metadata : MetaData
        Holds them all.
    schema : Table
        One row: the version of the schema.
    calibrations : Table
        One row a calibration file, with its whole text.
    actuators : Table
        One row a line of a calibration.
    lines : Table
        One row a line result.
    """

    metadata: "MetaData"
    schema: "Table"
    calibrations: "Table"
    actuators: "Table"
    lines: "Table"

    @property
    def of_entries(self) -> tuple["Table", "Table"]:
        """Those that say whether a ledger holds anything."""
        return self.calibrations, self.lines


@cache
def tables() -> Tables:
    """Return the tables; times are UTC, ISO 8601 to the microsecond, and so sort as text.

    Returns
    -------
    Tables
        The same object each time.

    Raises
    ------
    MissingExtraError
        If SQLAlchemy is not installed.
    """
    require("sqlalchemy", "ledger", "a ledger")
    from sqlalchemy import MetaData

    metadata = MetaData()
    return Tables(
        metadata,
        _schema(metadata),
        _calibrations(metadata),
        _actuators(metadata),
        _lines(metadata),
    )


def _schema(metadata: "MetaData") -> "Table":
    from sqlalchemy import Column, Integer, Table

    return Table("midfringe_ledger", metadata, Column("version", Integer, primary_key=True))


def _calibrations(metadata: "MetaData") -> "Table":
    from sqlalchemy import Boolean, Column, Double, Integer, String, Table, Text, UniqueConstraint

    return Table(
        "calibrations",
        metadata,
        Column("id", Integer, primary_key=True),
        Column("bench", String(200), nullable=False),
        Column("created", String(32), nullable=False),
        Column("added", String(32), nullable=False),
        Column("sha256", String(64), nullable=False),
        Column("file", Text, nullable=False),
        Column("software", String(64), nullable=False),
        Column("slope", Double, nullable=False),  # V/m
        Column("slope_u", Double),
        Column("temperature", Double),  # K
        Column("temperature_u", Double),
        Column("trustworthy", Boolean, nullable=False),
        Column("document", Text, nullable=False),
        UniqueConstraint("bench", "sha256"),
    )


def _actuators(metadata: "MetaData") -> "Table":
    from sqlalchemy import Column, Double, ForeignKey, Integer, Table

    return Table(
        "actuators",
        metadata,
        Column("calibration", Integer, ForeignKey("calibrations.id"), primary_key=True),
        Column("place", Integer, primary_key=True),
        Column("frequency", Double, nullable=False),  # Hz
        Column("magnitude", Double, nullable=False),  # m/V
        Column("magnitude_u", Double),
        Column("phase", Double),  # rad
        Column("phase_u", Double),
    )


def _lines(metadata: "MetaData") -> "Table":
    from sqlalchemy import (
        BigInteger,
        Boolean,
        Column,
        Double,
        Index,
        Integer,
        String,
        Table,
        Text,
        UniqueConstraint,
    )

    number = BigInteger().with_variant(
        Integer, "sqlite"
    )  # a month of seconds fills 32 bits in time
    return Table(
        "line_results",
        metadata,
        Column("id", number, primary_key=True, autoincrement=True),
        Column("bench", String(200), nullable=False),
        Column("time", String(32), nullable=False),
        Column("line", Double, nullable=False),  # Hz
        Column("unit", String(32), nullable=False),
        Column("value", Double, nullable=False),
        Column("u", Double),
        Column("dof", Double),
        Column("is_ratio", Boolean, nullable=False),
        Column("phase", Double),  # rad
        Column("phase_u", Double),
        Column("noise_density", Double),
        Column("snr", Double),
        Column("temperature", Double),  # K
        Column("duration", Double),  # s
        Column("trustworthy", Boolean, nullable=False),
        Column("reasons", Text, nullable=False),
        Column("source", Text, nullable=False),
        Column("sha256", String(64)),  # of the file it came from; none from a library call
        UniqueConstraint("bench", "line", "sha256"),
        Index("line_results_in_time", "bench", "line", "time"),
    )
