"""The live channel: absolute turns, hashes, and answers checked against plain numpy."""

from __future__ import annotations

import numpy as np
import pytest

from app.errors import InputError
from app.store.demonstration import demonstration_documents
from app.store.document import change_document
from app.web.live import Subjects, TurnMessage, answer_turn, read_message

SUBJECT = Subjects().take(demonstration_documents()[0])
START = demonstration_documents()[0].plain()["pose"]


def ask(**more: object) -> dict[str, object]:
    message = {"type": "turn", "hash": SUBJECT.key, "seq": 1, "pose": START, **more}
    return answer_turn(SUBJECT, TurnMessage.model_validate(message))


def test_the_posed_matrix_is_the_turned_one_after_a_drag() -> None:
    answer = ask(turn={"drag": [0.4, -0.2]})
    pose = np.array(answer["pose"]["matrix"])  # type: ignore[index]
    matrix = np.array([[13.2, 0, 1.85], [0, 24.6, 0], [1.85, 0, 15.9]])
    np.testing.assert_allclose(answer["posed"], pose @ matrix @ pose.T, atol=1e-9)
    assert not np.allclose(pose, np.array(ask()["pose"]["matrix"]), atol=1e-3)  # type: ignore[index]


def test_looking_moves_the_camera_and_no_number() -> None:
    still, looked = ask(), ask(look=[0.5, 0.3])
    for key in ("pose", "posed", "cells", "along", "sentence", "where"):
        assert looked[key] == still[key]
    assert looked["camera"] != still["camera"]


def test_exchanging_what_is_held_leaves_the_picture() -> None:
    still, held = ask(), ask(hold="crystal")
    np.testing.assert_allclose(held["camera"]["eye"], still["camera"]["eye"], atol=1e-12)  # type: ignore[index]


def test_a_direction_put_under_z_is_named() -> None:
    answer = ask(put={"axis": "z", "on": "(-2 0 1)"})
    assert answer["sentence"]["text"].startswith("Along z, on n(−201):")  # type: ignore[index]


def test_the_catch_draws_z_to_a_low_normal() -> None:
    near = {"from": "(-2 0 1)", "tilt": 0.5, "toward": "[0 1 0]"}
    answer = ask(pose=near, turn={"drag": [0.0, 0.0]}, catch=True)
    assert answer["caught"] == "z: on n(−201)"
    assert ask(pose=near, turn={"drag": [0.0, 0.0]})["caught"] is None


def test_an_unknown_message_is_refused() -> None:
    with pytest.raises(InputError):
        read_message('{"type": "dance"}')


def test_what_would_settle_few_readings_is_lit_on_the_surface() -> None:
    document = demonstration_documents()[0]
    # Bars along b, c and the normal of (100) never see the cell 13.
    few = change_document(document, {"readings": document.plain()["readings"][:5]})
    subject = Subjects().take(few)
    assert subject.settling.sentence is not None
    assert "would settle it" in subject.settling.sentence
    (direction,) = subject.settling.directions
    # A reading sees 13 by 2 n1 n3.
    assert abs(2 * direction[0] * direction[2]) > 0.1
    turn = {"type": "turn", "hash": subject.key, "seq": 1, "pose": START}
    answer = answer_turn(subject, TurnMessage.model_validate(turn))
    assert any(shape["class"] == "target" for shape in answer["overlay"]["shapes"])  # type: ignore[index]
    assert SUBJECT.settling.sentence is None
    turned = change_document(document, {"pose": {"axis": "[0 1 0]", "angle": 20}})
    assert Subjects().take(turned).key == SUBJECT.key


def test_a_search_kept_for_the_scene_is_drawn_where_its_value_is() -> None:
    document = demonstration_documents()[0]
    name = document.plain()["properties"][0]["id"]
    asked = change_document(document, {"looking": {"sought": [{"property": name, "target": 15.0}]}})
    subject = Subjects().take(asked)
    assert subject.answer is not None
    matrix = np.array([[13.2, 0, 1.85], [0, 24.6, 0], [1.85, 0, 15.9]])
    for curve in subject.answer.curves:
        np.testing.assert_allclose(np.einsum("ni,ij,nj->n", curve, matrix, curve), 15.0, atol=1e-9)
    turn = {"type": "turn", "hash": subject.key, "seq": 1, "pose": START}
    answer = answer_turn(subject, TurnMessage.model_validate(turn))
    assert any(shape["class"] == "answer" for shape in answer["overlay"]["shapes"])  # type: ignore[index]
    gone = change_document(document, {"looking": {"sought": [{"property": "no such one", "target": 15.0}]}})
    assert Subjects().take(gone).answer is None
