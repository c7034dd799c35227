"""The picture of the Weyl chamber: geometry against SciPy, text that does not collide, and what it refuses."""

from __future__ import annotations

import re
from xml.etree import ElementTree

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.spatial import ConvexHull

import gatewright as gw
from gatewright.devices import shipped_gate_sets
from gatewright.errors import GatewrightError, InputError
from gatewright.linalg import haar_unitary
from gatewright.report.chamber import Mark, Panel, angle_text, chamber_part, draw_chamber, inside_chamber
from gatewright.report.reach import _PERFECT, _PERFECT_OFFSETS, picture_of
from gatewright.synthesis.haar_cost import chamber_sample
from gatewright.synthesis.polytopes import FORMS, reached

QUARTER = np.pi / 4
SPACE = "{http://www.w3.org/2000/svg}"


def in_hull(corners: np.ndarray, points: np.ndarray) -> np.ndarray:
    sides = ConvexHull(corners, qhull_options="QJ").equations
    return (points @ sides[:, :3].T + sides[:, 3] <= 1e-7).all(axis=1)


def shown(picture: str) -> ElementTree.Element:
    root = ElementTree.fromstring(picture)
    assert root.tag == f"{SPACE}svg"
    return root


def text_boxes(root: ElementTree.Element) -> list[tuple[str, float, float, float, float]]:
    """Left, top, right, bottom of each text, for letters 0.62 of the size wide."""
    boxes = []

    def walk(element: ElementTree.Element, dx: float, dy: float) -> None:
        move = re.fullmatch(r"translate\(([\d.-]+) ([\d.-]+)\)", element.get("transform", ""))
        dx, dy = (dx + float(move[1]), dy + float(move[2])) if move else (dx, dy)
        if element.tag == f"{SPACE}text":
            size, text = float(element.get("font-size", 0)), element.text or ""
            wide = 0.62 * size * len(text)
            left = (
                float(element.get("x", 0))
                + dx
                - {"start": 0, "middle": wide / 2, "end": wide}[element.get("text-anchor", "start")]
            )
            base = float(element.get("y", 0)) + dy
            boxes.append((text, left, base - 0.78 * size, left + wide, base + 0.2 * size))
        for child in element:
            walk(child, dx, dy)

    walk(root, 0, 0)
    return boxes


def check_texts(root: ElementTree.Element, *, marks: bool = False) -> None:
    width, height = float(root.get("width", 0)), float(root.get("height", 0))
    boxes = [box for box in text_boxes(root) if marks or len(box[0]) > 2]
    assert len(boxes) > 10
    for text, left, top, right, bottom in boxes:
        assert left >= 0 and top >= 0 and right <= width and bottom <= height, text
    for k, (text, left, top, right, bottom) in enumerate(boxes):
        for other, left2, top2, right2, bottom2 in boxes[:k]:
            assert right <= left2 or right2 <= left or bottom <= top2 or bottom2 <= top, (text, other)


@pytest.mark.parametrize("name", shipped_gate_sets())
def test_pictures_of_all_shipped_sets_are_legible(name: str) -> None:
    gate_set = gw.read_gate_set(name)
    facts = {"targets": {"a.npy": {"uses": 2, "coordinates": [0.6, 0.4, -0.2]}}}
    picture = picture_of(gate_set, facts)
    root = shown(picture)
    check_texts(root)
    assert picture == picture_of(gate_set, facts)
    texts = [text for text, *_ in text_boxes(root)]
    assert "(π/4, π/4, −π/4)" in texts and "everything" in texts and "1 use" in texts
    assert any("a.npy · (0.1910π, 0.1273π, −0.0637π) · 2 uses" in text for text in texts)
    # A background of its own, so that it is legible on any page.
    assert root.find(f"{SPACE}rect").get("fill") == "#fbfaf6"


def test_the_share_of_the_picture_is_the_published_one() -> None:
    # Two uses of the root of iSWAP: 0.79011, x ≥ y + |z|; Huang et al., PRL 130, 070601 (2023).
    gate_set = gw.read_gate_set("sqrt-iswap-virtual-z")
    assert "79.01 % of Haar-random unitaries" in picture_of(gate_set, {})
    (piece,) = inside_chamber(FORMS, reached([[np.pi / 8, np.pi / 8, 0]] * 2).bounds)
    points, weights = chamber_sample()
    inside = in_hull(piece, points)
    assert float(weights[inside].sum()) == pytest.approx(0.79011, abs=3e-3)
    x, y, z = points.T
    clear = np.abs(x - y - np.abs(z)) > 1e-6
    assert np.array_equal(inside[clear], (x >= y + np.abs(z))[clear])


