"""A fitted tensor to carry elsewhere: JSON, CSV, a LaTeX matrix and a numpy literal, each with its frame."""

from __future__ import annotations

import csv
import io
import json
from collections.abc import Callable
from typing import Any, Final, Literal

from fastapi import APIRouter, Request, Response
from fastapi.responses import PlainTextResponse

from app.errors import InputError
from app.readings.fit import Fit
from app.tensor.printing import print_value
from app.web.readings_closer import fit_shown
from app.web.samples import store_of

router = APIRouter(include_in_schema=False)


@router.get("/samples/{sample_id}/readings/tensor.{form}")
def copy_tensor(sample_id: str, form: Literal["json", "csv", "tex", "py"], request: Request) -> Response:
    """The fitted tensor with its frame, covariance and symmetry."""
    crystal, shown, fit, _ = fit_shown(store_of(request).samples.get(sample_id))
    if fit.estimate is None or fit.free is None:
        raise InputError("The readings do not determine a tensor.", hint="Add the readings that the page suggests.")
    about = {
        "property": shown.name,
        "unit": shown.unit,
        "frame": fit.estimate.frame,
        "group": crystal.group.symbol,
        "cell": None if crystal.cell is None else crystal.cell.parameters.tolist(),
    }
    write, media = _WRITERS[form]
    return PlainTextResponse(write(fit, about), media_type=media)


def _write_json(fit: Fit, about: dict[str, Any]) -> str:
    assert fit.estimate is not None
    assert fit.free is not None
    sigmas = fit.estimate.sigma_matrix
    content = {
        **about,
        "free": dict(zip(fit.form.labels, fit.free.tolist(), strict=True)),
        "covariance": None if fit.free_covariance is None else fit.free_covariance.tolist(),
        "covariance_from": fit.covariance_from,
        "matrix": fit.estimate.matrix.tolist(),
        "sigma_matrix": None if sigmas is None else sigmas.tolist(),
        "chi2": fit.chi2,
        "dof": fit.dof,
    }
    return json.dumps(content, ensure_ascii=False, indent=1)


def _write_csv(fit: Fit, about: dict[str, Any]) -> str:
    assert fit.estimate is not None
    assert fit.free is not None
    sigmas = fit.estimate.sigma_matrix
    out = io.StringIO(newline="")
    writer = csv.writer(out)
    for key, value in about.items():
        writer.writerow([key, " ".join(map(str, value)) if isinstance(value, list) else value])
    writer.writerow(["cell", "value", "sigma", *(f"covariance with {label}" for label in fit.form.labels)])
    for place, label in enumerate(fit.form.labels):
        row, column = int(label[0]) - 1, int(label[1]) - 1
        spread = "" if sigmas is None else repr(float(sigmas[row, column]))
        line = [] if fit.free_covariance is None else [repr(float(value)) for value in fit.free_covariance[place]]
        writer.writerow([label, repr(float(fit.free[place])), spread, *line])
    return out.getvalue()


def _write_latex(fit: Fit, about: dict[str, Any]) -> str:
    assert fit.estimate is not None
    matrix, sigmas = fit.estimate.matrix, fit.estimate.sigma_matrix

    def cell(row: int, column: int) -> str:
        sigma = 0.0 if sigmas is None else float(sigmas[row, column])
        return print_value(float(matrix[row, column]), sigma if sigma > 0 else None).replace("−", "-")

    lines = [" & ".join(cell(row, column) for column in range(3)) for row in range(3)]
    body = " \\\\\n".join(lines)
    return f"% {_describe(about)}\n\\begin{{pmatrix}}\n{body}\n\\end{{pmatrix}}\n"


def _write_numpy(fit: Fit, about: dict[str, Any]) -> str:
    assert fit.estimate is not None
    lines = ",\n".join("    [" + ", ".join(repr(float(value)) for value in row) + "]" for row in fit.estimate.matrix)
    return f"# {_describe(about)}\nnumpy.array([\n{lines},\n])\n"


def _describe(about: dict[str, Any]) -> str:
    return f"{about['property']}, {about['unit']}; {about['frame']}; group {about['group']}"


_WRITERS: Final[dict[str, tuple[Callable[[Fit, dict[str, Any]], str], str]]] = {
    "json": (_write_json, "application/json"),
    "csv": (_write_csv, "text/csv"),
    "tex": (_write_latex, "text/plain"),
    "py": (_write_numpy, "text/plain"),
}
