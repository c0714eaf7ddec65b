"""Seeded mutations of the bodies of calls: what a careless script, a broken program or an ill-wisher would send.

A body is plain JSON-like data. One mutation changes one place of a deep copy: by the type of what stands there, by the
name under which it stands (a cell becomes a degenerate cell, a group another group), or by the shape of its list. What
JSON itself forbids (NaN, a key twice, half a text) is made in ``spoil_text`` from the written body.
"""

# Tables of values read best in long lines.
# ruff: noqa: E501

from __future__ import annotations

import copy
import json
import random
from collections.abc import Callable
from typing import Any, Final

Place = tuple[int | str, ...]

NUMBERS: Final[tuple[Any, ...]] = (
    0, -0.0, 1, -1, 2, 3, 0.5, -7.25, 90, 180, -180, 360, 1e-9, -1e-9, 1e6, -1e6, 1e9, 1e12, 1e-12, 1e15, 1e16, 2**53,
    2**53 + 1, 2**63, 2**64, 1e30, 1e-30, -1e30, 1e100, 1e-100, 1e150, 1e155, 1e-155, 1e200, 1e-200, 1e308, -1e308,
    1.7976931348623157e308, 1e-308, 2.2250738585072014e-308, 5e-324, -5e-324, 1 + 2**-52, 10**18, -(10**18), 10**300,
    0.1 + 0.2, 59.99999999999999, 119.99999999999999, 89.99999999999, 179.9999999, 1e-7,
)  # fmt: skip
FACTORS: Final = (1e-300, 1e-30, 1e-12, 1e-6, 1 - 1e-15, 1 + 1e-15, 1 + 1e-9, 1 + 1e-4, 1e6, 1e12, 1e30, 1e300, -1)
TEXTS: Final[tuple[str, ...]] = (
    "", " ", "NaN", "Infinity", "-1", "1e400", "null", "true", "0", "x", "∞", "a" * 201, "A" * 5000, "\u0000", "\ud800",
    "é" * 40, "\u202eabc", "😀", "../../etc/passwd", "<script>", "%s%n", "{{7*7}}", "a,b\n\"", "−1", "１", "²", "½", "٣",
    "\u2028", "\ufeff", "[1 0 0]", "(0 0 1)", "p9", "19", "11",
)  # fmt: skip
DIRECTIONS: Final[tuple[Any, ...]] = (
    "[1 0 0]", "(0 0 1)", "[10-1]", "(1 0 -1 0)", "[2 -1 -1 0]", "(1 0 -2 0)", "[1000000 1 0]", "(1 -1000000 999999)",
    "[1e9 1 1]", "[1e10 0 0]", "[1e-300 1e-300 0]", "(1e-200 1e200 0)", "[1/3 2/7 -1/9]", "[1/0 0 1]", "[0 0 0]", "[1 0",
    "{1 0 0}", "<1 0 0>", "[1 0 1̄]", "[-1̄ 0 0]", "[² 0 1]", "(½ 1 1)", "[٣ 0 1]", "[1_0 0 1]", "[1 0 0 0 0]", "[one 0 0]",
    [0, 0, 1], [1e-320, 0, 0], [1e308, 1e308, 1e308], [1e-200, 1e-200, 1e-200], [0, 0, 0], [1, 1e-17, 0], [1, 2],
    {"xyz": [1e300, -1e300, 1e300]}, {"xyz": [0, 0, -1]}, {"specimen": [1, 0, 0]}, {"specimen": [1e-310, 0, 0]},
    {"xyz": [1, 0, 0], "specimen": [0, 1, 0]}, {}, None, "[999999 1000000 -1000000]", "[0.1 0.2 0.30000000000000004]",
)  # fmt: skip
CELLS: Final[tuple[Any, ...]] = (
    None, [5, 6, 7, 80, 95, 100], [5, 5, 5, 90, 90, 90], [5, 5, 8, 90, 90, 120], [5, 5, 5, 75, 75, 75], [5, 6, 7, 90, 90, 90],
    [5, 6, 7, 90, 110, 90], [1e-3, 1e6, 1e-3, 90, 90, 90], [1e6, 1e6, 1e6, 60, 60, 60], [5, 6, 7, 60, 60, 119.99999],
    [5, 6, 7, 60, 60, 120], [5, 6, 7, 120, 120, 119.9999999], [5, 6, 7, 1e-5, 90, 90], [5, 6, 7, 1e-9, 1e-9, 1e-9],
    [5, 6, 7, 179.99999, 90, 90], [5, 6, 7, 0, 90, 90], [5, 6, 7, 90, 180, 90], [5, 6, 7, 90, 90, 90.0001],
    [5, 5.0000001, 5, 90, 90, 90], [0, 0, 0, 0, 0, 0], [-5, 6, 7, 90, 90, 90], [1e308, 1e308, 1e308, 90, 90, 90],
    [5, 5, 5, 109.47122063449069, 109.47122063449069, 109.47122063449069], [5, 5, 5, 60, 60, 60],
    [5, 5, 5, 119.99999, 119.99999, 119.99999], [5, 5, 5, 1e-4, 1e-4, 1e-4], [1, 1, 1e6, 90, 90, 120],
    [5, 6, 7, 89.9999999999, 90.0000000001, 90], [1e-3, 1e-3, 1e-3, 0.01, 0.01, 0.01], [5, 6, 7, 90, 90],
)  # fmt: skip
GROUPS: Final[tuple[str, ...]] = (
    "1", "-1", "2", "m", "2/m", "112/m", "2/m11", "222", "mm2", "m2m", "2mm", "mmm", "4", "-4", "4/m", "422", "4mm", "-42m",
    "-4m2", "4/mmm", "3", "-3", "32", "312", "3m", "31m", "-3m", "-31m", "6", "-6", "6/m", "622", "6mm", "-6m2", "-62m",
    "6/mmm", "23", "m-3", "432", "-43m", "m-3m", "∞", "∞m", "∞2", "∞/m", "∞/mm", "∞∞", "∞∞m", "P 1 21/c 1", "P 1 1 21/b",
    "R -3 c :R", "R -3 c :H", "P -4 m 2", "P 21/c", "F d -3 m :2", "I 41/a c d", "5", "", "2/", "P", "P 999", "7mm",
)  # fmt: skip
FRAMES: Final[tuple[str, ...]] = (
    "x3=c x2=b*", "x1=a x3=c*", "x2=b x1=a*", "x3=[1 1 1] x1=(1 -1 0)", "x3=[0 0 1] x1=(1 0 0)", "x3=c x2=c*", "x3=c x3=b*",
    "x3=c", "", "x1=a x1=b* x2=c", "x3=[0 0 0] x1=(1 0 0)", "x3=[1000000 1 0] x1=(1 -1000000 0)", "x4=c x2=b*", "x3=(0 0 1) x1=[1 0 0]",
    "x3=[1e9 1 1] x1=(0 1 -1)", "x3=c x2=b* x1=a", "x3=" + "c" * 190,
)  # fmt: skip
POSES: Final[tuple[Any, ...]] = (
    {"matrix": [[1, 0, 0], [0, 1, 0], [0, 0, 1]]}, {"matrix": [[0, 1, 0], [1, 0, 0], [0, 0, 1]]},
    {"matrix": [[1, 0, 0], [0, 1, 0], [0, 0, -1]]}, {"matrix": [[0, 0, 0], [0, 0, 0], [0, 0, 0]]},
    {"matrix": [[1e308, 0, 0], [0, 1e308, 0], [0, 0, 1e308]]}, {"matrix": [[1, 1e-7, 0], [0, 1, 0], [0, 0, 1]]},
    {"exact": ["z", "[0 0 1]"], "toward": ["x", "[1 0 0]"]}, {"exact": ["z", "[0 0 1]"], "toward": ["z", "[1 0 0]"]},
    {"exact": ["z", "[0 0 1]"], "toward": ["x", "[0 0 2]"]}, {"exact": ["z", [0, 0, 1]], "toward": ["x", [1e-14, 0, 1]]},
    {"exact": ["z", {"specimen": [0, 0, 1]}], "toward": ["x", [1, 0, 0]]}, {"axis": [0, 0, 1], "angle": 0},
    {"axis": [1, 1, 1], "angle": 180}, {"axis": [1, 1, 1], "angle": 1e300}, {"axis": "(1 2 3)", "angle": -1e-300},
    {"quaternion": [1, 0, 0, 0]}, {"quaternion": [0, 0, 0, 0]}, {"quaternion": [-1, 0, 0, 0]}, {"quaternion": [1e-200, 0, 0, 0]},
    {"quaternion": [0.9995, 0, 0, 0]}, {"quaternion": [1e200, 1, 1, 1]}, {"bunge": [0, 0, 0]}, {"bunge": [0, 180, 0]},
    {"bunge": [1e308, -1e308, 1e17]}, {"bunge": [1e-300, 180, 1e-300]}, {"from": "(0 0 1)", "tilt": 4, "toward": [1, 0, 0]},
    {"from": [0, 0, 1], "tilt": 0, "toward": [0, 0, 1]}, {"from": [0, 0, 1], "tilt": 180, "toward": [1, 0, 0]},
    {"from": [0, 0, 1], "tilt": 1e300, "toward": [1, 0, 0], "x": [0, 1, 0]}, {"from": [0, 0, 1], "tilt": 90, "toward": [1, 0, 0], "x": [1, 0, 0]},
    {"from": [0, 0, 1], "tilt": 1, "toward": {"specimen": [1, 0, 0]}}, {}, {"matrix": None}, None, [], "identity",
)  # fmt: skip


