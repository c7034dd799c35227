"""The Weyl chamber as an SVG picture: what each number of uses reaches, and where entanglers and targets lie.

One solid for each number of uses, all drawn alike: the chamber π/4 ≥ x ≥ y ≥ |z| in parallel projection, seen from the
side of CNOT, x to the right, z upwards, y away to the right; the reached part filled, its share of Haar-random
unitaries below. Marks have letters (entanglers) or numbers (targets), explained in the key at the bottom; a dotted
line leads from a mark straight down (or up) to the plane z = 0. The picture has a background of its own.
"""

from __future__ import annotations

import itertools
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from fractions import Fraction
from xml.sax.saxutils import escape

import numpy as np
from numpy.typing import ArrayLike, NDArray

__all__ = ["Mark", "Panel", "angle_text", "chamber_part", "draw_chamber", "inside_chamber"]

Vector = NDArray[np.float64]

_QUARTER = np.pi / 4
_SAME = 1e-7
#: normal · p ≥ offset.
_CHAMBER = np.array([[1.0, -1, 0], [0, 1, -1], [0, 1, 1], [-1, 0, 0]])
_CHAMBER_OFFSETS = np.array([0.0, 0, 0, -_QUARTER])
#: Screen directions of x, y, z in units of π/4, y of the screen pointing down; and the direction towards the eye.
_SCREEN = np.array([[146.0, 0.0], [70.0, -108.0], [0.0, -76.0]])
_TO_EYE = np.array([70 / 146, -1.0, 108 / 76])
_WIDTH, _HEIGHT = 372, 318
_ORIGIN = np.array([40.0, 232.0])
_MOST_IN_A_ROW = 3
_HEAD = 70

_PAPER, _INK, _QUIET, _LINE = "#fbfaf6", "#1d2a36", "#5b6873", "#8a96a0"
_SOLID = np.array([27.0, 122.0, 134.0])
_ENTANGLER, _TARGET = "#b4500f", "#9a1450"
_FONT = "font-family=\"'DejaVu Sans', 'Segoe UI', Helvetica, Arial, sans-serif\""


@dataclass(frozen=True, slots=True, eq=False)
class Mark:
    """A point to show: its name, its chamber point, whether it is a target (else an entangler), and a remark."""

    name: str
    point: Vector
    target: bool = False
    remark: str = ""


@dataclass(frozen=True, slots=True, eq=False)
class Panel:
    """One drawing of the chamber: a heading, a line below, and the convex pieces (v, 3) that are filled."""

    heading: str
    below: str
    pieces: tuple[Vector, ...]


def chamber_part(normals: ArrayLike, offsets: ArrayLike) -> Vector:
    """Return the corners, shape (v, 3), of the part of the chamber where normal · p ≥ offset for all."""
    sides = np.concatenate([np.asarray(normals, dtype=np.float64), _CHAMBER])
    return _corners(sides, np.concatenate([np.asarray(offsets, dtype=np.float64), _CHAMBER_OFFSETS]))


def inside_chamber(normals: ArrayLike, offsets: ArrayLike) -> tuple[Vector, ...]:
    """Return the corners of what a region of the alcove has in the chamber, itself and by its other image.

    Parameters
    ----------
    normals : array_like, shape (m, 3)
    offsets : array_like, shape (m,)
        normal · p ≥ offset for points p of the alcove x ≥ y ≥ |z|, x + y ≤ π/2, of which (x, y, z) and
        (π/2 − x, y, −z) are the same class.

    Returns
    -------
    tuple of ndarray, shape (v, 3)
        Two at most; a piece may be flat, a line or a point.
    """
    a, b = np.asarray(normals, dtype=np.float64), np.asarray(offsets, dtype=np.float64)
    pieces: list[tuple[Vector, Vector, Vector]] = []
    for signs, shift in ((np.array([1.0, 1, 1]), 0.0), (np.array([-1.0, 1, -1]), np.pi / 2)):
        limits = np.concatenate([b - a[:, 0] * shift, _CHAMBER_OFFSETS])
        sides = np.concatenate([a * signs, _CHAMBER])
        corners = _corners(sides, limits)
        if len(corners):
            pieces.append((corners, sides, limits))
    # One that lies in the other, such as a corner common to both, adds nothing.
    if len(pieces) == 2:
        for k in (1, 0):
            corners, (_, sides, limits) = pieces[k][0], pieces[1 - k]
            if (corners @ sides.T >= limits - 2 * _SAME).all():
                del pieces[k]
                break
    return tuple(corners for corners, _, _ in pieces)


