"""The chamber picture of a gate set, a device or a matrix: the panels and marks for `gatewright.report.chamber`."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from gatewright.devices import Device, GateSet
from gatewright.errors import InputError
from gatewright.reach_facts import entangler_points
from gatewright.report.chamber import Mark, Panel, chamber_part, draw_chamber, inside_chamber
from gatewright.synthesis.haar_cost import Uses, reach_by_number
from gatewright.synthesis.polytopes import FORMS, WALLS
from gatewright.synthesis.weyl import canonical_coordinates

__all__ = ["picture_of"]

Array = NDArray[np.complex128]

_MOST_PANELS = 6
_QUARTER = np.pi / 4
#: x + y ≥ π/4, and y + |z| ≤ π/4: Zhang, Vala, Sastry, Whaley, PRA 67, 042313 (2003).
_PERFECT = np.array([[1.0, 1, 0], [0, -1, -1], [0, -1, 1]])
_PERFECT_OFFSETS = np.array([_QUARTER, -_QUARTER, -_QUARTER])


def picture_of(thing: Device | GateSet | Array, facts: Mapping[str, Any], *, name: str = "") -> str:
    """Return an SVG picture of what a gate set reaches, or of where a two-qubit unitary lies.

    Parameters
    ----------
    thing : Device, GateSet or ndarray, shape (4, 4)
    facts : mapping
        What `gatewright.describe` tells about it; its targets are marked.
    name : str
        Of the matrix.

    Raises
    ------
    InputError
        A matrix that is not on two qubits, or a gate set without entangler.
    GatewrightError
        The set cannot be used; why.
    """
    if isinstance(thing, (Device, GateSet)):
        return _of_gate_set(thing.gate_set if isinstance(thing, Device) else thing, facts)
    if thing.shape != (4, 4):
        found = f"{len(thing).bit_length() - 1} qubits"
        raise InputError("the chamber shows two-qubit gates", required="2 qubits", found=found, where=name)
    pieces = (chamber_part(_PERFECT, _PERFECT_OFFSETS),)
    power = f"entangling power {facts['entangling_power']:.4f} of at most 2/9 = 0.2222"
    panel = Panel("perfect entanglers (8/3π of all) are filled", power, pieces)
    remark = f"{facts['cnot_count']} CNOTs; {'' if facts['perfect_entangler'] else 'not '}a perfect entangler"
    mark = _mark(name or "matrix", thing, remark)
    return draw_chamber(name or "matrix", [panel], [mark], about="the class of a two-qubit unitary")


def _mark(name: str, unitary: Array, remark: str) -> Mark:
    return Mark(name, canonical_coordinates(unitary), True, remark)


def _of_gate_set(gate_set: GateSet, facts: Mapping[str, Any]) -> str:
    names, points = entangler_points(gate_set)
    if not points:
        raise InputError(f"gate set '{gate_set.name}' has no entangler to show", required="a two-qubit gate")
    levels = reach_by_number(points)
    marks = [Mark(name, np.array(point)) for name, point in zip(names, points, strict=True)]
    for name, target in facts.get("targets", {}).items():
        uses = target["uses"]
        marks.append(Mark(Path(name).name, np.array(target["coordinates"]), True, f"{uses} use{'s' * (uses != 1)}"))
    panels = [_panel(level) for level in _chosen(levels)]
    about = "classes of two-qubit gates that so many uses of its entanglers reach, with free one-qubit gates"
    return draw_chamber(gate_set.name, panels, marks, about=about)


def _chosen(levels: tuple[Uses, ...]) -> list[Uses]:
    """Leave out numbers of uses where there are too many: most of those that reach almost nothing or almost all."""
    shown = list(levels[1:])
    if len(shown) > _MOST_PANELS:
        moving = [level for level in shown[:-1] if 1e-3 < level.share < 1 - 1e-3] or shown[:-1]
        picked = np.unique(np.linspace(0, len(moving) - 1, _MOST_PANELS - 1).round().astype(int))
        shown = [*(moving[k] for k in picked), shown[-1]]
    return shown


def _panel(level: Uses) -> Panel:
    heading = f"{level.uses} use{'s' * (level.uses > 1)}"
    if level.share >= 1:
        walls = np.array([0.0, 0, 0, -np.pi / 2])
        return Panel(heading, "everything", (chamber_part(WALLS, walls),))
    pieces = tuple(piece for polytope in level.polytopes for piece in inside_chamber(FORMS, polytope.bounds))
    share = f"{100 * level.share:.2f} % of Haar-random unitaries" if level.share > 5e-5 else "no volume: a share of 0"
    if level.uses == 1:
        share = "a single class" if len(level.polytopes) == 1 else f"{len(level.polytopes)} classes"
    return Panel(heading, share, pieces)
