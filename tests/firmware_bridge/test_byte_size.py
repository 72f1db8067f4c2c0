import pytest

from firmware_bridge.byte_size import byte_size_text, parse_byte_size
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


@pytest.mark.parametrize(
    ("number", "text", "up"),
    [
        (7.0, "7 B", "7 B"),
        (999.6, "1 kB", "1 kB"),
        (1234.0, "1.23 kB", "1.24 kB"),
        (115_200_001.0, "115 MB", "116 MB"),
        (2e10, "20 GB", "20 GB"),
        (9.9999e15, "1e+04 TB", "1e+04 TB"),
    ],
)
def test_sizes_for_people(number, text, up):
    assert byte_size_text(number) == text
    assert byte_size_text(number, is_up=True) == up
