"""An SQLite file of another program is refused as a ledger and stays as it was, byte for byte."""

import sqlite3
from contextlib import closing
from pathlib import Path

import pytest

from calibration.desk.database import Database
from calibration.desk.ledger_errors import LedgerError


@pytest.mark.parametrize("create", [True, False])
def test_another_programs_file_is_left_alone(tmp_path: Path, create: bool) -> None:
    pytest.importorskip("sqlalchemy")
    path = tmp_path / "foreign.sqlite"
    with closing(sqlite3.connect(path)) as connection:
        connection.execute("CREATE TABLE parts (name TEXT)")
        connection.commit()
    before = path.read_bytes()
    with pytest.raises(LedgerError, match="SQLite file of another program"):
        Database(str(path), create=create)
    assert path.read_bytes() == before
    assert [file.name for file in tmp_path.iterdir()] == ["foreign.sqlite"]
