"""The indicatrix of a transparent crystal: its principal indices, its optic axes, and the two waves of any normal.

The indicatrix is the quadric of the impermeability B = ε⁻¹ (M. Born and E. Wolf, Principles of Optics, 7th ed.,
section 15.2, from memory). With n_α ≤ n_β ≤ n_γ the principal indices, x and z the principal axes of n_α and n_γ, and
the optic axes a₁ a₂ = cos V z ± sin V x,

    B = n_β⁻² 1 − ½ (n_α⁻² − n_γ⁻²) (a₁ a₂ᵀ + a₂ a₁ᵀ),   cos² V = (n_β⁻² − n_γ⁻²) / (n_α⁻² − n_γ⁻²).

So across a wave normal at the angles θ₁ θ₂ from the two axes, the two values 1/n² differ by
(n_α⁻² − n_γ⁻²) sin θ₁ sin θ₂, and D lies along the bisectors of the projected axes: a product, where a difference of
indices would lose its digits near an optic axis.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np
import numpy.typing as npt

from app.errors import InputError
from app.tensor.estimate import Estimate
from app.tensor.pose import PARALLEL_LIMIT
from app.tensor.principal import Shape, find_principal
from app.tensor.printing import print_value
from app.tensor.quadric import sign_values

FloatArray = npt.NDArray[np.float64]
BoolArray = npt.NDArray[np.bool_]

LOWEST: Final = 1e-9
HIGHEST: Final = 1e9
"""Principal values of a relative permittivity that are taken; beyond, a unit has been mistaken."""

_ROUNDING: Final = 8.0 * float(np.finfo(np.float64).eps)


@dataclass(frozen=True)
class Indicatrix:
    """The optical constants of a crystal at one wavelength.

    Attributes:
        values: shape (3,), principal relative permittivities, descending (γ β α); equal ones made exactly equal.
        axes: shape (3, 3), their axes as rows, right-handed, in the crystal frame; an axis that is not determined is
            one of many, and of no use but for computing.
        arbitrary: for each of these whether it is not determined.
        shape: "isotropic", "uniaxial" or "biaxial", by symmetry or within rounding.
        optic_axes: shape (2, 3), unit vectors a₁ a₂; of a uniaxial crystal both lie along the one axis (the second
            reversed where it is negative); of an isotropic one they mean nothing.
        half_angle: V between either axis and the axis of the largest index, radians.
        spread: n_α⁻² − n_γ⁻²; 0 for an isotropic crystal.
        rounding: the angle (radians) by which rounding of the permittivity alone can move an optic axis.
    """

    values: FloatArray
    axes: FloatArray
    arbitrary: tuple[bool, bool, bool]
    shape: Shape
    optic_axes: FloatArray
    half_angle: float
    spread: float
    rounding: float

    @property
    def doubt(self) -> float:
        """Sine of the angle to an optic axis below which a wave normal counts as along it."""
        return max(PARALLEL_LIMIT, self.rounding)

    @property
    def impermeability(self) -> FloatArray:
        """B, shape (3, 3), in the crystal frame."""
        product: FloatArray = (self.axes.T / self.values) @ self.axes
        return product

    @property
    def indices(self) -> FloatArray:
        """Principal indices of refraction, shape (3,), descending."""
        roots: FloatArray = np.sqrt(self.values)
        return roots


@dataclass(frozen=True)
class Waves:
    """The two plane waves of each wave normal, the slow one (of larger index) first.

    Attributes:
        indices: shape (..., 2).
        birefringence: shape (...), slow less fast, exact also where it is small.
        vibrations: shape (..., 2, 3), unit vectors of D; where ``equal`` some pair across the normal.
        tilts: shape (..., 2), nᵀB d, the part of E along the normal for a unit D.
        equal: shape (...), whether the two waves run alike, so that every D across the normal will do.
        conical: shape (...), whether the normal is an optic axis of a biaxial crystal, where the rays fill a cone.
    """

    indices: FloatArray
    birefringence: FloatArray
    vibrations: FloatArray
    tilts: FloatArray
    equal: BoolArray
    conical: BoolArray


def build_indicatrix(estimate: Estimate) -> Indicatrix:
    """The indicatrix of a relative permittivity in the crystal frame; its covariance is not looked at.

    Raises:
        InputError: not positive definite, or with a principal value outside 1e-9 to 1e9.
    """
    principal = find_principal(Estimate(estimate.matrix, None, estimate.frame))
    _check_values(principal.values)
    values = _settle(principal.values, principal.shape)
    largest, middle, smallest = (float(value) for value in values)
    sine, cosine = 0.0, 1.0
    if principal.shape == "biaxial":
        # From differences of the permittivities, where differences of their inverses would lose more digits.
        sine = np.sqrt(largest * (middle - smallest) / (middle * (largest - smallest)))
        cosine = np.sqrt(smallest * (largest - middle) / (middle * (largest - smallest)))
    elif principal.shape == "uniaxial" and middle == largest:
        sine, cosine = 1.0, 0.0
    along, across = cosine * principal.axes[0], sine * principal.axes[2]
    optic_axes = np.array([along + across, along - across])
    gaps = [gap for gap in (largest - middle, middle - smallest) if gap > 0.0]
    return Indicatrix(
        values=values,
        axes=principal.axes,
        arbitrary=principal.arbitrary,
        shape=principal.shape,
        optic_axes=optic_axes / np.linalg.norm(optic_axes, axis=1, keepdims=True),
        half_angle=float(np.arctan2(sine, cosine)),
        spread=(largest - smallest) / (largest * smallest),
        rounding=_ROUNDING * largest * sum(1.0 / gap for gap in gaps),
    )


def _check_values(values: FloatArray) -> None:
    shown = ", ".join(print_value(float(value)) for value in values)
    if np.any(sign_values(values) <= 0.0):
        raise InputError(
            f"This relative permittivity is not positive definite (principal values {shown}), so it has no indices of "
            "refraction.",
            hint="Check signs and cells. Where a permittivity is truly negative, as at a resonance, light does not "
            "pass as two transparent waves.",
        )
    if values[0] > HIGHEST or values[2] < LOWEST:
        raise InputError(
            f"The principal values {shown} of this relative permittivity are not all between {LOWEST:g} and "
            f"{HIGHEST:g}.",
            hint="Give the permittivity relative to that of vacuum: the square of an index of refraction.",
        )


def _settle(values: FloatArray, shape: Shape) -> FloatArray:
    """Equal values made exactly equal."""
    if shape == "isotropic":
        return np.full(3, float(np.mean(values)))
    if shape == "biaxial":
        return values.copy()
    upper = values[0] - values[1] < values[1] - values[2]
    pair = slice(0, 2) if upper else slice(1, 3)
    settled = values.copy()
    settled[pair] = np.mean(values[pair])
    return settled


def find_waves(indicatrix: Indicatrix, normals: FloatArray) -> Waves:
    """The two waves of unit wave normals (..., 3) in the crystal frame."""
    inverse = 1.0 / indicatrix.values
    squares = np.square(normals @ indicatrix.axes.T)
    # Sum and product of the two values 1/n², without a subtraction.
    others = np.stack([squares[..., [1, 2]], squares[..., [0, 2]], squares[..., [0, 1]]], axis=-2).sum(axis=-1)
    total = others @ inverse
    product = squares @ (np.prod(inverse) / inverse)
    sines, projected = _project(indicatrix.optic_axes, normals)
    equal = np.any(sines <= indicatrix.doubt, axis=-1) | (indicatrix.spread == 0.0)
    difference = np.where(equal, 0.0, indicatrix.spread * np.prod(sines, axis=-1))
    fast = (total + difference) / 2.0
    slow = np.where(equal, fast, product / fast)
    inverse_squares = np.stack([slow, fast], axis=-1)
    roots = np.sqrt(inverse_squares)
    birefringence = difference / (roots[..., 0] * roots[..., 1] * (roots[..., 0] + roots[..., 1]))
    vibrations = _find_vibrations(projected, normals, equal)
    cosines = normals @ indicatrix.optic_axes.T
    reach = vibrations @ indicatrix.optic_axes.T
    tilts = -indicatrix.spread / 2.0 * (cosines[..., None, 0] * reach[..., 1] + cosines[..., None, 1] * reach[..., 0])
    conical = equal & (indicatrix.shape == "biaxial")
    tilts = np.where(equal[..., None], 0.0, tilts)
    return Waves(1.0 / roots, birefringence, vibrations, tilts, equal, conical)


def _project(optic_axes: FloatArray, normals: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Sines (..., 2) of the angles from the optic axes, and the axes projected across the normal, of unit length."""
    n = normals[..., None, :]
    # a − n (n·a) = n × (a × n), which keeps its digits where a and n are nearly parallel.
    crossed = np.cross(np.broadcast_to(optic_axes, (*normals.shape[:-1], 2, 3)), n)
    sines = np.linalg.norm(crossed, axis=-1)
    across = np.cross(n, crossed)
    lengths = np.linalg.norm(across, axis=-1, keepdims=True)
    return sines, across / np.where(lengths > 0.0, lengths, 1.0)


