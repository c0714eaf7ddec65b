"""The server with a few more routes: the floors, which take the same bodies and give answers of the same sizes.

``python -m tests.bench.served DATA`` serves on a free port and says where, as the tool itself does.
"""

from __future__ import annotations

import sys
from pathlib import Path
from typing import Any

from fastapi import APIRouter, FastAPI, Request, Response, WebSocket, WebSocketDisconnect

from app.web import requests, serving
from app.web.bodies import StrictRoute

router = APIRouter(prefix="/floor", route_class=StrictRoute)
_CONSTANTS: dict[str, bytes] = {}


@router.put("/constant/{name}")
async def keep_constant(name: str, request: Request) -> Response:
    """Keep the bytes that the floor's route will answer with."""
    _CONSTANTS[name] = await request.body()
    return Response()


@router.post("/state")
def state(request: requests.StateRequest) -> Response:
    """The same body, a constant answer."""
    return Response(_CONSTANTS["state"], media_type="application/json")


@router.websocket("/echo")
async def echo(socket: WebSocket) -> None:
    """The constant of the turn for every message."""
    await socket.accept()
    answer = _CONSTANTS["turn"].decode()
    while True:
        try:
            await socket.receive_text()
        except (WebSocketDisconnect, KeyError):
            return
        await socket.send_text(answer)


def main() -> None:
    """Serve until told to stop."""
    make = serving.create_app

    def create_app(*given: Any, **named: Any) -> FastAPI:
        application = make(*given, **named)
        # Before the files, which are mounted last and take whatever is left.
        application.router.routes[0:0] = router.routes
        return application

    serving.create_app = create_app
    serving.serve(0, Path(sys.argv[1]), open_browser=False)


if __name__ == "__main__":
    main()
