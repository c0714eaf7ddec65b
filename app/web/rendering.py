"""From results to the members of an answer: what does not exist becomes null here, and nothing else changes.

The names are those of version 1 of the calculation interface; the command line prints the same with ``--json``.
"""

from __future__ import annotations

from typing import Any

import numpy as np
import numpy.typing as npt

from app.crystal.crystal import Crystal
from app.crystal.direction import Direction, format_indices
from app.crystal.lattice import find_all_nearest
from app.readings.fit import Fit
from app.readings.reading import Reading
from app.readings.unseen import Unseen
from app.tensor.estimate import Estimate
from app.tensor.form import Form, find_fixed_axes
from app.tensor.kind import LABELS
from app.tensor.lock import CellLock, explain_cells
from app.tensor.pose import Pose
from app.tensor.principal import Principal, find_principal
from app.tensor.quadric import name_quadric
from app.tensor.tensor import PropertyTensor

FloatArray = npt.NDArray[np.float64]


def render_array(array: FloatArray | None) -> Any:
    """Nested lists; None for what is absent and for every entry that is NaN."""
    if array is None:
        return None
    if np.all(np.isfinite(array)):
        return array.tolist()
    if array.ndim == 0:
        return None
    return [render_array(np.asarray(part)) for part in array]


def render_form(crystal: Crystal, form: Form, pose: Pose | None) -> dict[str, Any]:
    """The answer of ``form``."""
    answer: dict[str, Any] = {
        "count": form.count,
        "free": form.labels,
        "cells": render_locks(explain_cells(crystal, form)),
        "basis": form.basis.tolist(),
        "order": crystal.group.order,
        "fixed_axes": find_fixed_axes(form).tolist(),
        "operations": crystal.operation_names,
        "frame": render_frame(crystal),
    }
    if pose is not None:
        answer["posed_cells"] = render_locks(explain_cells(crystal, form, pose.matrix))
    return answer


def render_locks(locks: list[CellLock]) -> list[list[dict[str, Any]]]:
    """Three rows of three cells."""
    cells = [
        {"state": lock.state, "terms": lock.terms.tolist(), "because": lock.because, "equals": lock.equals}
        for lock in locks
    ]
    return [cells[0:3], cells[3:6], cells[6:9]]


def render_frame(crystal: Crystal) -> dict[str, Any]:
    """Where the crystal frame lies."""
    return {
        "M": None if crystal.M is None else crystal.M.tolist(),
        "volume": crystal.volume,
        "sentence": crystal.frame_sentence,
    }


def render_pose(pose: Pose) -> dict[str, Any]:
    """The pose in three ways."""
    return {"matrix": pose.matrix.tolist(), "bunge": pose.bunge, "quaternion": pose.quaternion}


def render_principal(principal: Principal) -> dict[str, Any]:
    """Principal values and axes, as far as they are determined."""
    return {
        "values": principal.values.tolist(),
        "axes": principal.axes.tolist(),
        "arbitrary": list(principal.arbitrary),
        "shape": principal.shape,
        "sigma": render_array(principal.sigma),
        "axis_sigma": render_array(principal.axis_sigma),
    }


def render_nearest(crystal: Crystal, principal: Principal) -> list[dict[str, Any]]:
    """The nearest row and plane of every axis; null for an axis that is not determined or where there is no cell."""
    known = [index for index in range(3) if crystal.M is not None and not principal.arbitrary[index]]
    nearest: list[dict[str, Any]] = [
        {"row": None, "row_off": None, "plane": None, "plane_off": None} for _ in principal.arbitrary
    ]
    if known:
        rows, planes = (find_all_nearest(crystal, principal.axes[known], kind) for kind in ("row", "normal"))
        for index, row, plane in zip(known, rows, planes, strict=True):
            nearest[index] = {"row": row.text, "row_off": row.off, "plane": plane.text, "plane_off": plane.off}
    return nearest


