"""What the members of requests and answers mean, where their shape does not say so itself; with shape and unit.

One line by the member's name, or by ``Shape.member`` where a name means several things. ``describe_members`` puts them
into the OpenAPI document, from which the API page is made; a test finds a member that has neither.
"""

from __future__ import annotations

from typing import Any, Final

_DIRECTION: Final = 'text such as "[1 0 -1]" (row) or "(1 0 -1)" (plane normal), [x, y, z] in the crystal frame, or {}'

MEANINGS: Final[dict[str, str]] = {
    # Crystal and tensor
    "crystal": "cell, group and frame rule",
    "CifAnswer.crystal": "cell, group and frame rule as they can be sent to every other call",
    "cell": "label of one cell of the tensor, row then column, such as 13",
    "cells": "3 by 3, one entry per cell of the tensor",
    "Crystal.frame": "frame rule, such as x3=c x2=b*: how the crystal frame is attached to the cell",
    "frame": "sentence that names the crystal frame",
    "OpticsAnswer.frame": "the crystal frame: its basis vectors and the sentence that names it",
    "StateAnswer.frame": "the crystal frame: its basis vectors and the sentence that names it",
    "tensor": "the tensor in the crystal frame, in the caller's unit",
    "FitRequest.tensor": "how the tensor transforms: parity and inner symmetry",
    "Change.tensor": "new values of the current property, in its unit",
    "parity": "polar, or axial: changes sign under improper operations",
    "intrinsic": "symmetric, general (nine independent cells) or antisymmetric",
    "matrix": "3 by 3, in the crystal frame, in the tensor's unit; null where it is not determined",
    "MatrixPose.matrix": "3 by 3 rotation; its rows are the specimen axes in the crystal frame",
    "sigma_matrix": "3 by 3, standard deviations in the crystal frame, in the tensor's unit",
    "posed": "3 by 3, in the specimen frame, in the tensor's unit",
    "sigma_posed": "3 by 3, standard deviations in the specimen frame, in the tensor's unit",
    "free": "value of every free cell by its label, in the tensor's unit",
    "FormAnswer.free": "labels of the free cells in row order",
    "FitAnswer.free": "labels of the free cells in row order; the covariance is over them",
    "covariance": "square, over the free cells in row order, in the square of the tensor's unit",
    "count": "number of free cells",
    "operations": "names of the group's operations in the cell's axes",
    "state": "free, zero, or tied to other cells",
    "because": "the operation, or the two, that lock the cell",
    "quadric": "name of the quadric that the tensor's values draw",
    "principal": "principal values and axes",
    "OpticsAnswer.principal": "principal refractive indices and axes",
    "values": "three numbers, descending, in the tensor's unit",
    "FitAnswer.values": "one number per free cell, in their order, in the readings' unit; null if not determined",
    "BranchedPrincipal.values": "three numbers, descending, in the inverse unit of the variable",
    "shape": "isotropic, uniaxial or biaxial, by which principal values coincide",
    "PartChange.shape": "plate, wafer, bar, cube or prism",
    "nearest": "row and plane nearest to each of the three axes",
    "row": "row [u v w] nearest to the axis",
    "row_off": "angle between axis and row, degrees",
    "plane": "plane (h k l) whose normal is nearest to the axis",
    "plane_off": "angle between axis and plane normal, degrees",
    # Directions and poses
    "direction": f"a direction: {_DIRECTION}".format('{"specimen": [x, y, z]}'),
    "second": "the second direction of kinds that need one (across, difference), or the normal of a sheet",
    "directions": f"list of directions; each {_DIRECTION}".format('{"specimen": [x, y, z]}'),
    "xyz": "three numbers in the crystal frame; the length does not matter",
    "specimen": "three numbers in the specimen frame of the pose; the length does not matter",
    "pose": "how the specimen axes lie in the crystal frame; null is the crystal frame itself",
    "StateAnswer.pose": "the pose as matrix, Bunge angles and quaternion",
    "exact": "[specimen axis, direction]: this axis lies exactly on this direction",
    "toward": "direction toward which a tilt or a second axis goes",
    "ExactPose.toward": "[specimen axis, direction]: this axis is turned toward this direction as far as it can",
    "LevelPart.toward": "laboratory direction that the direction is brought as near to as can be",
    "axis": "direction of the axis of the turn",
    "TargetPart.axis": "specimen axis x, y or z of a kept pose, or principal axis 1, 2 or 3 by descending value",
    "angle": "degrees, right-handed about the axis",
    "bunge": "three angles φ1, Φ, φ2 in degrees",
    "quaternion": "four numbers, the real part first",
    "TiltPose.from": "direction from which z is tilted",
    "tilt": "degrees",
    "x": "direction toward which the specimen axis x goes",
    "basis": "3 by 3, column j is the new axis j in the old basis",
    "rotation": "3 by 3, from the old crystal frame to the new one",
    # Readings and fits
    "kind": "what the reading is: value along, component across, difference, mean, rod or sheet",
    "Still.kind": "what the directions in which nothing expands form: a cone, planes, a plane, an axis, all or none",
    "value": "in the property's unit",
    "DegreeTest.value": "value of the test statistic, without unit",
    "TolerancePart.value": "largest change of the value that is allowed, in the property's unit",
    "sigma": "standard deviation, in the unit of the value; null where it is not known",
    "bar": "name of the piece; readings of one bar share the error of its direction",
    "batch": "name of the batch; readings of one batch share a relative error",
    "batches": "relative standard deviation of each batch by its name, without unit",
    "readings": "list of readings",
    "FitAnswer.readings": "per reading, in the order sent: what the fit makes of it",
    "Change.readings": "the new list of readings of the current property",
    "predicted": "what the fit predicts for the reading, in its unit",
    "leverage": "between 0 and 1: how much the reading fixes its own prediction",
    "sigma_used": "standard deviation that the reading was weighed with, in its unit",
    "chi2": "weighted sum of squared residuals, without unit",
    "dof": "degrees of freedom",
    "p_value": "probability of a statistic as large or larger",
    "scale": "factor on the standard deviations from the scatter, without unit",
    "covariance_from": "whether the covariance rests on the stated sigma or on the scatter of the readings",
    "determined": "whether the readings determine every free cell",
    "rank": "number of combinations of free cells that are determined",
    "undetermined": "the combinations that no reading sees, with a reading that would",
    "condition": "condition number of the weighted design, without unit",
    "condition_before": "condition number before the new readings, without unit",
    "symmetry_test": "whether the readings agree with the symmetry that was claimed",
    "delta_chi2": "rise of the weighted sum of squares through the symmetry, without unit",
    "delta_dof": "degrees of freedom that the symmetry saves",
    "statistic": "which test: chi2 with stated sigma, F without",
    "level": "probability, between 0 and 1",
    "StageRequest.level": "direction that shall lie level, and toward what",
    "bound": "chi2 that a principal axis may have at this level, without unit",
    "note": "what was assumed or is unusual, in a sentence; null where there is nothing",
    "SightingPart.note": "text of the reader's own",
    "add": "how many bars to plan",
    # Conversion, CIF, surface
    "audit": "cell by cell, from which old cells the new one comes",
    "from": "cells of the old tensor that enter, with their factors",
    "ConvertRequest.from": "the crystal as the tensor is given",
    "NewSampleRequest.from": "id of the sample to copy",
    "TargetPart.from": "direction from which the off-cut is counted",
    "to": "the crystal as the tensor is wanted",
    "misfit": "how far the two cells are from each other, without unit",
    "text": "the whole text",
    "texts": "list of texts of CIFs, each with its name where it has one",
    "block": "name of the data block; needed where the file has several crystals",
    "blocks": "names of the data blocks",
    "formula": "chemical formula as it stands in the file",
    "surface": "quadric, value or flux",
    "triangles": "n by 3, indices into the vertices",
    # Series and strain
    "at": "value of the series' variable, in its unit",
    "ExpansionAnswer.at": "per value asked: expansion tensor, principal curves and strain",
    "fit": "the polynomials that were fitted to the cell parameters",
    "centre": "the variable is taken as (t - centre) / half in the polynomials; in the variable's unit",
    "half": "the variable is taken as (t - centre) / half in the polynomials; in the variable's unit",
    "parameters": "per independent cell parameter: coefficients and fit",
    "states": "per state: strain against the reference",
    "strain": "stretch, or linear strain of the first order",
    "source": "where the values come from, in the reader's own words",
    # Optics
    "birefringence_sigma": "standard deviation of the largest difference of index, without unit",
    # Cutting
    "sightings": "directions of the crystal that were brought to known places",
    "angles": "degrees, one per axis of the stage, in its order",
    "TrueNormalRequest.angles": "rocking angles in degrees, one per azimuth",
    "azimuths": "degrees, one per rocking angle",
    "weight": "relative weight of the sighting, without unit; 1 where it is not given",
    "hand": "whether the sightings fit a right-handed crystal better than its mirror image",
    "solutions": "list of settings that do it",
    "notes": "sentences about what cannot be reached or was assumed",
    "Change.notes": "text of the reader's own about the sample",
    "wanted": "normal that was meant, a direction of the laboratory frame",
    "achieved": "normal that was measured, a direction of the laboratory frame",
    "target": "what the face or the condition is about",
    "tolerance": "by half angle or by value",
    "half_angle": "degrees",
    "by": "how the target is told",
    "conditions": "one or two conditions that directions must meet",
    "max_index": "largest Miller index that is looked at",
    "length": "longest edge of the piece, in any unit of length that all three share",
    "width": "middle edge of the piece, in the same unit",
    "thickness": "shortest edge of the piece, in the same unit",
    "sense": "1 for the direction itself, -1 for its opposite",
    "stages": "the list of the laboratory's stages",
    # Kept samples
    "id": "identifier as the server gave it",
    "PropertyChange.id": "which of the sample's properties; left out with a kind, a new one is made",
    "name": "text of the reader's own",
    "CifAnswer.name": "name of the data block",
    "FittedParameter.name": "a, b, c, alpha, beta or gamma",
    "PropertyChange.name": "name of a property that the catalogue lacks",
    "symbol": "symbol of the property, printed in italics",
    "temperature": "kelvin",
    "unit": "unit as text, such as W/(m·K)",
    "property": "which property is looked at, or what it is",
    "poses": "kept poses by their names",
    "change": "what changes; members that are left out stay",
    "parent": "number of the revision that the change was made against; an older one than the newest gets 409",
    "rows": "the rows of the grid in order",
    "archived": "true puts the sample out of the list, false back",
    "deleted": "true puts the sample among the deleted ones, false back; nothing is erased",
    "make": "true makes a new part",
    "sentence": "in words",
    # Errors
    "error": "what is wrong, where, and what to do",
    "message": "what is wrong, in a sentence",
    "hint": "what to do about it; null where the message says it all",
    "detail": "further facts; there only where there are some",
}

PARAMETERS: Final[dict[str, str]] = {
    "sample_id": "identifier of a kept sample",
    "revision": "number of a revision; the newest where it is left out",
    "archived": "whether samples that were put out of the list are among them",
    "deleted": "whether deleted samples are among them",
    "at": "value of the series' variable, in its unit",
}
"""What stands in an address, by name."""


def describe_members(document: dict[str, Any]) -> dict[str, Any]:
    """Put a description to every member and parameter of an OpenAPI document that lacks one; changes it in place."""
    for shape, schema in document.get("components", {}).get("schemas", {}).items():
        # A shape whose name stands in two modules is written with its module.
        name = shape.rpartition("__")[2]
        for member, content in schema.get("properties", {}).items():
            told = MEANINGS.get(f"{name}.{member}") or MEANINGS.get(member)
            if "description" not in content and told is not None:
                content["description"] = told
    for operations in document.get("paths", {}).values():
        for operation in operations.values():
            for parameter in operation.get("parameters", []):
                if "description" not in parameter and parameter["name"] in PARAMETERS:
                    parameter["description"] = PARAMETERS[parameter["name"]]
    return document