def _diagonal(first: float, second: float, third: float) -> list[list[float]]:
    return [[first, 0, 0], [0, second, 0], [0, 0, third]]


MATRICES: Final[tuple[Any, ...]] = (
    _diagonal(0, 0, 0), _diagonal(1, 1, 1), _diagonal(1, 1, 1 + 1e-15), _diagonal(1, 1 + 1e-12, 2), _diagonal(1, -1, 1),
    _diagonal(-1, -2, -3), _diagonal(1e30, 2e30, 3e30), _diagonal(1e-30, 2e-30, 3e-30), _diagonal(1e308, 1e308, -1e308),
    _diagonal(5e-324, 1e-323, 1e-320), _diagonal(1e200, 1, 1e-200), _diagonal(1, 1, 0), _diagonal(1, 0, 0), _diagonal(1, 2, 1e-17),
    _diagonal(1, -1, 0), _diagonal(1e155, 1e155, 1), _diagonal(-0.0, 0.0, 1), [[0, 1, 0], [-1, 0, 0], [0, 0, 0]],
    [[1, 2, 3], [4, 5, 6], [7, 8, 9]], [[0, 1, 0], [1, 0, 0], [0, 0, 1]], [[0, 0, 1], [1, 0, 0], [0, 1, 0]],
    [[1, 1, 1], [1, 1, 1], [1, 1, 1]], [[1, 1e8, 0], [1e8, 1, 0], [0, 0, 1]], [[1, 0], [0, 1]], [], [[]], [[1, 0, 0]] * 3,
    [[2, 0, 0], [0, 2, 0], [0, 0, 2]], [[1, 1, 0], [0, 1, 0], [0, 0, 1]], [[1e-162, 0, 0], [0, 1e-162, 0], [0, 0, 1e-162]],
)  # fmt: skip
COVARIANCES: Final[tuple[Any, ...]] = (
    [], [[0]], [[1]], [[-1]], [[1e-300]], [[1e300]], [[1, 2], [2, 1]], [[1, 0], [0, 1]], [[1, 1], [1, 1]], None,
    *([[value if i == j else 0 for i in range(k)] for j in range(k)] for k in (1, 2, 3, 4, 6) for value in (0, 1e-30, 1, 1e30, 1e308)),
    *([[value for _ in range(k)] for _ in range(k)] for k in (3, 4, 6) for value in (1, 1e-12)),
)  # fmt: skip