def render_state(crystal: Crystal, tensor: PropertyTensor, pose: Pose) -> dict[str, Any]:
    """The answer of ``state``."""
    estimate = tensor.estimate
    posed = estimate.turn(pose.matrix, "specimen frame")
    principal = find_principal(estimate)
    anti = (estimate.matrix - estimate.matrix.T) / 2.0
    answer: dict[str, Any] = {
        "matrix": estimate.matrix.tolist(),
        "posed": posed.matrix.tolist(),
        "free": dict(zip(tensor.form.labels, tensor.free.tolist(), strict=True)),
        "misfit": tensor.misfit,
        "principal": {**render_principal(principal), "nearest": render_nearest(crystal, principal)},
        "antisymmetric": [float(anti[2, 1]), float(anti[0, 2]), float(anti[1, 0])],
        "quadric": name_quadric(principal.values),
        "pose": render_pose(pose),
        "frame": render_frame(crystal),
    }
    if estimate.covariance is not None:
        answer["sigma_matrix"] = render_array(estimate.sigma_matrix)
        answer["sigma_posed"] = render_array(posed.sigma_matrix)
    return answer


def render_estimate(estimate: Estimate) -> dict[str, Any]:
    """Matrix and its σ."""
    return {"matrix": estimate.matrix.tolist(), "sigma_matrix": render_array(estimate.sigma_matrix)}


def render_direction(direction: Direction) -> Any:
    """A direction as a reader takes it back: in index form where it has one."""
    if direction.kind == "row" or direction.kind == "normal":
        return format_indices(direction.kind, direction.values)
    if direction.kind == "specimen":
        return {"specimen": list(direction.values)}
    return list(direction.values)


def render_reading(reading: Reading) -> dict[str, Any]:
    """A reading without what it does not carry."""
    answer: dict[str, Any] = {"kind": reading.kind}
    if reading.direction is not None:
        answer["direction"] = render_direction(reading.direction)
    if reading.second is not None:
        answer["second"] = render_direction(reading.second)
    for name in ("value", "sigma", "direction_sigma", "bar", "batch"):
        value = getattr(reading, name)
        if value is not None:
            answer[name] = value
    return answer


def render_fit(crystal: Crystal, fit: Fit, pose: Pose) -> dict[str, Any]:
    """The answer of ``fit``."""
    answer: dict[str, Any] = {
        "free": fit.form.labels,
        "values": render_array(fit.free),
        "covariance": render_array(fit.free_covariance),
        "matrix": None,
        "sigma_matrix": None,
        "chi2": fit.chi2,
        "dof": fit.dof,
        "p_value": fit.p_value,
        "scale": fit.scale,
        "covariance_from": fit.covariance_from,
        "readings": _render_readings(fit),
        "determined": fit.determined,
        "rank": fit.rank,
        "undetermined": [_render_unseen(unseen) for unseen in fit.undetermined],
        "condition": fit.condition,
        "principal": None,
        "symmetry_test": None,
        "note": " ".join(fit.notes) or None,
        "frame": render_frame(crystal),
    }
    if fit.estimate is not None and fit.principal is not None:
        posed = fit.estimate.turn(pose.matrix, "specimen frame")
        answer |= render_estimate(fit.estimate)
        answer |= {"posed": posed.matrix.tolist(), "sigma_posed": render_array(posed.sigma_matrix)}
        answer["principal"] = {**render_principal(fit.principal), "nearest": render_nearest(crystal, fit.principal)}
    if fit.symmetry_test is not None:
        test = fit.symmetry_test
        answer["symmetry_test"] = {
            "delta_chi2": test.delta_chi2,
            "delta_dof": test.delta_dof,
            "p_value": test.p_value,
            "statistic": test.statistic,
        }
    return answer


def _render_readings(fit: Fit) -> list[dict[str, Any]] | None:
    if fit.readings is None:
        return None
    names = ("predicted", "residual", "standardised", "leverage", "sigma_used")
    columns = [render_array(getattr(fit.readings, name)) for name in names]
    return [dict(zip(names, row, strict=True)) for row in zip(*columns, strict=True)]


def _render_unseen(unseen: Unseen) -> dict[str, Any]:
    return {
        "combination": unseen.combination.tolist(),
        "matrix": unseen.matrix.tolist(),
        "suggest": render_reading(unseen.suggestion),
    }


def render_cells(matrix: FloatArray) -> dict[str, float]:
    """The nine cells by label."""
    return dict(zip(LABELS, matrix.ravel().tolist(), strict=True))
