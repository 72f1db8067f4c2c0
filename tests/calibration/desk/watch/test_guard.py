"""Who may talk to the live page."""

# ruff: noqa: S104  # nothing is bound here

import socket

import pytest

from calibration.desk.watch.guard import Guard, guarded, is_loopback
from calibration.errors import CalibrationError

TOKEN = "correct-horse-battery"  # noqa: S105  # invented


@pytest.mark.parametrize(
    ("host", "is_own"),
    [
        ("127.0.0.1", True), ("127.8.8.8", True), ("::1", True), ("localhost", True),
        ("0.0.0.0", False), ("::", False), ("192.168.1.4", False), ("bench-pc", False),
    ],
)  # fmt: skip
def test_only_loopback_goes_without_a_token(host, is_own):
    assert is_loopback(host) is is_own
    guard = guarded(host, None)
    assert (guard.token is None) is is_own
    if is_own:
        assert Guard(host).is_right_token()
    else:
        assert len(guard.token) >= 32
        assert guard.token != guarded(host, None).token
        with pytest.raises(ValueError, match="needs a token"):
            Guard(host)


@pytest.mark.parametrize(
    ("header", "is_known"),
    [
        ("127.0.0.1:8642", True), ("localhost:8642", True), ("LOCALHOST", True), ("[::1]:8642", True),
        ("evil.example:8642", False), ("127.0.0.1.evil.example", False), ("", False), (None, False),
        ("localhost.evil.example", False), ("192.168.1.4:8642", False), ("[", False), ("a:b:c", False),
        ("127.0.0.1:port", False), ("evil.example@127.0.0.1:8642", True), ("127.0.0.1@evil.example", False),
    ],
)  # fmt: skip
def test_host_names_this_computer_only(header, is_known):
    # A name made to point here (DNS rebinding) arrives as the name the browser was given.
    assert Guard("127.0.0.1").is_known_host(header) is is_known


def test_beyond_loopback_numbers_and_own_names_are_known():
    guard = Guard("0.0.0.0", TOKEN)
    assert guard.is_known_host("192.168.1.4:8642")
    assert guard.is_known_host(f"{socket.gethostname()}:8642")
    assert not guard.is_known_host("evil.example:8642")


@pytest.mark.parametrize(
    ("origin", "is_own"),
    [
        ("http://127.0.0.1:8642", True), ("https://127.0.0.1:8642", True),
        ("http://127.0.0.1:8643", False), ("http://localhost:8642", False),
        ("http://evil.example", False), ("null", False), ("", False), (None, False),
        ("file://127.0.0.1:8642", False),
    ],
)  # fmt: skip
def test_origin_is_the_page_itself(origin, is_own):
    assert Guard("127.0.0.1").is_own_origin(origin, "127.0.0.1:8642") is is_own


def test_one_right_token_is_enough_and_a_wrong_one_is_not():
    guard = Guard("0.0.0.0", TOKEN)
    assert guard.is_right_token(TOKEN)
    assert guard.is_right_token(None, TOKEN)
    assert guard.is_right_token("wrong", TOKEN)
    for given in ((), (None,), ("",), (TOKEN[:-1],), (TOKEN + "x",), ("ä\ud800",)):
        assert not guard.is_right_token(*given)


@pytest.mark.parametrize(
    "token", ["short", "with space in it", "semi;colon-cookie", "ünicode-token", ""]
)
def test_a_token_is_long_enough_and_fit_for_an_address(token):
    with pytest.raises(CalibrationError, match="--token must be at least 8 letters"):
        guarded("127.0.0.1", token)
    assert guarded("127.0.0.1", TOKEN).token == TOKEN