BY_NAME: Final[dict[str, tuple[Any, ...]]] = {
    "cell": CELLS, "cell_sigma": (None, [0] * 6, [1e-4] * 6, [1e300] * 6, [-1] * 6, [1, 1, 1]), "group": GROUPS, "frame": FRAMES,
    "unique_axis": ("a", "b", "c", None, "d"), "pose": POSES, "matrix": MATRICES, "U": MATRICES, "basis": MATRICES,
    "covariance": COVARIANCES, "direction": DIRECTIONS, "second": DIRECTIONS, "target": (*DIRECTIONS, "max", "min", 0, 1e308),
    "toward": DIRECTIONS, "from": DIRECTIONS, "edge": DIRECTIONS, "axis": (*DIRECTIONS, 1, 2, 3, "x", "z"), "seen": DIRECTIONS,
    "nominal": DIRECTIONS, "about": DIRECTIONS, "on": DIRECTIONS,
    "kind": ("along", "across", "difference", "mean", "rod", "sheet", "permittivity", "gyration", "thermopower", "stress", "other"),
    "parity": ("polar", "axial"), "intrinsic": ("symmetric", "general", "antisymmetric"), "sigma": (None, 0, 1e-300, 1e-12, 1, 1e12, 1e300, -1),
    "direction_sigma": (None, 0, 1e-12, 0.5, 90, 1e6, 1e300), "angle": (0, 180, 180.00000001, -180, 360, 1e-12, 1e17),
    "angles": ([0], [0, 0, 0], [1e6, -1e6, 0], [], [180, 180, 180], None), "criterion": ("D", "A", {"cell": "13"}, {"axis": 1}, "11", "p1"),
    "candidates": ("sphere", {"max_index": 1}, {"max_index": 4}, {"max_index": 10**6}, [], [[0, 0, 1]] * 3), "level": (0, 1, 0.5, 1e-300, 1 - 1e-16),
    "half_angle": (0, 1e-300, 1e-9, 45, 90, None), "tolerance": (0, 1e-300, 1e-9, 1, 1e300, None), "weight": (0, 1e-300, 1, 1e300, -1, None),
    "detail": (8, 9, 60, 7, 401, 1e9), "surface": ("quadric", "value", "flux", "none"), "degree": (0, 1, 2, 8, 9, -1),
    "unit": ("W/(m·K)", "1", "1e-6/K", "K", "", "m^999999", "1e308", "furlong", "m**2", "W/m/K", "(", "m" * 200),
    "size": ([1, 1, 1], [1e-300] * 3, [1e4] * 3, [0, 1, 1]), "low": (-180, 0, 180, 1e6), "high": (-180, 0, 180, 1e6), "sense": (1, -1, 0, 2),
    "batches": ({}, {"x": 0.01}, {"x": 0}, {"x": 1e300}, {"x": -1}, None), "batch": ("x", "furnace 2", None), "bar": ("B1", "B2", None),
}  # fmt: skip
"""What may stand under a name: good, degenerate and wrong."""


