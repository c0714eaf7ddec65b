from __future__ import annotations

import copy
import hashlib
import json
import pickle
import random
from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st

from app.errors import InputError
from app.store.canonical import canonical_json, content_hash, freeze, plain

NUMBERS = st.floats(allow_nan=False, allow_infinity=False) | st.integers(-(2**60), 2**60)
TEXTS = st.text(st.characters(exclude_categories=["Cs"]), max_size=8)
JSON_VALUES = st.recursive(
    st.none() | st.booleans() | NUMBERS | TEXTS,
    lambda inner: st.lists(inner, max_size=4) | st.dictionaries(TEXTS, inner, max_size=4),
    max_leaves=15,
)


def shuffle_keys(value: Any, order: random.Random) -> Any:
    if isinstance(value, dict):
        keys = list(value)
        order.shuffle(keys)
        return {key: shuffle_keys(value[key], order) for key in keys}
    if isinstance(value, list):
        return [shuffle_keys(item, order) for item in value]
    return value


@given(JSON_VALUES, st.randoms(use_true_random=False))
def test_canonical_form_does_not_depend_on_key_order(value: Any, order: random.Random) -> None:
    assert canonical_json(shuffle_keys(value, order)) == canonical_json(value)


@given(JSON_VALUES)
def test_canonical_form_is_json_of_the_same_numbers_and_its_own_canonical_form(value: Any) -> None:
    text = canonical_json(value)
    assert canonical_json(json.loads(text)) == text
    assert canonical_json(freeze(value)) == text


@given(st.floats(allow_nan=False, allow_infinity=False))
def test_a_double_comes_back_the_same(number: float) -> None:
    assert float(json.loads(canonical_json([number]))[0]) == number


@given(JSON_VALUES, JSON_VALUES)
def test_different_content_has_a_different_hash(first: Any, second: Any) -> None:
    # Python compares True with 1 as equal, JSON does not; hence the comparison of the standard library's text.
    same = json.dumps(plain(first), sort_keys=True) == json.dumps(plain(second), sort_keys=True)
    assert (content_hash(first) == content_hash(second)) == same


def test_form_and_hash_of_a_written_out_example() -> None:
    # Written by hand from the rules in the module's docstring; the hash is of the standard library.
    value = {"é": [4.0, -0.0, 0.1, 1e300], "a": {"z": None, "b": True}, "B": 2**53}
    text = '{"B":9007199254740992.0,"a":{"b":true,"z":null},"é":[4,0,0.1,1e+300]}'.encode()
    assert canonical_json(value) == text
    assert content_hash(value) == hashlib.sha256(text).hexdigest()


def test_whole_numbers_hash_alike_from_python_and_from_a_browser() -> None:
    assert content_hash({"x": 4.0}) == content_hash(json.loads('{"x": 4}'))
    assert content_hash({"x": 4.0}) != content_hash({"x": "4"})
    assert content_hash({"x": True}) != content_hash({"x": 1})


def nested(levels: int) -> Any:
    value: Any = 1
    for _ in range(levels):
        value = [value]
    return value


@pytest.mark.parametrize(
    "value",
    [
        float("nan"),
        float("inf"),
        10**400,
        {1: 2},
        {"a": {2}},
        b"bytes",
        "\ud800",
        {"\ud800": 1},
        nested(33),
        nested(9999),
    ],
)
def test_what_is_not_json_is_refused(value: Any) -> None:
    with pytest.raises(InputError) as refusal:
        canonical_json(value)
    assert refusal.value.hint


def test_frozen_data_refuse_changes_and_can_be_copied() -> None:
    frozen = freeze({"a": [1, {"b": 2}]})
    for change in (
        lambda: frozen.__setitem__("a", 1),
        lambda: frozen.__delitem__("a"),
        lambda: frozen.update(a=1),
        lambda: frozen.pop("a"),
        lambda: frozen.setdefault("c", 1),
        lambda: frozen.clear(),
        lambda: frozen["a"][1].__setitem__("b", 3),
    ):
        with pytest.raises(TypeError):
            change()
    assert copy.deepcopy(frozen) == frozen == pickle.loads(pickle.dumps(frozen))
    loose = plain(frozen)
    loose["a"].append(3)
    assert frozen == freeze({"a": [1, {"b": 2}]})
