"""Devices: a native gate set on a coupling graph, with calibration per qubit, per pair and per gate.

A device file is TOML; its keys are described at `read_device`. Durations are in nanoseconds, errors are
probabilities as randomised benchmarking gives them (one minus the average fidelity), NaN stands for unknown.
"""

from __future__ import annotations

import math
import os
from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field
from functools import cached_property
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from gatewright.devices.coupling import Coupling, read_coupling
from gatewright.devices.gateset import GateSet, NativeGate, read_gate_set, shipped_gate_sets
from gatewright.devices.reading import Table, is_integer, load_toml
from gatewright.errors import DeviceError, nearest_name, shorten
from gatewright.gates import MEASURE, RESET

if TYPE_CHECKING:
    import networkx

__all__ = ["Device", "read_any", "read_device"]

Integers = NDArray[np.int32]
Vector = NDArray[np.float64]

_QUBIT_COLUMNS = {
    "t1_ns": (1e-3, math.inf),
    "t2_ns": (1e-3, math.inf),
    "readout_error": (0.0, 1.0),
    "readout_duration_ns": (0.0, math.inf),
    "reset_duration_ns": (0.0, math.inf),
}
_GATE_COLUMNS = {"error": (0.0, 1.0), "duration_ns": (0.0, math.inf)}