def _corners(normals: Vector, offsets: Vector) -> Vector:
    """Return the vertices of {normals · p ≥ offsets}: where three planes meet and no inequality fails."""
    finite = np.isfinite(offsets)
    normals, offsets = normals[finite], offsets[finite]
    triples = np.array(list(itertools.combinations(range(len(normals)), 3)))
    matrices = normals[triples]
    proper = np.abs(np.linalg.det(matrices)) > 1e-9
    points = np.linalg.solve(matrices[proper], offsets[triples[proper]][..., None])[..., 0]
    points = points[(points @ normals.T >= offsets - _SAME).all(axis=1)]
    _, first = np.unique(np.round(points / (10 * _SAME)), axis=0, return_index=True)
    kept: list[Vector] = []
    for point in points[np.sort(first)]:
        if all(np.abs(point - other).max() > 10 * _SAME for other in kept):
            kept.append(point)
    return np.array(kept).reshape(-1, 3)


def angle_text(angle: float) -> str:
    """Return an angle as a fraction of π where it is a simple one, else as a decimal multiple.

    Examples
    --------
    >>> angle_text(np.pi / 4), angle_text(-3 * np.pi / 8), angle_text(0.0), angle_text(0.5)
    ('π/4', '−3π/8', '0', '0.1592π')
    """
    ratio = Fraction(angle / np.pi).limit_denominator(24)
    sign = "−" if angle < 0 else ""
    if abs(float(ratio) * np.pi - angle) < 1e-9:
        if ratio == 0:
            return "0"
        numerator = "" if abs(ratio.numerator) == 1 else str(abs(ratio.numerator))
        return f"{sign}{numerator}π" + (f"/{ratio.denominator}" if ratio.denominator > 1 else "")
    return f"{sign}{abs(angle) / np.pi:.4f}π"