def list_places(body: Any) -> list[Place]:
    """Every place in a body, the whole of it left out; of a very long list only the first hundred entries."""
    found: list[Place] = []
    waiting: list[tuple[Place, Any]] = [((), body)]
    while waiting and len(found) < 3000:
        place, value = waiting.pop()
        if place:
            found.append(place)
        if isinstance(value, dict):
            waiting.extend(((*place, key), item) for key, item in value.items())
        elif isinstance(value, list):
            waiting.extend(((*place, index), item) for index, item in enumerate(value[:100]))
    return found


def find(body: Any, place: Place) -> Any:
    """What stands at a place."""
    for step in place:
        body = body[step]
    return body


def mutate(body: Any, random_source: random.Random) -> Any:
    """A copy of a body with one to three mutations; now and then none, so that good calls are among them."""
    mutated = copy.deepcopy(body)
    for _ in range(random_source.choice((0, 1, 1, 1, 1, 1, 2, 2, 3))):
        places = list_places(mutated)
        if not places:
            return random_source.choice(({}, {"x": 1}, [], None, 1, "x", mutated))
        place = random_source.choice(places)
        holder, step = find(mutated, place[:-1]), place[-1]
        _mutate_at(holder, step, random_source)
    return mutated


def _mutate_at(holder: Any, step: Any, random_source: random.Random) -> None:
    value = holder[step]
    named = BY_NAME.get(step) if isinstance(step, str) else None
    if named is not None and random_source.random() < 0.6:
        holder[step] = copy.deepcopy(random_source.choice(named))
        return
    if random_source.random() < 0.12:
        _change_holder(holder, step, random_source)
        return
    if random_source.random() < 0.08:
        holder[step] = copy.deepcopy(random_source.choice(_OTHERS))
        return
    if isinstance(value, bool) or value is None:
        holder[step] = copy.deepcopy(random_source.choice(_OTHERS))
    elif isinstance(value, int | float):
        holder[step] = _mutate_number(value, random_source)
    elif isinstance(value, str):
        holder[step] = _mutate_text(value, random_source)
    elif isinstance(value, list):
        holder[step] = _mutate_list(value, random_source)
    else:
        holder[step] = _mutate_object(value, random_source)