@dataclass(frozen=True, eq=False)
class Device:
    """A quantum processor: what it can do, where, how well and how fast.

    Make one with `read_device` or `Device.from_graph`. Arrays are read-only.

    Attributes
    ----------
    name : str
    gate_set : GateSet
    n_qubits : int
        Qubits are numbered 0 to ``n_qubits - 1``; those out of service keep their numbers.
    pairs : ndarray of int32, shape (E, 2)
        Ordered pairs in service that may carry a two-qubit gate, as (first qubit, second qubit), in lexicographic
        order. Both orders are there unless the coupling is directed.
    active : ndarray of bool, shape (n_qubits,)
        False for qubits out of service.
    removed_edges : ndarray of int32, shape (K, 2)
        Edges of the coupling that are out of service, or end at a qubit that is; smaller qubit first.
    t1_ns, t2_ns, readout_error, readout_duration_ns, reset_duration_ns : ndarray, shape (n_qubits,)
    gate_errors, gate_durations : mapping of str to ndarray
        For each native gate one value a qubit, shape (n_qubits,), or a row of `pairs`, shape (E,).
    description : str
    gate_pairs : mapping of str to ndarray of bool
        For the two-qubit gates that are not on all pairs: on which rows of `pairs` each is, shape (E,). In either
        order for a gate that is symmetric in its qubits.
    """

    name: str
    gate_set: GateSet
    n_qubits: int
    pairs: Integers
    active: NDArray[np.bool_]
    removed_edges: Integers
    t1_ns: Vector = field(repr=False)
    t2_ns: Vector = field(repr=False)
    readout_error: Vector = field(repr=False)
    readout_duration_ns: Vector = field(repr=False)
    reset_duration_ns: Vector = field(repr=False)
    gate_errors: Mapping[str, Vector] = field(repr=False)
    gate_durations: Mapping[str, Vector] = field(repr=False)
    description: str = ""
    gate_pairs: Mapping[str, NDArray[np.bool_]] = field(default_factory=dict, repr=False)

    def __post_init__(self) -> None:
        """Make the arrays read-only."""
        for value in (
            *vars(self).values(),
            *self.gate_errors.values(),
            *self.gate_durations.values(),
            *self.gate_pairs.values(),
        ):
            if isinstance(value, np.ndarray):
                value.setflags(write=False)

    @classmethod
    def from_graph(
        cls,
        graph: Any,
        gate_set: GateSet | str | os.PathLike[str] | Mapping[str, Any],
        *,
        name: str = "device",
        n_qubits: int | None = None,
        directed: bool | None = None,
    ) -> Device:
        """Return a device without calibration on a given graph.

        Parameters
        ----------
        graph : Coupling, networkx graph, or array_like of int, shape (M, 2)
            A networkx graph keeps its labels if they are 0 to n−1; otherwise its nodes are numbered in the order
            of ``graph.nodes``.
        gate_set : GateSet, name, path or mapping
            As `read_gate_set` takes it.
        name : str
        n_qubits : int, optional
            For an edge list: number of qubits, one more than the largest number by default.
        directed : bool, optional
            For an edge list or a `Coupling`: an edge carries a two-qubit gate only in its own order. By default
            as the graph is; no for a list.

        Raises
        ------
        DeviceError, GateSetError

        Examples
        --------
        >>> device = Device.from_graph([(0, 1), (1, 2)], "cz-virtual-z")
        >>> device.pairs.tolist()
        [[0, 1], [1, 0], [1, 2], [2, 1]]
        """
        coupling = _as_coupling(graph, n_qubits, directed)
        chosen = gate_set if isinstance(gate_set, GateSet) else read_gate_set(gate_set)
        return _assemble(Table({}, error=DeviceError), name, "", chosen, coupling)

    @cached_property
    def edges(self) -> Integers:
        """Unordered pairs in service, shape (M, 2), smaller qubit first, in lexicographic order."""
        edges = np.unique(np.sort(self.pairs, axis=1), axis=0)
        edges.setflags(write=False)
        return edges

    @cached_property
    def graph(self) -> networkx.DiGraph:
        """Coupling graph of what is in service: a node for each active qubit, an edge for each row of `pairs`."""
        import networkx

        graph = networkx.DiGraph()
        graph.add_nodes_from(np.flatnonzero(self.active).tolist())
        graph.add_edges_from(self.pairs.tolist())
        return graph

    @cached_property
    def _components(self) -> tuple[Integers, ...]:
        from scipy.sparse import coo_array
        from scipy.sparse.csgraph import connected_components

        ends = self.pairs.T
        matrix = coo_array((np.ones(len(self.pairs), dtype=np.int8), (ends[0], ends[1])), shape=(self.n_qubits,) * 2)
        _, labels = connected_components(matrix, directed=False)
        qubits = np.flatnonzero(self.active).astype(np.int32)
        order = np.argsort(labels[qubits], kind="stable")
        cuts = np.flatnonzero(np.diff(labels[qubits][order])) + 1
        return tuple(sorted(np.split(qubits[order], cuts), key=lambda part: int(part[0])))

    def components(self) -> tuple[Integers, ...]:
        """Return the active qubits in connected groups, each in ascending order."""
        return self._components

    @property
    def is_connected(self) -> bool:
        """Whether there is a path between any two active qubits."""
        return len(self._components) == 1

    def require_room(self, n_qubits: int) -> None:
        """Check that a circuit of `n_qubits` finds as many qubits in service.

        Raises
        ------
        DeviceError
        """
        in_service = int(np.count_nonzero(self.active))
        if n_qubits > in_service:
            raise DeviceError(
                "the circuit has more qubits than the device",
                required=f"{in_service} at most on {self.name}",
                found=str(n_qubits),
            )

    def native(self, gate_name: str) -> NativeGate:
        """Return a native gate by name.

        Raises
        ------
        DeviceError
            Naming the nearest one.
        """
        gate = self.gate_set.gates.get(gate_name)
        if gate is None:
            raise DeviceError(
                f"'{shorten(gate_name)}' is not native here",
                hint=nearest_name(str(gate_name), self.gate_set.gates),
                where=self.name,
            )
        return gate

    def allowed_qubits(self, gate_name: str) -> Integers:
        """Return the qubits on which a one-qubit gate is legal, shape (k,)."""
        self._check_width(gate_name, 1)
        return np.flatnonzero(self.active).astype(np.int32)

    def allowed_pairs(self, gate_name: str) -> Integers:
        """Return the ordered pairs on which a two-qubit gate is legal, shape (k, 2), in lexicographic order.

        For a gate that is symmetric in its qubits both orders are legal on a directed coupling too.
        """
        self._check_width(gate_name, 2)
        pairs = self.pairs[self.gate_pairs[gate_name]] if gate_name in self.gate_pairs else self.pairs
        if not self.native(gate_name).symmetric:
            return pairs
        return np.unique(np.concatenate([pairs, pairs[:, ::-1]]), axis=0)

    def allows(self, gate_name: str, qubits: ArrayLike) -> NDArray[np.bool_]:
        """Return whether a native gate is legal on each row of `qubits`, shape (k, w) → (k,)."""
        return self._places(gate_name, qubits) >= 0

    def errors(self, gate_name: str, qubits: ArrayLike) -> Vector:
        """Return the error of a native gate, or of ``measure``, on each row of `qubits`.

        Parameters
        ----------
        gate_name : str
        qubits : array_like of int, shape (k, w)

        Returns
        -------
        ndarray, shape (k,)
            NaN where it is not known, or the gate is not legal there.

        Examples
        --------
        >>> device = Device.from_graph([(0, 1), (1, 2)], "cz-virtual-z")
        >>> device.errors("cz", [[0, 1], [0, 2]]).tolist()
        [0.005, nan]
        """
        known = {MEASURE.name: self.readout_error, RESET.name: np.full(self.n_qubits, np.nan), **self.gate_errors}
        return self._look_up(known, gate_name, qubits)

    def durations(self, gate_name: str, qubits: ArrayLike) -> Vector:
        """Return the duration of a native gate, ``measure`` or ``reset`` on each row of `qubits`, as `errors` does."""
        known = {
            MEASURE.name: self.readout_duration_ns,
            RESET.name: self.reset_duration_ns,
            **self.gate_durations,
        }
        return self._look_up(known, gate_name, qubits)

    def error(self, gate_name: str, qubits: Iterable[int]) -> float:
        """Return the error of a gate on some qubits; NaN where it is not known."""
        return float(self.errors(gate_name, [list(qubits)])[0])

    def duration(self, gate_name: str, qubits: Iterable[int]) -> float:
        """Return the duration of a gate on some qubits, in nanoseconds; NaN where it is not known."""
        return float(self.durations(gate_name, [list(qubits)])[0])

    @cached_property
    def _keys(self) -> NDArray[np.int64]:
        return self.pairs[:, 0].astype(np.int64) * self.n_qubits + self.pairs[:, 1]

    def _check_width(self, gate_name: str, width: int) -> None:
        if self.native(gate_name).gate.n_qubits != width:
            raise DeviceError(f"'{gate_name}' has another number of qubits", required=str(width), where=self.name)

    def _look_up(self, known: Mapping[str, Vector], gate_name: str, qubits: ArrayLike) -> Vector:
        places = self._places(gate_name, qubits)
        out = np.full(len(places), np.nan)
        legal = places >= 0
        out[legal] = known[gate_name][places[legal]]
        return out

    def _places(self, gate_name: str, qubits: ArrayLike) -> NDArray[np.int64]:
        """Return where the values of a gate on `qubits` stand in its array, -1 where it is not legal."""
        width, symmetric = 1, False
        if gate_name not in (MEASURE.name, RESET.name):
            gate = self.native(gate_name)
            width, symmetric = gate.gate.n_qubits, gate.symmetric
        rows = np.asarray(qubits, dtype=np.int64)
        if rows.ndim != 2 or (rows.shape[1] != width and len(rows)):
            raise DeviceError(
                f"qubits of '{gate_name}' of the wrong shape", required=f"(k, {width})", found=str(rows.shape)
            )
        if len(rows) and not (rows.min() >= 0 and rows.max() < self.n_qubits):
            raise DeviceError("qubit index out of range", required=f"0 to {self.n_qubits - 1}", where=self.name)
        if width == 1 or not len(rows):
            found = rows[:, 0] if len(rows) else np.zeros(0, dtype=np.int64)
            return np.where(self.active[found], found, -1)
        here = np.append(self.gate_pairs.get(gate_name, np.ones(len(self.pairs), dtype=np.bool_)), False)
        places = self._find(rows[:, 0], rows[:, 1])
        places = np.where(here[places], places, -1)
        if symmetric:
            reverse = self._find(rows[:, 1], rows[:, 0])
            places = np.where((places < 0) & here[reverse], reverse, places)
        return places

    def _find(self, first: NDArray[np.int64], second: NDArray[np.int64]) -> NDArray[np.int64]:
        """Return the rows of `pairs`, -1 where there is none."""
        if not len(self._keys):
            return np.full(len(first), -1)
        wanted = first * self.n_qubits + second
        place = np.minimum(np.searchsorted(self._keys, wanted), len(self._keys) - 1)
        return np.where(self._keys[place] == wanted, place, -1)


