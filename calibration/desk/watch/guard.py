"""Who may talk to the live page: the host it was called by, where the page came from, the token."""

import ipaddress
import secrets
import socket
import string
from dataclasses import dataclass, field
from urllib.parse import urlsplit

from calibration.errors import CalibrationError

__all__ = ["Guard", "guarded", "is_loopback"]

_FEWEST_CHARACTERS = 8


def guarded(host: str, token: str | None) -> "Guard":
    """Return the guard of an address, with a random token where one is needed and none given.

    Parameters
    ----------
    host : str
        The address to serve on.
    token : str or None
        As given.

    Returns
    -------
    Guard
        Beyond loopback with a token, by default of 192 random bits.

    Raises
    ------
    CalibrationError
        If the token could be guessed, or is not fit for a URL.
    """
    if token is not None and (
        len(token) < _FEWEST_CHARACTERS
        or not set(token) <= set(string.ascii_letters + string.digits + "-._~")
    ):
        raise CalibrationError(
            f"--token must be at least {_FEWEST_CHARACTERS} letters, digits or -._~, got {len(token)} characters"
        )
    if token is None and not is_loopback(host):
        token = secrets.token_urlsafe(24)
    return Guard(host, token)


def is_loopback(host: str) -> bool:
    """Return whether an address to serve on can be reached from this computer only."""
    if host == "localhost":
        return True
    try:
        return ipaddress.ip_address(host).is_loopback
    except ValueError:
        return False


@dataclass(frozen=True)
class Guard:
    """Decide on requests.

    Parameters
    ----------
    host : str
        The address that is served.
    token : str or None
        What a request must bring; None for none, which only a loopback address may have.

    Raises
    ------
    ValueError
        If another address than loopback has no token.
    """

    host: str
    token: str | None = None
    names: frozenset[str] = field(init=False)

    def __post_init__(self) -> None:
        if not self.token and not is_loopback(self.host):
            raise ValueError(f"{self.host} is no loopback address: it needs a token")
        own = {"localhost", self.host.lower()}
        if not is_loopback(self.host):
            name = socket.gethostname().lower()
            own |= {name, name.partition(".")[0], f"{name.partition('.')[0]}.local"}
        object.__setattr__(self, "names", frozenset(own))

    def is_known_host(self, header: str | None) -> bool:
        """Return whether a request's Host names this server.

        A page from elsewhere whose name was made to point here (DNS rebinding) sends its own name.
        Numeric addresses cannot be rebound; beyond loopback any of them may be ours.

        Parameters
        ----------
        header : str or None
            The Host header, port included.
        """
        name = _host_of(f"//{header}") if header else None
        if name is None:
            return False
        if name in self.names:
            return True
        try:
            address = ipaddress.ip_address(name)
        except ValueError:
            return False
        return address.is_loopback or not is_loopback(self.host)

    def is_own_origin(self, origin: str | None, host: str | None) -> bool:
        """Return whether a websocket was opened by a page of this server.

        Parameters
        ----------
        origin : str or None
            The Origin header, which every browser sends with a websocket.
        host : str or None
            The Host header.
        """
        if origin is None or host is None:
            return False
        parts = urlsplit(origin)
        return parts.scheme in ("http", "https") and parts.netloc.lower() == host.lower()

    def is_right_token(self, *given: str | None) -> bool:
        """Return whether one of the tokens brought is right; takes the same time for any wrong one.

        Parameters
        ----------
        *given : str or None
            From the address and from the cookie.
        """
        if self.token is None:
            return True
        wanted = self.token.encode()
        matches = [secrets.compare_digest(g.encode("utf-8", "replace"), wanted) for g in given if g]
        return any(matches)


def _host_of(url: str) -> str | None:
    try:
        parts = urlsplit(url)
        is_number = parts.port is None or parts.port >= 0  # reading it raises where it is none
    except ValueError:
        return None
    return parts.hostname if is_number else None