_OTHERS: Final[tuple[Any, ...]] = (
    None, True, False, 0, 1, -1, 1.5, "", "x", [], {}, [[]], [None], {"": None}, 10**400, float("nan"), float("inf"), [1] * 300,
    [[[[[[[[1]]]]]]]], {"a": {"a": {"a": 1}}}, 1e308, "NaN",
)  # fmt: skip


def _mutate_number(value: float, random_source: random.Random) -> Any:
    choice = random_source.random()
    if choice < 0.5 or abs(value) > 1e308:
        return random_source.choice(NUMBERS)
    if choice < 0.85:
        return value * random_source.choice(FACTORS)
    if choice < 0.9:
        return str(value)
    return random_source.choice((None, [value], float("nan"), float("-inf"), True, value + random_source.gauss(0, 1)))


def _mutate_text(value: str, random_source: random.Random) -> Any:
    choice = random_source.random()
    if choice < 0.3:
        return random_source.choice(TEXTS)
    if choice < 0.5:
        return copy.deepcopy(random_source.choice(DIRECTIONS))
    if len(value) > 60:
        return mutate_long_text(value, random_source)
    start = random_source.randrange(len(value) + 1)
    end = min(len(value), start + random_source.randrange(4))
    inserted = random_source.choice(
        ("", " ", "0", "9", "-", ".", "/", "e5", "e-400", "1000000", "1", "²", "∞", "\u0305", "(", "]", ",")
    )
    return value[:start] + inserted + value[end:]


def mutate_long_text(text: str, random_source: random.Random) -> str:
    """A table or a CIF: lines lost, doubled, exchanged or cut, numbers and signs replaced."""
    lines = text.splitlines(keepends=True)
    for _ in range(random_source.randrange(1, 4)):
        if not lines:
            break
        line = random_source.randrange(len(lines))
        other = random_source.randrange(len(lines))
        match random_source.randrange(8):
            case 0:
                del lines[line]
            case 1:
                lines.insert(line, lines[other])
            case 2:
                lines[line], lines[other] = lines[other], lines[line]
            case 3:
                return "".join(lines[:line]) + lines[line][: random_source.randrange(len(lines[line]) + 1)]
            case 4:
                lines[line] = lines[line].replace(random_source.choice("0123456789., "), random_source.choice(TEXTS), 1)
            case 5:
                words = lines[line].replace(",", " , ").split(" ")
                words[random_source.randrange(len(words))] = str(
                    random_source.choice((*NUMBERS, *GROUPS, "nan", "?", "5.1(2)", "(2)"))
                )
                lines[line] = " ".join(words) + "\n"
            case 6:
                lines[line] = random_source.choice(
                    ("loop_\n", "data_\n", ";\n", "'", '"', "#", "_cell_length_a\n", ",,,,\n", "\x00\n")
                )
            case _:
                lines *= 3
    return "".join(lines)[:400_000]


