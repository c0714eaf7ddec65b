"""Nearly equal principal values, and values from 1e-30 to 1e30.

The eigenvalues of a symmetric matrix are as well conditioned as can be: right to some last bits of the largest. Its
axes turn by some last bits over the relative gap, and below a gap of 1e-9 they are not shown as determined.
"""

from __future__ import annotations

import numpy as np
import pytest
from mpmath import mpf
from scipy.spatial.transform import Rotation

from tests.hard import reference as exact
from tests.hard.conftest import Ask

TRICLINIC = {"cell": [8.141, 12.79, 7.157, 94.225, 116.597, 87.772], "group": "-1"}
GAPS = [1e-2, 1e-4, 1e-6, 1e-7, 1e-8, 1e-9, 1e-10, 1e-12, 1e-13, 1e-14, 1e-15, 0.0]
SCALES = [1e-30, 1.0, 1e30]
TURN = Rotation.from_euler("zxz", [0.3, 1.1, -0.7]).as_matrix()


def build(values: list[float]) -> np.ndarray:
    """A symmetric matrix of doubles with nearly these principal values; what they are exactly, fifty digits tell."""
    matrix = TURN @ np.diag(values) @ TURN.T
    return (matrix + matrix.T) / 2


@pytest.mark.parametrize("scale", SCALES)
@pytest.mark.parametrize("gap", GAPS)
@pytest.mark.parametrize("pair", ["high", "low"])
def test_nearly_equal_values(gap: float, scale: float, pair: str, ask: Ask) -> None:
    values = [2 * scale * (1 + gap), 2 * scale, scale] if pair == "high" else [2 * scale, scale * (1 + gap), scale]
    matrix = build(values)
    exact_values, exact_axes = exact.principal(exact.exact(matrix))
    found = ask("state", {"crystal": TRICLINIC, "tensor": {"matrix": matrix.tolist()}})["principal"]
    assert exact.difference(found["values"], exact_values) < 8 * exact.EPS * 2 * scale
    alone = 2 if pair == "high" else 0
    close = [0, 1] if pair == "high" else [1, 2]
    held = [0, 1, 2] if not found["arbitrary"][close[0]] else [alone]
    for k in held:
        own = min(abs(exact_values[k] - exact_values[j]) for j in range(3) if j != k) / exact_values[0]
        turn = float(exact.angle_between(exact.vector(found["axes"][k]), exact_axes[k]))
        assert min(turn, 180 - turn) < np.rad2deg(40 * exact.EPS / float(own))
    true_gap = abs(exact_values[close[0]] - exact_values[close[1]]) / exact_values[0]
    if true_gap > 2e-9:
        assert found["shape"] == "biaxial" and not any(found["arbitrary"])
    elif true_gap < 0.5e-9:
        assert found["shape"] == "uniaxial"
        assert [k for k in range(3) if found["arbitrary"][k]] == close
    axes = np.array(found["axes"])
    assert axes @ axes.T == pytest.approx(np.eye(3), abs=8 * exact.EPS)
    assert np.linalg.det(axes) == pytest.approx(1.0)


@pytest.mark.parametrize("scale", SCALES)
def test_three_nearly_equal_values(scale: float, ask: Ask) -> None:
    matrix = build([scale, scale * (1 - 1e-13), scale * (1 - 2e-13)])
    found = ask("state", {"crystal": TRICLINIC, "tensor": {"matrix": matrix.tolist()}})["principal"]
    assert found["shape"] == "isotropic"
    assert found["arbitrary"] == [True] * 3


@pytest.mark.parametrize("scale", SCALES)
@pytest.mark.parametrize("ratio", [1e-3, 1e-6, 1e-9, 1e-12])
def test_a_rod_of_a_nearly_singular_tensor(ratio: float, scale: float, ask: Ask) -> None:
    matrix = build([scale, 0.5 * scale, ratio * scale])
    directions = [[1, 0, 0], [0.3, -0.2, 0.9], TURN[:, 2].tolist(), TURN[:, 0].tolist()]
    answer = ask("along", {"crystal": TRICLINIC, "tensor": {"matrix": matrix.tolist()}, "directions": directions})
    tensor = exact.exact(matrix)
    for direction, value, rod in zip(directions, answer["values"], answer["rod"], strict=True):
        n = exact.unit(direction)
        assert exact.difference(value, exact.value(tensor, n)) < 12 * exact.EPS * scale
        wanted = exact.rod(tensor, n)
        # The reciprocal value is known as well as the smallest principal value is: to ε / ratio of itself.
        assert abs(mpf(rod) / wanted - 1) < 60 * exact.EPS / ratio


def test_a_tensor_without_inverse_has_no_rod(ask: Ask) -> None:
    for values in ([1, 0.5, 0], [1e30, 1e14, 0], [1, 0.5, 1e-15]):
        answer = ask(
            "along", {"crystal": TRICLINIC, "tensor": {"matrix": build(values).tolist()}, "directions": [[1, 0, 0]]}
        )
        assert answer["rod"] == [None]
    zero = ask(
        "along", {"crystal": TRICLINIC, "tensor": {"matrix": np.zeros((3, 3)).tolist()}, "directions": [[1, 0, 0]]}
    )
    assert zero["values"] == [0] and zero["rod"] == [None] and zero["angle"] == [None]


@pytest.mark.parametrize("scale", SCALES)
def test_sigma_of_axes_close_together(scale: float, ask: Ask) -> None:
    # First order: the axes of two values Δ apart turn by σ₁₂/Δ (Golub and Van Loan, section 8.1): Δ = 1e-3, σ₁₂ = 1e-6.
    cells = {"11": (2 + 1e-3) * scale, "12": 0, "13": 0, "22": 2 * scale, "23": 0, "33": scale}
    covariance = np.diag([(1e-6 * scale) ** 2] * 6).tolist()
    found = ask("state", {"crystal": TRICLINIC, "tensor": {"free": cells, "covariance": covariance}})["principal"]
    assert found["axis_sigma"][0][1] == pytest.approx(np.rad2deg(1e-6 / 1e-3), rel=1e-9)
    assert found["sigma"] == pytest.approx([1e-6 * scale] * 3, rel=1e-12)
    assert not any(found["arbitrary"])
    # Values that differ by less than their uncertainty have no axes of their own.
    cells["11"] = (2 + 1e-6) * scale
    close = ask("state", {"crystal": TRICLINIC, "tensor": {"free": cells, "covariance": covariance}})["principal"]
    assert close["arbitrary"] == [True, True, False]