def draw_chamber(title: str, panels: Sequence[Panel], marks: Sequence[Mark] = (), *, about: str = "") -> str:
    """Return an SVG picture.

    Parameters
    ----------
    title, about : str
        Heading, and a line below it.
    panels : sequence of Panel
    marks : sequence of Mark
        Shown in every panel.

    Examples
    --------
    >>> picture = draw_chamber("nothing", [Panel("1 use", "0 %", ())])
    >>> picture.startswith("<svg"), picture.rstrip().endswith("</svg>")
    (True, True)
    """
    columns = min(len(panels), _MOST_IN_A_ROW)
    rows = -(-len(panels) // columns)
    width = max(columns, 2) * _WIDTH + 24
    key = list(_key(marks, width))
    height = _HEAD + rows * _HEIGHT + (20 + 22 * len(key) if key else 0) + 14
    parts = [
        f'<svg xmlns="http://www.w3.org/2000/svg" width="{width}" height="{height}" viewBox="0 0 {width} {height}" '
        f'role="img" {_FONT}>',
        f"<title>{escape(title)}</title>",
        f'<rect width="{width}" height="{height}" rx="10" fill="{_PAPER}"/>',
        _text(24, 34, _fitted(title, (width - 48) / 11), size=17, weight="bold"),
        _text(24, 55, _fitted(about, (width - 48) / 8.2), size=13, colour=_QUIET),
    ]
    margin = (width - columns * _WIDTH) / 2
    for number, panel in enumerate(panels):
        row, column = divmod(number, columns)
        parts.append(f'<g transform="translate({margin + column * _WIDTH:g} {_HEAD - 4 + row * _HEIGHT})">')
        parts += _panel(panel, marks)
        parts.append("</g>")
    top = _HEAD + rows * _HEIGHT
    if key:
        parts.append(f'<path d="M24 {top}H{width - 24}" stroke="{_LINE}" stroke-width="0.8"/>')
    for line, (badge, target, text) in enumerate(key):
        y = top + 24 + 22 * line
        parts += [_badge(36, y - 4, badge, target), _text(58, y, text, size=13)]
    return "\n".join([*parts, "</svg>", ""])


def _key(marks: Sequence[Mark], width: float) -> Iterator[tuple[str, bool, str]]:
    for badge, mark in zip(_badges(marks), marks, strict=True):
        place = ", ".join(angle_text(float(c)) for c in mark.point)
        text = f"{mark.name} · ({place})" + (f" · {mark.remark}" if mark.remark else "")
        yield badge, mark.target, _fitted(text, (width - 90) / 8.2)


def _fitted(text: str, room: float) -> str:
    return text if len(text) <= room else text[: int(room) - 1] + "…"


def _badges(marks: Sequence[Mark]) -> list[str]:
    letters, numbers = iter("abcdefghijklmnopqrstuvwxyz" * 4), itertools.count(1)
    return [str(next(numbers)) if mark.target else next(letters) for mark in marks]


def _place(points: ArrayLike) -> Vector:
    return np.asarray(_ORIGIN + (np.asarray(points, dtype=np.float64) / _QUARTER) @ _SCREEN)


def _panel(panel: Panel, marks: Sequence[Mark]) -> Iterator[str]:
    corners = _QUARTER * np.array([[0.0, 0, 0], [1, 0, 0], [1, 1, 1], [1, 1, -1], [1, 1, 0]])
    o, cnot, swap, other, iswap = _place(corners)
    yield _text(_WIDTH / 2, 20, panel.heading, size=15, weight="bold", anchor="middle")
    yield f'<path d="{_path([o, cnot, other, swap])}Z" fill="#ffffff" stroke="none"/>'
    for piece in sorted(panel.pieces, key=lambda piece: float(piece.mean(axis=0) @ _TO_EYE)):
        yield from _piece(piece)
    yield _line([o, other], _LINE, 1.0)
    yield _line([swap, o, cnot, other, swap, cnot], _INK, 1.3)
    # The plane z = 0: its far edge, and where it cuts the near wall.
    yield _line([o, iswap, cnot], _LINE, 0.9, "4 3")
    yield from (_dot(point, 2.6, _INK) for point in (o, cnot, swap, other, iswap))
    yield _label(o + [-14, 24], "local", "(0, 0, 0)", "start")
    yield _label(cnot + [2, 24], "CNOT", "(π/4, 0, 0)", "middle")
    yield _label(swap + [15, -1], "SWAP", "(π/4, π/4, π/4)", "start")
    yield _label(other + [15, 1], "SWAP", "(π/4, π/4, −π/4)", "start")
    yield _label(iswap + [15, 0], "iSWAP", "(π/4, π/4, 0)", "start")
    yield from _axes()
    yield from _marks(marks)
    yield _text(_WIDTH / 2, _HEIGHT - 14, panel.below, size=13, anchor="middle")


def _axes() -> Iterator[str]:
    at = np.array([34.0, 88.0])
    for direction, name in zip(_SCREEN, "xyz", strict=True):
        tip = at + 26 * direction / np.linalg.norm(direction)
        beyond = at + 35 * direction / np.linalg.norm(direction)
        yield _line([at, tip], _QUIET, 1.1)
        yield _dot(tip, 1.8, _QUIET)
        yield _text(float(beyond[0]), float(beyond[1]) + 4, name, size=12, anchor="middle", colour=_QUIET)


def _piece(corners: Vector) -> Iterator[str]:
    """Fill a convex piece: far faces first, near ones over them, each shaded by the way it looks."""
    centre = corners.mean(axis=0)
    spread = np.linalg.svd(corners - centre, compute_uv=False) if len(corners) > 1 else np.zeros(1)
    rank = int(np.count_nonzero(spread > 1e-6))
    colour = _tint(0.62)
    if rank == 0:
        yield _dot(_place(centre), 5, colour)
    elif rank == 1:
        along = np.argsort((corners - centre) @ (corners[0] - corners[-1]))
        yield _line(_place(corners[along[[0, -1]]]), colour, 5)
    elif rank == 2:
        normal = np.linalg.svd(corners - centre)[2][2]
        outline = _path(_place(corners[_around(corners, normal)]))
        edge = f'stroke="{_tint(0.35)}" stroke-width="1.6" stroke-linejoin="round"'
        yield f'<path d="{outline}Z" fill="{colour}" fill-opacity="0.8" {edge}/>'
    else:
        faces = list(_faces(corners))
        for near in (False, True):
            for normal, face in faces:
                facing = float(normal @ _TO_EYE / np.linalg.norm(_TO_EYE))
                if (facing > 1e-9) is near:
                    light = 0.5 + 0.34 * float(normal @ np.array([-0.45, -0.35, 0.82]))
                    fill = f'fill="{_tint(light)}" fill-opacity="{0.74 if near else 0.35}"'
                    edge = f'stroke="{_tint(0.2)}" stroke-width="{1.1 if near else 0.6}" stroke-linejoin="round"'
                    yield f'<path d="{_path(_place(corners[face]))}Z" {fill} {edge}/>'


def _faces(corners: Vector) -> Iterator[tuple[Vector, NDArray[np.intp]]]:
    """Yield the outward normal and the corners in order of each face of a solid convex hull."""
    centre = corners.mean(axis=0)
    seen: set[frozenset[int]] = set()
    for triple in itertools.combinations(range(len(corners)), 3):
        a, b, c = corners[list(triple)]
        normal = np.cross(b - a, c - a)
        size = float(np.linalg.norm(normal))
        if size < 1e-9:
            continue
        normal = normal / size
        heights = (corners - a) @ normal
        if heights.max() > 1e-6 and heights.min() < -1e-6:
            continue
        on = np.flatnonzero(np.abs(heights) <= 1e-6)
        if frozenset(on.tolist()) in seen:
            continue
        seen.add(frozenset(on.tolist()))
        outward = normal if (centre - a) @ normal < 0 else -normal
        yield outward, on[_around(corners[on], outward)]


def _around(corners: Vector, normal: Vector) -> NDArray[np.intp]:
    """Return the order of points of a plane around their middle."""
    away = corners - corners.mean(axis=0)
    first = away[int(np.argmax(np.linalg.norm(away, axis=1)))]
    first = first / np.linalg.norm(first)
    return np.argsort(np.arctan2(away @ np.cross(normal, first), away @ first))


def _marks(marks: Sequence[Mark]) -> Iterator[str]:
    places: list[tuple[Vector, str, bool]] = []
    for badge, mark in zip(_badges(marks), marks, strict=True):
        place, foot = _place(mark.point), _place(mark.point * [1, 1, 0])
        if np.linalg.norm(place - foot) > 3:
            colour = _TARGET if mark.target else _ENTANGLER
            yield _line([place, foot], colour, 1.3, "2 2.5")
            yield _dot(foot, 2, colour)
        for k, (other, text, target) in enumerate(places):
            if target == mark.target and np.linalg.norm(other - place) < 15:
                places[k] = (other, f"{text},{badge}" if target else text + badge, target)
                break
        else:
            places.append((place, badge, mark.target))
    taken = [place for place, _, target in places if not target]
    for place, text, target in places:
        x, y = float(place[0]), float(place[1])
        if target and any(np.linalg.norm(place - other) < 15 for other in taken):
            # Above the entangler that is there.
            yield _line([place, place - [0, 20]], _TARGET, 1.3)
            y -= 21
        yield _badge(x, y, text, target)


def _badge(x: float, y: float, text: str, target: bool) -> str:
    colour = _TARGET if target else _ENTANGLER
    half = 8.5 + 3.4 * (len(text) - 1)
    # Targets are round, entanglers square: to be told apart without colour.
    corner = 8.5 if target else 2.5
    return (
        f'<rect x="{x - half:.1f}" y="{y - 8.5:.1f}" width="{2 * half:.1f}" height="17" rx="{corner}" fill="{colour}" '
        f'stroke="#ffffff" stroke-width="1.4"/>'
        + _text(x, y + 4.2, text, size=11.5, weight="bold", anchor="middle", colour="#ffffff")
    )


def _tint(light: float) -> str:
    """Return the solid's colour, mixed with white (above a half) or with black."""
    light = min(max(light, 0.0), 1.0)
    mixed = _SOLID * (2 * light) if light < 0.5 else _SOLID + (255 - _SOLID) * (2 * light - 1) * 0.8
    return "#" + "".join(f"{round(float(c)):02x}" for c in mixed)


def _line(points: Sequence[Vector] | Vector, colour: str, width: float, dashes: str = "") -> str:
    dashed = f' stroke-dasharray="{dashes}"' if dashes else ' stroke-linecap="round" stroke-linejoin="round"'
    return f'<path d="{_path(points)}" fill="none" stroke="{colour}" stroke-width="{width}"{dashed}/>'


def _dot(at: Vector, radius: float, colour: str) -> str:
    return f'<circle cx="{at[0]:.1f}" cy="{at[1]:.1f}" r="{radius}" fill="{colour}"/>'


def _path(points: Sequence[Vector] | Vector) -> str:
    return "M" + "L".join(f"{x:.1f} {y:.1f}" for x, y in points)


def _label(at: Vector, name: str, place: str, anchor: str) -> str:
    x, y = (float(c) for c in at)
    return _text(x, y, name, size=12, anchor=anchor, weight="bold") + _text(
        x, y + 14, place, size=11, anchor=anchor, colour=_QUIET
    )


def _text(
    x: float, y: float, text: str, *, size: float, anchor: str = "start", weight: str = "", colour: str = _INK
) -> str:
    bold = f' font-weight="{weight}"' if weight else ""
    place = f'x="{x:.1f}" y="{y:.1f}" font-size="{size}" text-anchor="{anchor}"'
    return f'<text {place} fill="{colour}"{bold}>{escape(text)}</text>'