def _mutate_list(value: list[Any], random_source: random.Random) -> Any:
    changed = list(value)
    match random_source.randrange(10):
        case 0:
            return []
        case 1 if changed:
            return [*changed, copy.deepcopy(random_source.choice(changed))]
        case 2 if changed:
            return [copy.deepcopy(changed[0]) for _ in range(random_source.choice((2, 7, 60)))]
        case 3:
            random_source.shuffle(changed)
            return changed
        case 4:
            return changed[:-1]
        case 5:
            return [changed]
        case 6:
            return {str(index): item for index, item in enumerate(changed)}
        case 7 if changed:
            # The same once more, but for a hair: what cannot be told apart.
            near = copy.deepcopy(random_source.choice(changed))
            for place in list_places(near):
                number = find(near, place)
                if isinstance(number, float | int) and not isinstance(number, bool) and abs(number) < 1e300:
                    find(near, place[:-1])[place[-1]] = number * (1 + 1e-13)
            return [*changed, near]
        case 8:
            return [random_source.choice(NUMBERS) if isinstance(item, int | float) else item for item in changed]
        case _:
            return changed[::-1]


def _mutate_object(value: dict[str, Any], random_source: random.Random) -> Any:
    changed = dict(value)
    keys = list(changed)
    match random_source.randrange(6):
        case 0 if keys:
            del changed[random_source.choice(keys)]
        case 1:
            changed[random_source.choice(("extra", "", "\ud800", "cell", "k" * 300, "__class__", *BY_NAME))] = 1
        case 2 if len(keys) > 1:
            first, second = random_source.sample(keys, 2)
            changed[first], changed[second] = changed[second], changed[first]
        case 3:
            return [changed]
        case 4 if keys:
            changed[random_source.choice(keys)] = copy.deepcopy(changed)
        case _ if keys:
            changed[random_source.choice(keys)] = None
        case _:
            pass
    return changed


def _change_holder(holder: Any, step: Any, random_source: random.Random) -> None:
    if random_source.random() < 0.5:
        del holder[step]
    elif isinstance(holder, list):
        holder.insert(step, copy.deepcopy(holder[step]))
    else:
        named = BY_NAME.get(random_source.choice(list(BY_NAME)), (1,))
        holder[random_source.choice(list(BY_NAME))] = copy.deepcopy(random_source.choice(named))


_SPOILERS: Final[tuple[Callable[[bytes, random.Random], bytes], ...]] = (
    lambda text, source: text[: source.randrange(len(text) + 1)],
    lambda text, source: text.replace(b":", b"::", 1),
    lambda text, source: b"\xef\xbb\xbf" + text,
    lambda text, source: text.decode("utf-8", "replace").encode("utf-16"),
    lambda text, source: text[:-1] + b',"crystal":1,"crystal":2}',
    lambda text, source: b'{"crystal":' + b"[" * 100_000,
    lambda text, source: b'{"crystal":' + b"[" * 900 + b"]" * 900 + b"}",
    lambda text, source: b'{"a":' * 5000 + b"1" + b"}" * 5000,
    lambda text, source: text + text,
    lambda text, source: b"",
    lambda text, source: b"[]",
    lambda text, source: b"null",
    lambda text, source: b"1" * 5000,
    lambda text, source: text.replace(b"1", b"1" + b"0" * 400, 1),
    lambda text, source: text.replace(b"1", b"1e999", 1),
    lambda text, source: bytes(source.randrange(256) for _ in range(60)),
)


def spoil_text(text: bytes, random_source: random.Random) -> bytes:
    """A written body that is no longer what JSON allows, or hardly."""
    if random_source.random() < 0.4 and text:
        place = random_source.randrange(len(text))
        return text[:place] + bytes([random_source.randrange(256)]) + text[place + 1 :]
    return random_source.choice(_SPOILERS)(text, random_source)


def write_body(body: Any, random_source: random.Random) -> bytes:
    """A body as it is sent: NaN and lone surrogates as escapes, one in twenty-five spoilt."""
    written = json.dumps(body, allow_nan=True).encode("utf-8", "replace")
    return spoil_text(written, random_source) if random_source.random() < 0.04 else written
