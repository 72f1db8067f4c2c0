"""The firmware's core, compiled once for all tests."""

import pytest
from firmware_build import shared_core
from firmware_core import Core


@pytest.fixture(scope="session")
def core(tmp_path_factory):
    return Core(shared_core(tmp_path_factory.mktemp("core")))
