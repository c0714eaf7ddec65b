"""Serving on this machine's loopback address until told to stop."""

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
from app.web.security import MAX_BODY_BYTES
from app.web.server import create_app

LOOPBACK = "127.0.0.1"
_SECONDS_TO_FINISH = 3


def bind_loopback(port: int) -> socket.socket:
    """Bind and listen on the loopback address; port 0 takes any free one.

    Raises:
        InputError: the port is taken or may not be used.
    """
    # The protocol is named, for only then does asyncio send small packets at once (TCP_NODELAY): 40 ms an answer.
    listener = socket.socket(socket.AF_INET, socket.SOCK_STREAM, socket.IPPROTO_TCP)
    try:
        if os.name == "posix":
            # So that a restart need not wait for old connections to fade; a port in use is still refused.
            listener.setsockopt(socket.SOL_SOCKET, socket.SO_REUSEADDR, 1)
        listener.bind((LOOPBACK, port))
        # Listen at once: until then another process could bind the same port.
        listener.listen(128)
    except OSError as error:
        listener.close()
        if error.errno == errno.EADDRINUSE:
            message = f"Port {port} on {LOOPBACK} is taken, perhaps by a Halfturn that is still running."
        elif error.errno == errno.EACCES:
            message = f"This account may not serve on port {port}."
        else:
            message = f"Port {port} on {LOOPBACK} cannot be used: {error.strerror}."
        raise InputError(message, hint="Choose another with --port N, or any free one with --port 0.") from None
    return listener


class _AnnouncingServer(uvicorn.Server):
    """Says where it is once it listens, and not before."""

    def __init__(self, config: uvicorn.Config, url: str, *, open_browser: bool) -> None:
        super().__init__(config)
        self._url = url
        self._open_browser = open_browser

    async def startup(self, sockets: list[socket.socket] | None = None) -> None:
        await super().startup(sockets)
        if not self.started or self.should_exit:
            return
        print(f"Halfturn is at {self._url}", flush=True)
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


def serve(port: int, data_dir: Path, *, open_browser: bool) -> None:
    """Serve until SIGINT or SIGTERM; the first line on standard output says where.

    Raises:
        InputError: the port cannot be used.
    """
    # A turn is answered in a few milliseconds beside calculations that run in threads; with Python's usual 5 ms it
    # would wait as long again for its share.
    sys.setswitchinterval(0.0005)
    listener = bind_loopback(port)
    url = f"http://{LOOPBACK}:{listener.getsockname()[1]}/"
    config = uvicorn.Config(
        create_app(data_dir),
        # The same protocol code on every machine, whatever else is installed beside it.
        loop="asyncio",
        http="h11",
        ws="websockets-sansio",
        ws_max_size=MAX_BODY_BYTES,
        ws_per_message_deflate=False,
        log_level="warning",
        access_log=False,
        proxy_headers=False,
        server_header=False,
        timeout_graceful_shutdown=_SECONDS_TO_FINISH,
    )
    server = _AnnouncingServer(config, url, open_browser=open_browser)

    def stop(_signal: int, _frame: object) -> None:
        server.should_exit = True

    # uvicorn stops in good order and then raises the signal anew for the handler that was there before: this one,
    # so that being asked to stop is no failure.
    for number in (signal.SIGINT, signal.SIGTERM):
        signal.signal(number, stop)
    with listener:
        server.run(sockets=[listener])
