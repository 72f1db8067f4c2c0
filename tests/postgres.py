"""A PostgreSQL database for tests, if there is one: ``$MIDFRINGE_TEST_POSTGRES`` is its URL."""

import os
import secrets
from contextlib import contextmanager

import pytest

__all__ = ["VARIABLE", "postgres_url"]

VARIABLE = "MIDFRINGE_TEST_POSTGRES"


@contextmanager
def postgres_url():
    """Yield the URL of an empty schema of its own, or skip the test where there is no database."""
    url = os.environ.get(VARIABLE)
    if not url:
        pytest.skip(f"no PostgreSQL: ${VARIABLE} names none (.ci/run starts one)")
    import psycopg

    name = f"midfringe_{secrets.token_hex(6)}"
    with psycopg.connect(url, autocommit=True) as connection:
        connection.execute(f"CREATE SCHEMA {name}")
        try:
            joint = "&" if "?" in url else "?"
            yield f"{url}{joint}options=-csearch_path%3D{name}"
        finally:
            connection.execute(f"DROP SCHEMA {name} CASCADE")
