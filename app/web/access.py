"""Who may ask: the names under which the server may be addressed, and the token that it demands beyond loopback.

Listening on loopback alone, the server lets in whatever this machine's own pages and programs send. Once it listens
for others, everyone has to show a token: first in the address, which puts it into a cookie, or as a bearer's token.
"""

from __future__ import annotations

import hmac
import ipaddress
import re
import secrets
import socket
from dataclasses import dataclass
from typing import Final
from urllib.parse import parse_qsl, urlencode

from starlette.datastructures import Headers

from app.errors import InputError

SHORTEST_TOKEN: Final = 16
LONGEST_TOKEN: Final = 200

_TOKEN = re.compile(rf"[A-Za-z0-9_-]{{{SHORTEST_TOKEN},{LONGEST_TOKEN}}}", re.ASCII)
_HOST = re.compile(r"(?P<name>\[[0-9a-f:.]+\]|[a-z0-9._-]+)(:[0-9]{1,5})?", re.IGNORECASE | re.ASCII)
_LOOPBACK_NAMES: Final = frozenset({"127.0.0.1", "localhost", "[::1]"})


@dataclass(frozen=True)
class Access:
    """Under which names the server answers, and what it asks for.

    Attributes:
        token: what must be shown; None where the server listens on loopback alone and none was asked for.
        beyond: whether it listens on more than loopback.
        names: names of this machine, in lower case, under which others may address it.
        port: stands in the cookie's name, for browsers keep one set of cookies for all ports of a host.
    """

    token: str | None = None
    beyond: bool = False
    names: frozenset[str] = frozenset()
    port: int = 0

    @property
    def cookie(self) -> str:
        """The name of the cookie."""
        return f"halfturn-{self.port}"

    def welcomes_host(self, host: str) -> bool:
        """Whether a Host names this machine.

        A foreign name can be made to resolve to this machine; an address of numbers cannot, so that beyond loopback
        every such address is taken.
        """
        match = _HOST.fullmatch(host)
        if match is None:
            return False
        name = match["name"].lower()
        if name in _LOOPBACK_NAMES:
            return True
        return self.beyond and (name in self.names or _is_address(name))

    def admits(self, headers: Headers) -> bool:
        """Whether a request shows the token, by its cookie or as a bearer's."""
        if self.token is None:
            return True
        for line in headers.getlist("authorization"):
            scheme, _, shown = line.partition(" ")
            if scheme.lower() == "bearer" and self.matches(shown.strip()):
                return True
        return any(self.matches(shown) for shown in _cookies(headers, self.cookie))

    def matches(self, shown: str) -> bool:
        """Whether text is the token, in a time that does not tell how much of it is right."""
        return self.token is not None and hmac.compare_digest(shown.encode(), self.token.encode())

    def find_in_query(self, query: bytes) -> tuple[bool, str]:
        """Whether the query holds the right token, and the query without any token."""
        try:
            pairs = parse_qsl(query.decode("latin-1"), keep_blank_values=True, max_num_fields=100)
        except ValueError:
            return False, ""
        shown = [value for key, value in pairs if key == "token"]
        rest = urlencode([(key, value) for key, value in pairs if key != "token"])
        return len(shown) == 1 and self.matches(shown[0]), rest


def make_token() -> str:
    """A token of 192 random bits, fit for an address."""
    return secrets.token_urlsafe(24)


def check_token(text: str) -> str:
    """The token as given. Raises InputError where it is too short, too long or unfit for an address."""
    if _TOKEN.fullmatch(text) is None:
        raise InputError(
            f"The token must have {SHORTEST_TOKEN} to {LONGEST_TOKEN} letters, digits, hyphens or underscores.",
            field="--token",
            hint="Leave it out, and one is made and printed.",
        )
    return text


def name_machine(host: str) -> frozenset[str]:
    """The names of this machine, in lower case: its own, its own with .local, and the one it is told to listen on."""
    own = socket.gethostname().lower().rstrip(".")
    names = {own, own.partition(".")[0], host.lower().rstrip(".")}
    names |= {f"{name}.local" for name in names if name and "." not in name and ":" not in name}
    return frozenset(name for name in names if name)


def is_loopback(address: str) -> bool:
    """Whether an address of numbers is one that only this machine reaches."""
    return ipaddress.ip_address(address.partition("%")[0]).is_loopback


def _is_address(name: str) -> bool:
    try:
        ipaddress.ip_address(name.strip("[]"))
    except ValueError:
        return False
    return True


def _cookies(headers: Headers, name: str) -> list[str]:
    """Every value of a cookie. Cookies of other tools on this host, however odd, do not hide it."""
    pairs = [pair.partition("=") for line in headers.getlist("cookie") for pair in line.split(";")]
    return [value.strip() for key, _, value in pairs if key.strip() == name]
