import pytest

from firmware_bridge.byte_size import parse_byte_size
from firmware_bridge.errors import BridgeError


@pytest.mark.parametrize(
    ("text", "size"),
    [("500 MB", 500_000_000), ("2GiB", 2**31), ("1.5 kB", 1500), ("64 KiB", 65536), ("7B", 7)],
)
def test_sizes(text, size):
    assert parse_byte_size(text, "--size") == size


@pytest.mark.parametrize("text", ["500", "0 MB", "-1 MB", "5 MW", "MB", "1e3 MB", "nan MB"])
def test_what_is_no_size_is_named(text):
    with pytest.raises(BridgeError) as error:
        parse_byte_size(text, "--size")
    assert str(error.value) == f"--size must be a size such as '500 MB' or '2 GiB', got {text!r}"