def _find_vibrations(projected: FloatArray, normals: FloatArray, equal: BoolArray) -> FloatArray:
    """Bisectors of the projected axes, shape (..., 2, 3): the inner one is slow, the outer one fast."""
    inner = projected[..., 0, :] + projected[..., 1, :]
    outer = projected[..., 0, :] - projected[..., 1, :]
    inner_longer = np.linalg.norm(inner, axis=-1, keepdims=True) >= np.linalg.norm(outer, axis=-1, keepdims=True)
    longer = np.where(inner_longer, inner, outer)
    any_across = _find_across(normals)
    longer = np.where(equal[..., None], any_across, longer)
    first = longer / np.linalg.norm(longer, axis=-1, keepdims=True)
    second = np.cross(normals, first)
    pair = np.where(inner_longer[..., None], np.stack([first, second], axis=-2), np.stack([second, first], axis=-2))
    return choose_signs(pair)


def _find_across(normals: FloatArray) -> FloatArray:
    """Some vector across each unit vector (..., 3)."""
    start = np.eye(3)[np.argmin(np.abs(normals), axis=-1)]
    crossed: FloatArray = np.cross(start, normals)
    return crossed


def choose_signs(vectors: FloatArray) -> FloatArray:
    """One repeatable sense of each vector (..., 3): its largest component, the first of equal ones, is positive."""
    sizes = np.abs(vectors)
    largest = np.argmax(sizes > np.max(sizes, axis=-1, keepdims=True) - 1e-9, axis=-1)[..., None]
    signs = np.sign(np.take_along_axis(vectors, largest, axis=-1))
    return vectors * np.where(signs == 0.0, 1.0, signs) + 0.0
