"""Serving until told to stop: on this machine's loopback address, or, with a token, for others too."""

from __future__ import annotations

import errno
import os
import signal
import socket
import sys
import threading
import webbrowser
from pathlib import Path

import uvicorn

from app.errors import InputError
from app.web.access import Access, is_loopback, make_token, name_machine
from app.web.limits import LARGEST_FRAME_BYTES, LONGEST_HEADERS_BYTES, MOST_CONNECTIONS
from app.web.server import create_app

LOOPBACK = "127.0.0.1"
_SECONDS_TO_FINISH = 3
_NAME_AN_ADDRESS = "Give an address of this machine, or 0.0.0.0 for all of them."


def bind_loopback(port: int) -> socket.socket:
    """Bind and listen on the loopback address; port 0 takes any free one. Raises InputError as ``bind_host`` does."""
    return bind_host(LOOPBACK, port)


def bind_host(host: str, port: int) -> socket.socket:
    """Bind and listen on the first address that a host has on this machine; port 0 takes any free one.

    Raises:
        InputError: the host is no address of this machine, or the port is taken or may not be used.
    """
    try:
        family, _, _, _, address = socket.getaddrinfo(host, port, type=socket.SOCK_STREAM, flags=socket.AI_PASSIVE)[0]
    except (OSError, UnicodeError):
        raise InputError(f"There is no host {host!r}.", field="--host", hint=_NAME_AN_ADDRESS) from None
    # The protocol is named, for only then does asyncio send small packets at once (TCP_NODELAY): 40 ms an answer.
    listener = socket.socket(family, socket.SOCK_STREAM, socket.IPPROTO_TCP)
    try:
        if os.name == "posix":
            # So that a restart need not wait for old connections to fade; a port in use is still refused.
            listener.setsockopt(socket.SOL_SOCKET, socket.SO_REUSEADDR, 1)
        listener.bind(address)
        # Listen at once: until then another process could bind the same port.
        listener.listen(128)
    except OSError as error:
        listener.close()
        if error.errno == errno.EADDRNOTAVAIL:
            raise InputError(
                f"This machine has no address {address[0]}.", field="--host", hint=_NAME_AN_ADDRESS
            ) from None
        if error.errno == errno.EADDRINUSE:
            message = f"Port {port} on {host} is taken, perhaps by a Halfturn that is still running."
        elif error.errno == errno.EACCES:
            message = f"This account may not serve on port {port}."
        else:
            message = f"Port {port} on {host} cannot be used: {error.strerror}."
        raise InputError(message, hint="Choose another with --port N, or any free one with --port 0.") from None
    return listener


def decide_access(listener: socket.socket, host: str, token: str | None) -> Access:
    """What the server asks of whoever comes: beyond loopback always a token, made here where none is given."""
    address, port = listener.getsockname()[:2]
    if is_loopback(address):
        return Access(token=token, port=port)
    return Access(token=token or make_token(), beyond=True, names=name_machine(host), port=port)


def write_address(listener: socket.socket, access: Access) -> str:
    """The address to open, with the token where one is demanded."""
    address, port = listener.getsockname()[:2]
    if address in ("0.0.0.0", "::"):
        # Every address of this machine; its name is what others can use, if their network knows it.
        address = socket.gethostname()
    place = f"[{address}]" if ":" in address else address
    return f"http://{place}:{port}/" + (f"?token={access.token}" if access.token else "")


def warn_beyond(port: int) -> str:
    """What it means that the server listens beyond loopback."""
    return (
        f"This server can be reached from other machines, on port {port}. Whoever has the token can read and change "
        "all kept samples.\nNothing is encrypted: whoever can listen on the network reads the token and the samples. "
        f"Where that matters, keep to {LOOPBACK} and come through ssh -L {port}:{LOOPBACK}:{port}."
    )


class _AnnouncingServer(uvicorn.Server):
    """Says where it is once it listens, and not before."""

    def __init__(self, config: uvicorn.Config, url: str, *, open_browser: bool, warning: str = "") -> None:
        super().__init__(config)
        self._url = url
        self._warning = warning
        self._open_browser = open_browser

    async def startup(self, sockets: list[socket.socket] | None = None) -> None:
        await super().startup(sockets)
        if not self.started or self.should_exit:
            return
        print(f"Halfturn is at {self._url}", flush=True)
        if self._warning:
            print(self._warning, file=sys.stderr, flush=True)
        if self._open_browser:
            threading.Thread(target=_show, args=(self._url,), daemon=True).start()


def _show(url: str) -> None:
    """Open the browser, if there is one to open; whatever goes wrong with that is no concern of the server."""
    windowed = sys.platform in ("darwin", "win32") or any(
        os.environ.get(name) for name in ("DISPLAY", "WAYLAND_DISPLAY", "BROWSER")
    )
    if not windowed:
        # Without a display a text browser would take over the terminal.
        return
    try:
        webbrowser.open(url)
    except Exception as error:
        print(f"The browser could not be opened ({error}); open {url} yourself.", file=sys.stderr)


def serve(port: int, data_dir: Path, *, open_browser: bool, host: str = LOOPBACK, token: str | None = None) -> None:
    """Serve until SIGINT or SIGTERM; the first line on standard output says where.

    Beyond loopback a token is demanded, which is made where none is given; standard error says what that means.

    Raises:
        InputError: the port cannot be used.
    """
    # A turn is answered in a few milliseconds beside calculations that run in threads; with Python's usual 5 ms it
    # would wait as long again for its share.
    sys.setswitchinterval(0.0005)
    listener = bind_host(host, port)
    access = decide_access(listener, host, token)
    config = uvicorn.Config(
        create_app(data_dir, access),
        # The same protocol code on every machine, whatever else is installed beside it.
        loop="asyncio",
        http="h11",
        ws="websockets-sansio",
        ws_max_size=LARGEST_FRAME_BYTES,
        ws_per_message_deflate=False,
        log_level="warning",
        access_log=False,
        proxy_headers=False,
        server_header=False,
        h11_max_incomplete_event_size=LONGEST_HEADERS_BYTES,
        limit_concurrency=MOST_CONNECTIONS,
        timeout_graceful_shutdown=_SECONDS_TO_FINISH,
    )
    warning = warn_beyond(access.port) if access.beyond else ""
    server = _AnnouncingServer(config, write_address(listener, access), open_browser=open_browser, warning=warning)

    def stop(_signal: int, _frame: object) -> None:
        server.should_exit = True

    # uvicorn stops in good order and then raises the signal anew for the handler that was there before: this one,
    # so that being asked to stop is no failure.
    for number in (signal.SIGINT, signal.SIGTERM):
        signal.signal(number, stop)
    with listener:
        server.run(sockets=[listener])