def _as_coupling(graph: Any, n_qubits: int | None, directed: bool | None) -> Coupling:
    if isinstance(graph, Coupling):
        return graph if directed is None else Coupling(graph.n_qubits, graph.edges, directed)
    if hasattr(graph, "is_directed") and hasattr(graph, "nodes") and hasattr(graph, "edges"):
        nodes = list(graph.nodes)
        if set(nodes) == set(range(len(nodes))):
            nodes.sort()
        number = {node: k for k, node in enumerate(nodes)}
        edges = [(number[a], number[b]) for a, b in graph.edges()]
        return Coupling.from_edges(edges, n_qubits=len(nodes), directed=graph.is_directed())
    return Coupling.from_edges(graph, n_qubits=n_qubits, directed=bool(directed))


def read_device(source: str | os.PathLike[str] | Mapping[str, Any]) -> Device:
    """Read a device from a file, or from the same content as a mapping.

    Parameters
    ----------
    source : path or mapping
        Keys:

        ``name``, ``description``
            Text; the description may be left out.
        ``gate_set``
            Name of a shipped gate set, a path to a ``.toml`` file (relative to this file), or a table.
        ``coupling``
            Either ``shape``, one of ``line``, ``ring``, ``all-to-all`` with ``qubits``, ``grid`` with ``rows`` and
            ``columns``, ``hexagons`` with ``rows``, ``columns`` and ``on_edges``; or ``edges``, a list of pairs, with
            ``qubits`` (optional). In both cases ``without``, a list of sites to leave out (the rest is numbered
            on), and ``directed``: an edge [a, b] carries a two-qubit gate with a as its first qubit only (edges
            of a shape go from the smaller number to the larger).
        ``out_of_service``
            ``qubits`` and ``edges``, lists; an edge goes out in both directions.
        ``gates.NAME.pairs``
            For a two-qubit gate that is not on every pair of the coupling: the pairs that have it, in the order in
            which they have it (either one for a gate that is symmetric in its qubits). A gate left out is on all.
        ``calibration``
            ``t1_ns``, ``t2_ns``, ``readout_error``, ``readout_duration_ns``, ``reset_duration_ns``: one number, or a
            list with one a qubit, nan where unknown. ``gates.NAME`` with ``error`` and ``duration_ns``, for a one-qubit
            gate in the same way; for a two-qubit gate one number each, and ``pairs``, a list of
            ``{qubits = [a, b], error = …, duration_ns = …}`` for single pairs. A row for [a, b] holds for [b, a] too
            unless that has a row. What is left out is taken from the gate set.

    Returns
    -------
    Device

    Raises
    ------
    DeviceError, GateSetError
        What is wrong, in which entry, with the file's name, and the line where TOML itself is at fault.

    Examples
    --------
    >>> device = read_device(
    ...     {
    ...         "name": "four",
    ...         "gate_set": "cz-virtual-z",
    ...         "coupling": {"shape": "ring", "qubits": 4},
    ...         "calibration": {"gates": {"cz": {"pairs": [{"qubits": [2, 1], "error": 0.01}]}}},
    ...     }
    ... )
    >>> device.errors("cz", device.pairs).tolist()
    [0.005, 0.005, 0.005, 0.01, 0.01, 0.005, 0.005, 0.005]
    """
    if isinstance(source, (str, os.PathLike)):
        return _read(load_toml(source, error=DeviceError), Path(source))
    return _read(source, None)