def test_perfect_entanglers_are_half_of_the_chamber() -> None:
    # Flat volume exactly one half: Zhang, Vala, Sastry & Whaley, PRA 67, 042313 (2003).
    everything = chamber_part(np.zeros((0, 3)), np.zeros(0))
    assert len(everything) == 4
    perfect = chamber_part(_PERFECT, _PERFECT_OFFSETS)
    assert ConvexHull(perfect).volume / ConvexHull(everything).volume == pytest.approx(0.5, rel=1e-9)


@given(st.integers(0, 2**32 - 1), st.integers(1, 3))
@settings(max_examples=25, deadline=None)
def test_pieces_are_where_the_inequalities_hold(seed: int, uses: int) -> None:
    rng = np.random.default_rng(seed)
    sample, _ = chamber_sample()
    entangler = sample[rng.integers(len(sample))]
    polytope = reached([entangler] * uses)
    pieces = inside_chamber(FORMS, polytope.bounds)
    solid = [piece for piece in pieces if len(piece) > 3 and np.linalg.matrix_rank(piece - piece[0], 1e-6) == 3]
    points = sample[rng.integers(len(sample), size=300)]
    turned = points * [-1, 1, -1] + [np.pi / 2, 0, 0]
    excess = np.minimum(polytope.excess(points), polytope.excess(turned))
    inside = np.zeros(len(points), dtype=bool)
    for piece in solid:
        inside |= in_hull(piece, points)
    clear = np.abs(excess) > 1e-4
    assert np.array_equal(inside[clear], (excess <= 0)[clear])
    shown(draw_chamber("x", [Panel("h", "b", pieces)], [Mark("m", entangler), Mark("t", points[0], True, "r")]))


def test_marks_at_one_place_do_not_hide_each_other() -> None:
    place = np.array([QUARTER, 0, 0])
    marks = [Mark("first", place), Mark("second", place), Mark("t", place, True), Mark("s", place, True)]
    root = shown(draw_chamber("x", [Panel("h", "b", ())], marks))
    texts = [text for text, *_ in text_boxes(root)]
    assert "ab" in texts and "1,2" in texts
    check_texts(root, marks=True)


def test_names_from_outside_are_escaped() -> None:
    nasty = "<script>\"&'"
    root = shown(draw_chamber(nasty, [Panel(nasty, nasty, ())], [Mark(nasty * 40, np.zeros(3), True, nasty)]))
    assert root.find(f"{SPACE}title").text == nasty
    width = float(root.get("width", 0))
    assert all(right <= width for *_, right, _ in text_boxes(root)[-1:])


@given(st.floats(-7, 7))
def test_angles_as_fractions_of_pi(angle: float) -> None:
    text = angle_text(angle).replace("−", "-")
    value = re.fullmatch(r"(-?)(\d*\.?\d*)(π?)(?:/(\d+))?", text)
    assert value
    size = float(value[2] or 1) * (np.pi if value[3] else 1) / float(value[4] or 1)
    assert (-size if value[1] else size) == pytest.approx(angle, abs=2e-4)


def test_a_matrix_is_shown_among_the_perfect_entanglers() -> None:
    unitary = haar_unitary(4, rng=3)
    facts = gw.describe(unitary)
    root = shown(picture_of(unitary, facts, name="mine.npy"))
    check_texts(root)
    assert any(text.startswith("mine.npy · (") and "3 CNOTs" in text for text, *_ in text_boxes(root))


def test_what_cannot_be_shown() -> None:
    with pytest.raises(InputError, match="the chamber shows two-qubit gates; required: 2 qubits; found: 3 qubits"):
        picture_of(haar_unitary(8, rng=1), {})
    rz = {"qubits": 1, "parameters": [{"name": "t", "from": "-pi", "to": "pi"}]}
    rz |= {"matrix": [["exp(-i*t/2)", 0], [0, "exp(i*t/2)"]]}
    sx = {"qubits": 1, "matrix": [["(1+i)/2", "(1-i)/2"], ["(1-i)/2", "(1+i)/2"]]}
    alone = gw.read_gate_set({"name": "alone", "gates": {"rz": rz, "sx": sx}})
    with pytest.raises(InputError, match="no entangler to show"):
        picture_of(alone, {})
    swap = {"qubits": 2, "matrix": np.eye(4)[[0, 2, 1, 3]]}
    only = gw.read_gate_set({"name": "only", "gates": {"rz": rz, "sx": sx, "swap": swap}})
    with pytest.raises(GatewrightError, match="cannot entangle"):
        picture_of(only, {})
