"""schemathesis over the published OpenAPI document: what it promises of every call, held against what comes back.

Calls are drawn from the described shapes, good ones and such as break them. No answer may be a server's error, and its
status, media type and content must be as described; ``client.judge`` adds what the document cannot say.
"""

from __future__ import annotations

import tempfile
import time
import warnings
from pathlib import Path
from typing import TYPE_CHECKING, Any, Final

import hypothesis
import schemathesis
from hypothesis import HealthCheck, Phase, settings
from schemathesis.checks import not_a_server_error
from schemathesis.generation import GenerationMode
from schemathesis.specs.openapi.checks import (
    content_type_conformance,
    response_schema_conformance,
    status_code_conformance,
)

from app.web.server import create_app
from tests.fuzz.calls import list_documents
from tests.fuzz.client import LONGEST_CALL, Reply, judge, measure

if TYPE_CHECKING:
    from tests.fuzz.run import Summary

CHECKS: Final = [not_a_server_error, status_code_conformance, content_type_conformance, response_schema_conformance]
HERE: Final = "http://127.0.0.1:8010"


def list_operations(app: Any) -> list[Any]:
    """Every operation of the document, bound to the application."""
    schema = schemathesis.openapi.from_dict(app.openapi())
    schema.app = app
    return [found.ok() for found in schema.get_all_operations()]


def check_operation(operation: Any, examples: int, seed: int, sample: str, summary: Summary) -> None:
    """So many calls of one operation, half of them good by its shapes."""
    _check_mode(operation, GenerationMode.POSITIVE, examples - examples // 2, seed, sample, summary)
    try:
        _check_mode(operation, GenerationMode.NEGATIVE, examples // 2, seed, sample, summary)
    except hypothesis.errors.Unsatisfiable:
        # An operation without parameters has nothing that could break its shapes.
        return


def _check_mode(operation: Any, mode: GenerationMode, count: int, seed: int, sample: str, summary: Summary) -> None:
    if not count:
        return

    @hypothesis.seed(seed)
    @settings(
        max_examples=count,
        deadline=None,
        database=None,
        phases=[Phase.generate],
        suppress_health_check=list(HealthCheck),
    )
    @hypothesis.given(operation.as_strategy(mode))
    def ask(case: Any) -> None:
        if mode is GenerationMode.POSITIVE and "sample_id" in (case.path_parameters or {}):
            # A sample that exists, so that more than its absence is answered.
            case.path_parameters["sample_id"] = sample
        _check_case(case, operation.label, summary)

    ask()


def _check_case(case: Any, label: str, summary: Summary) -> None:
    begun, busy = time.perf_counter(), time.process_time()
    fault = None
    status = "raised"
    try:
        response = case.call(base_url=HERE)
        seconds = measure(begun, busy)
        status = str(response.status_code)
        headers = {name.lower(): values[0] for name, values in response.headers.items()}
        fault = judge(Reply(response.status_code, headers, response.content, seconds))
        if fault is None:
            case.validate_response(response, checks=CHECKS)
    except hypothesis.errors.HypothesisException:
        raise
    except BaseException as error:
        if isinstance(error, KeyboardInterrupt):
            raise
        seconds = measure(begun, busy)
        fault = " ".join(f"{type(error).__name__}: {error}".split())[:600]
    if fault is None and seconds > LONGEST_CALL:
        fault = f"took {seconds:.1f} s"
    summary.note(label, status, seconds, f"{label} {case.path_parameters} {case.query} {str(case.body)[:1500]}", fault)


def check_schema(calls: int, seed: int) -> Summary:
    """At least so many calls, shared by all operations of the document."""
    from tests.fuzz.run import Summary

    summary = Summary()
    with tempfile.TemporaryDirectory(prefix="fuzz") as folder, warnings.catch_warnings():
        warnings.simplefilter("ignore")
        app = create_app(Path(folder))
        operations = list_operations(app)
        each = -(-calls // len(operations))
        for operation in operations:
            # Edits that are taken change a sample; each operation begins with a fresh one.
            sample = app.state.store.samples.create(list_documents()[1]).sample_id
            check_operation(operation, each, seed, sample, summary)
        while summary.calls < calls:
            # Operations with few different calls are soon exhausted; others make up for them.
            before = summary.calls
            for operation in operations:
                check_operation(operation, 20, seed + summary.calls, sample, summary)
                if summary.calls >= calls:
                    break
            if summary.calls == before:
                break
    return summary