def read_any(source: str | os.PathLike[str]) -> Device | GateSet:
    """Read a gate set, by its shipped name or from a file, or a device from a file.

    Raises
    ------
    DeviceError, GateSetError
        Also where a file is neither.

    Examples
    --------
    >>> read_any("ion-xx").name
    'ion-xx'
    """
    if isinstance(source, str) and source in shipped_gate_sets():
        return read_gate_set(source)
    data = load_toml(source, error=DeviceError)
    if "coupling" in data or "gate_set" in data:
        return _read(data, Path(source))
    where = shorten(os.fspath(source), 200)
    if "gates" in data:
        return read_gate_set(data, where=where)
    raise DeviceError(
        "the file is neither a gate set nor a device", required="'gates', or 'gate_set' and 'coupling'", where=where
    )


def _read(data: object, file: Path | None) -> Device:
    where, folder = ("", Path()) if file is None else (shorten(file, 200), file.parent)
    known = ("name", "description", "gate_set", "coupling", "gates", "out_of_service", "calibration")
    table = Table(data, error=DeviceError, where=where, known=known)
    name = table.text("name")
    description = table.text("description", "", limit=2000)
    gate_set = _device_gate_set(table, folder)
    table.get("coupling")
    coupling = read_coupling(table.table("coupling"))
    return _assemble(table, name, description, gate_set, coupling)


