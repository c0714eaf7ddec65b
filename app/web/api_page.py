"""The page at /api: every call with its members, limits, errors and an example, made from the OpenAPI document.

Nothing is listed by hand but the order and the examples; what is not in the document is not on the page.
"""

from __future__ import annotations

import json
from dataclasses import dataclass
from typing import Any, Final

from fastapi import APIRouter, FastAPI, Request, Response
from markupsafe import Markup

from app.web import limits
from app.web.api_examples import EXAMPLES
from app.web.licences import list_licences
from app.web.meanings import describe_members
from app.web.pages import templates

router = APIRouter(include_in_schema=False)

_SHAPE: Final = "#/components/schemas/"


@dataclass(frozen=True)
class Member:
    """One member of a shape: ``kind`` is HTML with links to other shapes, ``limits`` words, ``told`` its meaning."""

    name: str
    kind: Markup
    limits: str
    told: str
    required: bool


@dataclass(frozen=True)
class Shape:
    """One object of a request or an answer."""

    key: str
    told: str
    members: tuple[Member, ...]


@dataclass(frozen=True)
class Call:
    """One method of one address."""

    method: str
    path: str
    told: str
    parameters: tuple[Member, ...]
    takes: Markup | None
    gives: Markup | None
    errors: tuple[tuple[str, str], ...]
    example: str | None


def install(app: FastAPI) -> None:
    """Let the OpenAPI document say what every member means, whoever asks for it."""
    make = app.openapi

    def describe() -> dict[str, Any]:
        if app.openapi_schema is None:
            app.openapi_schema = describe_members(make())
        return app.openapi_schema

    app.openapi = describe  # type: ignore[method-assign]


def list_shapes(document: dict[str, Any]) -> list[Shape]:
    """Every object of the document, by its name."""
    return [
        Shape(key, str(schema.get("description", "")), tuple(_read_members(schema)))
        for key, schema in sorted(document["components"]["schemas"].items(), key=lambda item: _short(item[0]).lower())
    ]


def list_calls(document: dict[str, Any]) -> list[Call]:
    """Every call of the document: those that store nothing first."""
    calls = []
    for path, operations in document["paths"].items():
        for method, operation in operations.items():
            key = f"{method.upper()} {path}"
            answers = operation["responses"]
            calls.append(
                Call(
                    method.upper(),
                    path,
                    operation.get("summary", ""),
                    tuple(_read_parameter(parameter) for parameter in operation.get("parameters", [])),
                    _find_shape(operation.get("requestBody", {})),
                    _find_shape(answers.get("200", {})),
                    tuple((status, answer["description"]) for status, answer in answers.items() if status >= "400"),
                    json.dumps(EXAMPLES[key], ensure_ascii=False) if key in EXAMPLES else None,
                )
            )
    return sorted(calls, key=lambda call: not call.path.startswith("/api/v1/"))


def _read_parameter(parameter: dict[str, Any]) -> Member:
    schema = parameter["schema"]
    told = parameter.get("description") or schema.get("description", "")
    return Member(parameter["name"], _kind(schema), _bounds(schema), told, parameter.get("required", False))


def _read_members(schema: dict[str, Any]) -> list[Member]:
    needed = schema.get("required", [])
    return [
        Member(name, _kind(content), _bounds(content), content.get("description", ""), name in needed)
        for name, content in schema.get("properties", {}).items()
    ]


def _find_shape(message: dict[str, Any]) -> Markup | None:
    schema = message.get("content", {}).get("application/json", {}).get("schema")
    return _kind(schema) if schema else None


def _short(key: str) -> str:
    return key.rpartition("__")[2]


def _kind(schema: dict[str, Any]) -> Markup:
    """A type in words, with links to the shapes that it names."""
    if "$ref" in schema:
        key = schema["$ref"].removeprefix(_SHAPE)
        return Markup('<a href="#{}">{}</a>').format(key, _short(key))
    choices = schema.get("anyOf") or schema.get("oneOf")
    if choices:
        return Markup(" or ").join(_kind(choice) for choice in choices)
    if "const" in schema:
        return Markup("<code>{}</code>").format(json.dumps(schema["const"], ensure_ascii=False))
    if "enum" in schema:
        words = [Markup("<code>{}</code>").format(json.dumps(word, ensure_ascii=False)) for word in schema["enum"]]
        return Markup(", ").join(words)
    match schema.get("type"):
        case "array" if "prefixItems" in schema:
            return Markup("[{}]").format(Markup(", ").join(_kind(item) for item in schema["prefixItems"]))
        case "array":
            return Markup("list of {}").format(_kind(schema.get("items", {})))
        case "object" if isinstance(schema.get("additionalProperties"), dict):
            return Markup("object of {}").format(_kind(schema["additionalProperties"]))
        case "integer":
            return Markup("whole number")
        case "string":
            return Markup("text")
        case "boolean":
            return Markup("true or false")
        case None:
            return Markup("anything")
        case other:
            return Markup("{}").format(other)


_WORDS: Final = {
    "minimum": "at least {}",
    "exclusiveMinimum": "above {}",
    "maximum": "at most {}",
    "exclusiveMaximum": "below {}",
    "minLength": "at least {} characters",
    "maxLength": "at most {} characters",
    "minItems": "at least {} items",
    "maxItems": "at most {} items",
    "maxProperties": "at most {} members",
}


def _bounds(schema: dict[str, Any]) -> str:
    """Bounds and default of a type in words."""
    words = []
    for part in [schema, *schema.get("anyOf", [])]:
        if part.get("type") == "array" and part.get("minItems") == part.get("maxItems") is not None:
            words.append(f"{part['minItems']} items")
        else:
            words += [told.format(f"{part[key]:,}".replace(",", " ")) for key, told in _WORDS.items() if key in part]
    if schema.get("default") is not None:
        words.append(f"default {json.dumps(schema['default'], ensure_ascii=False)}")
    return ", ".join(dict.fromkeys(words))


def list_limits() -> list[tuple[str, str]]:
    """What holds for every request, in words with its number."""
    message = f"{limits.MAX_MESSAGE_BYTES // 1024} KiB"
    frame = f"{limits.LARGEST_FRAME_BYTES // 2**20} MiB"
    return [
        ("Request body", f"{limits.MAX_BODY_BYTES // 2**20} MiB; more is answered with 413"),
        ("Nesting", f"{limits.DEEPEST_BODY} levels of objects and lists"),
        ("Whole number", f"{limits.LONGEST_NUMBER} digits; every number must be finite"),
        ("Message on /live", f"{message}; beyond {frame} the connection ends"),
        ("Request line and headers", f"{limits.LONGEST_HEADERS_BYTES // 1024} KiB"),
        ("Connections and running requests at once", f"{limits.MOST_CONNECTIONS}; further ones are answered with 503"),
    ]


@router.api_route("/api", methods=["GET", "HEAD"])
def api_page(request: Request) -> Response:
    """Every call, shape, limit and licence."""
    document = request.app.openapi()
    context = {
        "page": "api",
        "calls": list_calls(document),
        "shapes": list_shapes(document),
        "short": _short,
        "limits": list_limits(),
        "licences": list_licences(),
    }
    return templates.TemplateResponse(request, "api.html", context)
