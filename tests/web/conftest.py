"""A client of the application, and a few routes made only to be asked by tests."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

import numpy as np
import pytest
from fastapi import APIRouter, FastAPI, WebSocket
from fastapi.testclient import TestClient

from app.errors import ConflictError, InputError, NotFoundError, StoreError, UndeterminedError
from app.web.answers import JsonAnswer
from app.web.bodies import StrictRoute
from app.web.requests import (
    AlongRequest,
    CifRequest,
    ConvertRequest,
    FitRequest,
    FormRequest,
    RegionRequest,
    StateRequest,
    SurfaceRequest,
)
from app.web.server import create_app

HERE = "http://127.0.0.1"

RAISED: dict[str, Exception] = {
    "input": InputError("The cell is wrong.", field="crystal.cell", hint="Mend it.", detail={"cell": np.array([1.5])}),
    "undetermined": UndeterminedError("One combination is unseen.", detail={"rank": 5}),
    "not-found": NotFoundError("There is no such sample."),
    "conflict": ConflictError("The sample has changed."),
    "store": StoreError("The disk is full."),
    "bad-detail": InputError("The cell is wrong.", field="cell", detail={"cell": [float("nan")]}),
    "overflow": OverflowError("math range error"),
    "decomposition": np.linalg.LinAlgError("SVD did not converge"),
    "recursion": RecursionError("maximum recursion depth exceeded"),
    "bug": ZeroDivisionError("a defect"),
}

router = APIRouter(prefix="/probe", route_class=StrictRoute, include_in_schema=False)


@router.post("/form")
def probe_form(request: FormRequest) -> JsonAnswer:
    return JsonAnswer({"read": request.model_dump()})


@router.post("/state")
def probe_state(request: StateRequest) -> JsonAnswer:
    return JsonAnswer({"read": request.model_dump()})


@router.post("/along")
def probe_along(request: AlongRequest) -> JsonAnswer:
    return JsonAnswer({"count": len(request.directions)})


@router.post("/surface")
def probe_surface(request: SurfaceRequest) -> JsonAnswer:
    return JsonAnswer({"read": request.model_dump()})


@router.post("/fit")
def probe_fit(request: FitRequest) -> JsonAnswer:
    return JsonAnswer({"count": len(request.readings)})


@router.post("/region")
def probe_region(request: RegionRequest) -> JsonAnswer:
    return JsonAnswer({"read": request.model_dump()})


@router.post("/convert")
def probe_convert(request: ConvertRequest) -> JsonAnswer:
    return JsonAnswer({"read": request.model_dump()})


@router.post("/cif")
def probe_cif(request: CifRequest) -> JsonAnswer:
    return JsonAnswer({"characters": len(request.text)})


@router.get("/raise/{name}")
def probe_raise(name: str) -> None:
    raise RAISED[name]


@router.post("/fail/{name}")
def probe_fail(name: str, request: CifRequest) -> None:
    raise RuntimeError(f"a defect that quotes {name} and {request.text}")


@router.get("/answer/{name}")
def probe_answer(name: str) -> JsonAnswer:
    answers: dict[str, Any] = {
        "numpy": {"matrix": np.eye(3), "count": np.int64(3), "value": np.float64(0.5), "none": None},
        "nan": {"values": [1.0, {"inner": np.array([[0.0, np.nan]])}]},
        "infinity": {"value": float("inf")},
    }
    return JsonAnswer(answers[name])


@router.get("/count")
def probe_count(number: int) -> JsonAnswer:
    return JsonAnswer({"number": number})


@router.websocket("/live")
async def probe_live(socket: WebSocket) -> None:
    await socket.accept()
    await socket.send_text(await socket.receive_text())
    await socket.close()


@pytest.fixture(scope="session")
def probed_app() -> FastAPI:
    app = create_app()
    app.include_router(router)
    return app


@pytest.fixture
def client(probed_app: FastAPI) -> Iterator[TestClient]:
    with TestClient(probed_app, base_url=HERE, raise_server_exceptions=False) as client:
        yield client