def _device_gate_set(table: Table, folder: Path) -> GateSet:
    value = table.get("gate_set")
    if isinstance(value, GateSet):
        return value
    if isinstance(value, Mapping):
        return read_gate_set(value, where=table.where)
    name = table.text("gate_set", limit=1000)
    if not name.endswith(".toml"):
        return read_gate_set(name, where=table.where)
    return read_gate_set(folder / name)


def _assemble(table: Table, name: str, description: str, gate_set: GateSet, coupling: Coupling) -> Device:
    """Return the device, with the rest of its file read from `table`."""
    n = coupling.n_qubits
    out = table.table("out_of_service", ("qubits", "edges"))
    active = np.ones(n, dtype=bool)
    for qubit in out.sequence("qubits") if "qubits" in out else []:
        if not is_integer(qubit) or not 0 <= qubit < n:
            raise out.fault("qubits", f"qubits from 0 to {n - 1}", qubit)
        active[qubit] = False
    if not active.any():
        raise out.fail("every qubit is out of service", required="at least one in service")

    pairs = coupling.pairs
    keys = _keys_of(pairs, n)
    kept = np.asarray(active[pairs].all(axis=1))
    for k, edge in enumerate(out.sequence("edges") if "edges" in out else []):
        places = [_pair_place(out, f"edges[{k}]", order, keys, n) for order in (edge, _reverse(edge))]
        if max(places) < 0:
            raise out.fault(f"edges[{k}]", "an edge of the coupling", edge)
        np.put(kept, [place for place in places if place >= 0], False)

    calibration = table.table("calibration", (*_QUBIT_COLUMNS, "gates"))
    columns = {key: _column(calibration, key, n, *limits) for key, limits in _QUBIT_COLUMNS.items()}
    beyond = columns["t2_ns"] > 2 * columns["t1_ns"] * (1 + 1e-9)
    if beyond.any():
        q = int(np.argmax(beyond))
        raise calibration.fail(
            f"T2 of qubit {q} is too long",
            required="at most twice T1",
            found=f"T1 = {columns['t1_ns'][q]:g} ns, T2 = {columns['t2_ns'][q]:g} ns",
        )

    errors: dict[str, Vector] = {}
    durations: dict[str, Vector] = {}
    gates = calibration.table("gates", gate_set.gates)
    for gate_name, gate in gate_set.gates.items():
        entry = gates.table(gate_name, (*_GATE_COLUMNS, "pairs") if gate.gate.n_qubits == 2 else _GATE_COLUMNS)
        if gate.virtual and entry.data:
            raise entry.fail(f"'{gate_name}' is virtual", required="no calibration: it takes no time and has no error")
        values = {"error": gate.error, "duration_ns": gate.duration_ns}
        if gate.gate.n_qubits == 1:
            found = {key: _column(entry, key, n, *_GATE_COLUMNS[key], default=values[key]) for key in values}
        else:
            found = _pair_columns(entry, gate, pairs, n)
            found = {key: column[kept] for key, column in found.items()}
        errors[gate_name], durations[gate_name] = found["error"], found["duration_ns"]

    gate_pairs = {name: here[kept] for name, here in _gate_pairs(table, gate_set, pairs, n).items()}
    removed = np.unique(np.sort(pairs[~kept], axis=1), axis=0).astype(np.int32)
    return Device(
        name=name,
        gate_set=gate_set,
        n_qubits=n,
        pairs=pairs[kept],
        active=active,
        removed_edges=removed.reshape(-1, 2),
        gate_errors=errors,
        gate_durations=durations,
        description=description,
        gate_pairs=gate_pairs,
        **columns,
    )


