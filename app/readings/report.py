"""A fit as plain text: the tensor with its frame sentence first, then everything that it rests on."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
import numpy.typing as npt

from app.crystal.crystal import Crystal
from app.crystal.direction import Direction, format_indices, format_number, typeset_indices
from app.crystal.lattice import find_nearest
from app.errors import InputError
from app.readings.fit import Fit
from app.readings.reading import Reading
from app.readings.unseen import Unseen
from app.tensor.estimate import Estimate
from app.tensor.form import express_cells
from app.tensor.pose import Pose
from app.tensor.principal import Principal
from app.tensor.printing import print_value

FloatArray = npt.NDArray[np.float64]

SYMMETRY_LEVEL = 0.05


def print_fit(
    crystal: Crystal, fit: Fit, *, readings: Sequence[Reading] | None = None, pose: Pose | None = None
) -> str:
    """The report of a fit.

    Args:
        crystal: that was fitted.
        fit: the result.
        readings: the readings in their order, to stand beside their residuals.
        pose: a specimen frame in which the tensor is shown too.
    """
    lines = [f"Group {crystal.group.symbol}. {crystal.frame_sentence}."]
    if crystal.cell is not None:
        a, b, c, alpha, beta, gamma = (f"{value:.6g}" for value in crystal.cell.parameters)
        lines[0] = f"Cell {a} {b} {c} Å, {alpha} {beta} {gamma}°. {lines[0]}"
    if fit.estimate is None or fit.principal is None:
        return "\n".join([*lines, "", *print_unseen(fit)])
    unit = f", {fit.estimate.unit}" if fit.estimate.unit else ""
    lines += ["", f"Tensor in the crystal frame{unit}", *_print_matrix(crystal, fit, fit.estimate, None)]
    if pose is not None:
        posed = fit.estimate.turn(pose.matrix, "specimen frame")
        lines += ["", f"Tensor in the specimen frame{unit}", *_print_matrix(crystal, fit, posed, pose)]
    lines += ["", f"Principal values{unit}, {fit.principal.shape}", *_print_axes(crystal, fit.principal)]
    lines += ["", *_print_quality(fit), describe_symmetry_test(crystal, fit)]
    if readings is not None:
        lines += ["", *_print_readings(fit, readings)]
    return "\n".join([*lines, *(["", *fit.notes] if fit.notes else [])])


def print_unseen(fit: Fit) -> list[str]:
    """What stands between the readings and a tensor, one line for each unseen combination."""
    return [
        *fit.notes,
        *(
            f"  unseen: {describe_combination(fit, unseen)}; {describe_suggestion(unseen)} would see it"
            for unseen in fit.undetermined
        ),
    ]


def describe_combination(fit: Fit, unseen: Unseen) -> str:
    """The change of the free cells that alters no reading, like "11 by +0.71 with 33 by −0.71"."""
    terms = [
        f"{label} by {'+' if value > 0 else '−'}{abs(value):.3g}"
        for label, value in zip(fit.form.labels, unseen.combination, strict=True)
        if abs(value) > 1e-9
    ]
    return "the change of " + " with ".join([terms[0], ", ".join(terms[1:])] if len(terms) > 1 else terms)


def describe_suggestion(unseen: Unseen) -> str:
    """The suggested reading in words."""
    reading = unseen.suggestion
    assert reading.direction is not None
    cause = describe_direction(reading.direction)
    if reading.second is None:
        return f"a reading along {cause}"
    return f"a reading of the effect along {describe_direction(reading.second)} of a cause along {cause}"


def describe_direction(direction: Direction) -> str:
    """A direction in print: ``[−201]``, ``n(−201)``, or a vector with its frame."""
    if direction.kind == "row" or direction.kind == "normal":
        return typeset_indices(format_indices(direction.kind, direction.values))
    inner = ", ".join(format_number(round(value, 6)) for value in direction.values).replace("-", "−")
    return f"({inner}) in the {'specimen' if direction.kind == 'specimen' else 'crystal'} frame"


def describe_symmetry_test(crystal: Crystal, fit: Fit) -> str:
    """One sentence: refuted, not refuted, or cannot tell. Readings never confirm a class."""
    group, test = crystal.group.symbol, fit.symmetry_test
    if crystal.group.is_triclinic:
        return f"Symmetry: the group {group} restricts nothing that readings could test."
    if test is None or test.p_value is None:
        return f"Symmetry: these readings cannot tell whether the crystal obeys {group} as it is oriented here."
    value = (
        f"{'χ²' if test.statistic == 'chi2' else 'F'} test, {test.delta_dof} degrees of freedom, p = {test.p_value:.3g}"
    )
    if test.p_value < SYMMETRY_LEVEL:
        return f"Symmetry: the readings contradict {group} as it is oriented here ({value})."
    return f"Symmetry: the readings do not contradict {group} as it is oriented here ({value}); they cannot confirm it."


def _print_matrix(crystal: Crystal, fit: Fit, estimate: Estimate, pose: Pose | None) -> list[str]:
    axes = ("x1", "x2", "x3") if pose is None else ("x", "y", "z")
    cells = express_cells(fit.form, None if pose is None else pose.matrix)
    sigma = estimate.sigma_matrix
    texts = [
        "0" if state == "zero" else print_cell(estimate.matrix.flat[position], sigma, position)
        for position, state in enumerate(cells.states)
    ]
    width = max(len(text) for text in texts) + 3
    header = "     " + "".join(axis.rjust(width) for axis in axes)
    rows = [
        f"  {axes[row]:<3}" + "".join(texts[3 * row + column].rjust(width) for column in range(3)) for row in range(3)
    ]
    return [header, *rows]


def print_cell(value: float, sigma: FloatArray | None, position: int) -> str:
    """One cell as value(uncertainty)."""
    return print_value(float(value), None if sigma is None else float(sigma.flat[position]))


def _print_axes(crystal: Crystal, principal: Principal) -> list[str]:
    lines = []
    for number in range(3):
        sigma = None if principal.sigma is None else float(principal.sigma[number])
        line = f"  p{number + 1}  {print_value(float(principal.values[number]), sigma):<14}"
        axis = principal.axes[number]
        if principal.arbitrary[number]:
            line += "any direction" + ("" if principal.shape == "isotropic" else " in the plane across the third axis")
        else:
            line += (
                "("
                + ", ".join(f"{round(float(component), 4) + 0.0:+.4f}" for component in axis).replace("-", "−")
                + ")"
            )
            line += _print_turns(principal, number)
            if crystal.M is not None:
                for near in (find_nearest(crystal, axis, "row"), find_nearest(crystal, axis, "normal")):
                    line += f"; {near.off:.1f}° off {typeset_indices(near.text)}"
        lines.append(line)
    return lines


def _print_turns(principal: Principal, number: int) -> str:
    if principal.axis_sigma is None:
        return ""
    turns = [
        f"±{principal.axis_sigma[number, other]:.2g}° toward p{other + 1}"
        for other in range(3)
        if other != number
        and np.isfinite(principal.axis_sigma[number, other])
        and principal.axis_sigma[number, other] > 1e-6
    ]
    return ", " + ", ".join(turns) if turns else ""


def _print_quality(fit: Fit) -> list[str]:
    parts = [f"χ² = {fit.chi2:.4g} on {fit.dof} degrees of freedom"]
    if fit.p_value is not None:
        parts.append(f"p = {fit.p_value:.3g}")
    if fit.scale is not None and fit.covariance_from == "scatter":
        parts.append(f"standard deviation of a reading from the scatter {fit.scale:.3g}")
    if fit.condition is not None:
        parts.append(f"condition {fit.condition:.3g}")
    return [", ".join(parts) + "."]


def _print_readings(fit: Fit, readings: Sequence[Reading]) -> list[str]:
    results = fit.readings
    assert results is not None
    if len(readings) != len(results.predicted):
        raise InputError("The readings to print are not those that were fitted.", field="readings")
    lines = ["Readings: kind, direction, value, predicted, residual, residual over its σ, leverage"]
    for number, reading in enumerate(readings):
        where = [describe_direction(part) for part in (reading.direction, reading.second) if part is not None]
        assert reading.value is not None
        standardised = results.standardised[number]
        cells = (
            f"{reading.kind:<10}",
            f"{' '.join(where) or '–':<22}",
            f"{print_value(reading.value, reading.sigma):>12}",
            f"{results.predicted[number]:>10.5g}",
            f"{results.residual[number]:>+10.2g}",
            f"{standardised:>+7.2f}" if np.isfinite(standardised) else "      –",
            f"{results.leverage[number]:>6.2f}",
        )
        lines.append("  " + " ".join(cells).replace("-", "−"))
    return lines