def _gate_pairs(table: Table, gate_set: GateSet, pairs: Integers, n: int) -> dict[str, NDArray[np.bool_]]:
    """Return on which rows of `pairs` each two-qubit gate is that is not on all of them."""
    two = [gate.gate.name for gate in gate_set.two_qubit]
    gates = table.table("gates", two)
    keys = _keys_of(pairs, n)
    found: dict[str, NDArray[np.bool_]] = {}
    for name in gates.data:
        entry = gates.table(name, ("pairs",))
        entry.get("pairs")
        here = np.zeros(len(pairs), dtype=np.bool_)
        for k, pair in enumerate(entry.sequence("pairs")):
            orders = [pair, _reverse(pair)] if gate_set.gates[name].symmetric else [pair]
            places = [_pair_place(entry, f"pairs[{k}]", order, keys, n) for order in orders]
            if max(places) < 0:
                raise entry.fault(f"pairs[{k}]", f"a pair of the coupling that may carry '{name}'", pair)
            here[[place for place in places if place >= 0]] = True
        found[name] = here
    if two and all(name in found for name in two):
        served = np.any([found[name] for name in two], axis=0)
        ends = {(min(a, b), max(a, b)) for a, b in pairs[served].tolist()}
        for a, b in pairs.tolist():
            if (min(a, b), max(a, b)) not in ends:
                raise gates.fail(
                    f"qubits {a} and {b} are coupled and have no two-qubit gate",
                    required="a gate whose 'pairs' has them, or one without 'pairs', which is on all",
                )
    return found


def _keys_of(pairs: Integers, n: int) -> NDArray[np.int64]:
    return pairs[:, 0].astype(np.int64) * n + pairs[:, 1]


def _reverse(edge: Any) -> Any:
    return edge[::-1] if isinstance(edge, (list, tuple, np.ndarray)) else edge


def _pair_place(table: Table, name: str, pair: Any, keys: NDArray[np.int64], n: int) -> int:
    """Return the row of an ordered pair among the sorted keys, -1 if it is not there."""
    values = table.as_sequence(name, pair)
    if len(values) != 2 or not all(is_integer(q) and 0 <= q < n for q in values):
        raise table.fault(name, f"two qubits from 0 to {n - 1}", values)
    key = int(values[0]) * n + int(values[1])
    place = int(np.searchsorted(keys, key))
    return place if place < len(keys) and keys[place] == key else -1


def _column(table: Table, key: str, n: int, low: float, high: float, default: float | None = None) -> Vector:
    """Return one value a qubit, from one number or a list."""
    value = table.data.get(key, math.nan if default is None else default)
    if isinstance(value, (list, tuple, np.ndarray)):
        values = table.as_sequence(key, value)
        if len(values) != n:
            raise table.fault(key, f"one number, or {n} (one a qubit)", found=f"{len(values)} entries")
        return np.array([table.as_number(f"{key}[{k}]", v, low, high, True) for k, v in enumerate(values)])
    return np.full(n, table.as_number(key, value, low, high, True))


def _pair_columns(entry: Table, gate: NativeGate, pairs: Integers, n: int) -> dict[str, Vector]:
    """Return the errors and durations of a two-qubit gate for each row of `pairs`."""
    base = {"error": gate.error, "duration_ns": gate.duration_ns}
    found = {}
    for key, limits in _GATE_COLUMNS.items():
        if isinstance(entry.data.get(key), (list, tuple, np.ndarray)):
            raise entry.fault(key, "one number for all pairs; 'pairs' has those of single ones", found="a list")
        known = base[key] if key not in entry else entry.number(key, *limits, unknown=True)
        found[key] = np.full(len(pairs), math.nan if known is None else known)
    keys = _keys_of(pairs, n)
    own: dict[tuple[int, int], Table] = {}
    rows = entry.tables("pairs", ("qubits", *_GATE_COLUMNS))
    for row in rows:
        qubits = row.sequence("qubits")
        there = _pair_place(row, "qubits", qubits, keys, n)
        back = _pair_place(row, "qubits", qubits[::-1], keys, n)
        if there < 0 and (back < 0 or not gate.symmetric):
            raise row.fault("qubits", f"a pair of the coupling that may carry '{gate.gate.name}'", qubits)
        pair = (int(qubits[0]), int(qubits[1]))
        if pair in own or (gate.symmetric and pair[::-1] in own):
            raise row.fault("qubits", "each pair once", qubits)
        own[pair] = row
    for pair, row in own.items():
        if not any(key in row for key in _GATE_COLUMNS):
            raise row.fault("", "'error' or 'duration_ns'", dict(row.data))
        orders = [pair] if pair[::-1] in own else [pair, pair[::-1]]
        places = [_pair_place(row, "qubits", order, keys, n) for order in orders]
        for key, limits in _GATE_COLUMNS.items():
            if key in row:
                value = row.number(key, *limits, unknown=True)
                found[key][[place for place in places if place >= 0]] = value
    return found
