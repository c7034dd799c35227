"""Coupling graphs: which pairs of qubits may interact, as an edge list or from a generator.

Generators number qubits row by row, left to right. Honeycomb and heavy-hexagon lattices are those of the
literature (Chamberland, Zhu, Yoder, Hertzberg, Cross, Phys. Rev. X 10, 011022 (2020)).
"""

from __future__ import annotations

from collections.abc import Callable, Iterable
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from gatewright.devices.reading import Table, is_integer, one_line
from gatewright.errors import DeviceError, nearest_name

__all__ = [
    "MAX_PAIRS",
    "MAX_QUBITS",
    "SHAPES",
    "Coupling",
    "all_to_all",
    "grid",
    "hexagons",
    "line",
    "read_coupling",
    "ring",
]

Integers = NDArray[np.int32]

#: Most qubits of a device.
MAX_QUBITS = 10_000

#: Most ordered pairs of a device (all-to-all reaches it at 1000 qubits).
MAX_PAIRS = 1_000_000


@dataclass(frozen=True, eq=False, slots=True)
class Coupling:
    """Qubits 0 to ``n_qubits - 1`` and the pairs that may interact.

    Attributes
    ----------
    n_qubits : int
    edges : ndarray of int32, shape (M, 2)
        One row an edge, in lexicographic order. Not directed: the smaller qubit first.
    directed : bool
        If set, an edge (a, b) carries a two-qubit gate only with a as its first qubit. The two orders are then
        two edges.
    """

    n_qubits: int
    edges: Integers
    directed: bool = False

    @classmethod
    def from_edges(
        cls, edges: ArrayLike | Iterable[Any], *, n_qubits: int | None = None, directed: bool = False
    ) -> Coupling:
        """Check an edge list.

        Parameters
        ----------
        edges : array_like of int, shape (M, 2)
            Each pair once (in each order once, if `directed`).
        n_qubits : int, optional
            One more than the largest qubit of any edge by default.
        directed : bool

        Raises
        ------
        DeviceError
            Not pairs of distinct qubits in range, an edge given twice, too many.

        Examples
        --------
        >>> Coupling.from_edges([(1, 0), (1, 2)]).edges.tolist()
        [[0, 1], [1, 2]]
        """
        if n_qubits is not None:
            _check_size(n_qubits)
        pairs = _as_pairs(edges, MAX_QUBITS if n_qubits is None else n_qubits)
        if n_qubits is None:
            if not len(pairs):
                raise DeviceError("there are no edges and no number of qubits", required="at least one of them")
            n_qubits = int(pairs.max()) + 1
        if not directed:
            pairs = np.sort(pairs, axis=1)
        keys, counts = np.unique(pairs[:, 0] * n_qubits + pairs[:, 1], return_counts=True)
        if len(keys) < len(pairs):
            twice = divmod(int(keys[np.argmax(counts)]), n_qubits)
            raise DeviceError("an edge is given twice", required="each edge once", found=str(list(twice)))
        _check_pairs(len(keys) * (1 if directed else 2))
        found = np.stack(np.divmod(keys, n_qubits), axis=1).astype(np.int32)
        return cls(n_qubits, found, directed)

    @property
    def pairs(self) -> Integers:
        """Ordered pairs (first, second) that may carry a two-qubit gate, shape (E, 2), in lexicographic order."""
        if self.directed:
            return self.edges
        both = np.concatenate([self.edges, self.edges[:, ::-1]])
        return np.ascontiguousarray(both[np.lexsort((both[:, 1], both[:, 0]))])

    def without(self, sites: Iterable[int]) -> Coupling:
        """Return the coupling with some qubits left out, the rest numbered on in the same order.

        Raises
        ------
        DeviceError
            If a site is out of range, or none is left.

        Examples
        --------
        >>> line(4).without([0]).edges.tolist()
        [[0, 1], [1, 2]]
        """
        kept = np.ones(self.n_qubits, dtype=bool)
        for site in sites:
            if not is_integer(site) or not 0 <= site < self.n_qubits:
                raise DeviceError(
                    "a site to leave out is not there", required=f"0 to {self.n_qubits - 1}", found=one_line(site)
                )
            kept[site] = False
        if not kept.any():
            raise DeviceError("every site is left out", required="at least one qubit")
        number = (np.cumsum(kept) - 1).astype(np.int32)
        edges = self.edges[kept[self.edges].all(axis=1)]
        return Coupling(int(kept.sum()), number[edges], self.directed)


def _check_size(n_qubits: object) -> None:
    if not is_integer(n_qubits) or not 1 <= n_qubits <= MAX_QUBITS:  # type: ignore[operator]
        raise DeviceError("wrong number of qubits", required=f"1 to {MAX_QUBITS}", found=one_line(n_qubits))


def _check_pairs(number: int) -> None:
    if number > MAX_PAIRS:
        raise DeviceError("too many coupled pairs", required=f"at most {MAX_PAIRS} ordered pairs", found=str(number))


def _as_pairs(edges: ArrayLike | Iterable[Any], n_qubits: int) -> NDArray[np.int64]:
    """Return edges as an int64 array (M, 2) of distinct qubits in range."""
    if isinstance(edges, np.ndarray) and edges.ndim == 2 and edges.shape[1] == 2 and edges.dtype.kind in "iu":
        rows: Any = edges
        fits = (edges >= 0) & (edges < n_qubits)
        bad = ~fits.all(axis=1) | (edges[:, 0] == edges[:, 1])
    else:
        try:
            rows = list(edges)  # type: ignore[arg-type]
        except TypeError:
            raise DeviceError("the edges are not a list", required="pairs of qubits", found=one_line(edges)) from None
        bad = np.array([not _is_pair(row, n_qubits) for row in rows], dtype=bool)
    if bad.any():
        first = int(np.argmax(bad))
        raise DeviceError(
            f"edge {first} (counted from 0) is wrong",
            required=f"two distinct qubits from 0 to {n_qubits - 1}",
            found=one_line(rows[first].tolist() if isinstance(rows[first], np.ndarray) else rows[first]),
        )
    return np.array(rows, dtype=np.int64).reshape(-1, 2)


def _is_pair(row: object, n_qubits: int) -> bool:
    if not isinstance(row, (list, tuple, np.ndarray)) or len(row) != 2:
        return False
    return all(is_integer(q) and 0 <= q < n_qubits for q in row) and bool(row[0] != row[1])


def _between(name: str, value: object, low: int, high: int = MAX_QUBITS) -> None:
    if not is_integer(value) or not low <= value <= high:  # type: ignore[operator]
        raise DeviceError(f"'{name}' is wrong", required=f"an integer from {low} to {high}", found=one_line(value))


def _lattice(number: NDArray[np.integer], *steps: tuple[NDArray[np.integer], NDArray[np.integer]]) -> Coupling:
    """Return the coupling whose sites are the entries ≥ 0 of `number`, joined by the given arrays of ends."""
    ends = np.concatenate([np.stack([a.ravel(), b.ravel()], axis=1) for a, b in steps])
    ends = np.sort(ends[(ends >= 0).all(axis=1)], axis=1)
    ends = ends[np.lexsort((ends[:, 1], ends[:, 0]))]
    return Coupling(int(number.max()) + 1, ends.astype(np.int32))


def line(qubits: int) -> Coupling:
    """Return qubits in a row: an edge from each to the next.

    Examples
    --------
    >>> line(3).edges.tolist()
    [[0, 1], [1, 2]]
    """
    return grid(1, qubits)


def ring(qubits: int) -> Coupling:
    """Return at least three qubits in a closed ring.

    Examples
    --------
    >>> ring(4).edges.tolist()
    [[0, 1], [0, 3], [1, 2], [2, 3]]
    """
    _between("qubits", qubits, 3)
    number = np.arange(qubits)
    return _lattice(number, (number, np.roll(number, -1)))


def grid(rows: int, columns: int) -> Coupling:
    """Return a rectangular grid; the qubit in row r, column c is ``r*columns + c``.

    Examples
    --------
    >>> grid(2, 2).edges.tolist()
    [[0, 1], [0, 2], [1, 3], [2, 3]]
    """
    _between("rows", rows, 1)
    _between("columns", columns, 1)
    _check_size(rows * columns)
    number = np.arange(rows * columns).reshape(rows, columns)
    return _lattice(number, (number[:, :-1], number[:, 1:]), (number[:-1], number[1:]))


def hexagons(rows: int, columns: int, *, on_edges: bool = False) -> Coupling:
    """Return a honeycomb of `rows` × `columns` hexagonal cells.

    The honeycomb is drawn as a wall of bricks, each brick one cell. It has ``rows + 1`` horizontal lines of sites,
    each a path of ``2*columns + 2`` sites; line r and line r+1 are joined at every second site, those with
    position c ≡ r (mod 2). Two corner sites that would hang on one edge are left out: the last of line 0, and of
    the last line the last (odd `rows`) or the first (even `rows`). Sites are numbered line by line, left to right::

        0--1--2--3--4           hexagons(1, 2): 10 qubits
        |     |     |
        5--6--7--8--9

    Parameters
    ----------
    rows, columns : int
        Number of cells.
    on_edges : bool
        Put one more qubit in the middle of every edge (the heavy-hexagon lattice). These are numbered after the
        sites, in the lexicographic order of the edges that they stand on.

    Examples
    --------
    >>> hexagons(1, 1).n_qubits, hexagons(1, 1, on_edges=True).n_qubits, hexagons(2, 4).n_qubits
    (6, 12, 28)
    """
    _between("rows", rows, 1)
    _between("columns", columns, 1)
    width = 2 * columns + 2
    _check_size((rows + 1) * width - 2)
    there = np.ones((rows + 1, width), dtype=bool)
    there[0, -1] = False
    there[-1, -1 if rows % 2 else 0] = False
    number = np.where(there, np.cumsum(there).reshape(there.shape) - 1, -1)
    line_of, position = np.indices((rows, width))
    joined = (line_of - position) % 2 == 0
    plain = _lattice(number, (number[:, :-1], number[:, 1:]), (number[:-1][joined], number[1:][joined]))
    if not on_edges:
        return plain
    middle = plain.n_qubits + np.arange(len(plain.edges))
    total = plain.n_qubits + len(middle)
    _check_size(total)
    return _lattice(np.arange(total), (plain.edges[:, 0], middle), (plain.edges[:, 1], middle))


def all_to_all(qubits: int) -> Coupling:
    """Return every pair of qubits coupled.

    Examples
    --------
    >>> len(all_to_all(11).edges)
    55
    """
    _between("qubits", qubits, 1)
    _check_pairs(qubits * (qubits - 1))
    edges = np.stack(np.triu_indices(qubits, 1), axis=1)
    return Coupling(qubits, edges.astype(np.int32))


#: The generators by their names in a device file.
SHAPES: dict[str, Callable[..., Coupling]] = {
    "all-to-all": all_to_all,
    "grid": grid,
    "hexagons": hexagons,
    "line": line,
    "ring": ring,
}

_SIZES: dict[str, tuple[str, ...]] = {
    "all-to-all": ("qubits",),
    "grid": ("rows", "columns"),
    "hexagons": ("rows", "columns", "on_edges"),
    "line": ("qubits",),
    "ring": ("qubits",),
}


def read_coupling(table: Table) -> Coupling:
    """Read the ``[coupling]`` table of a device file.

    Keys are either ``shape`` with the sizes of that generator, or ``edges`` and optionally ``qubits``; and
    ``directed`` and ``without`` (sites left out) in both cases.

    Raises
    ------
    DeviceError
    """
    directed = table.boolean("directed", False)
    if ("shape" in table) == ("edges" in table):
        raise table.fail(
            "the coupling is not clear",
            required="either 'coupling.shape' or 'coupling.edges'",
            found="both" if "shape" in table else "neither",
        )
    if "shape" in table:
        shape = table.text("shape")
        if shape not in SHAPES:
            raise table.fail(f"unknown coupling shape '{shape}'", hint=nearest_name(shape, SHAPES))
        sizes = _SIZES[shape]
    else:
        shape, sizes = "", ("edges", "qubits")
    Table(
        table.data,
        error=table.error,
        where=table.where,
        key=table.key,
        known=(*sizes, "shape", "directed", "without"),
    )
    values: dict[str, Any] = {}
    for name in sizes:
        if name == "on_edges":
            values[name] = table.boolean(name, False)
        elif name == "edges":
            values[name] = table.sequence(name)
        elif shape or name in table:
            values[name] = table.integer(name, 1, MAX_QUBITS)
    try:
        if shape:
            coupling = SHAPES[shape](**values)
        else:
            coupling = Coupling.from_edges(values["edges"], n_qubits=values.get("qubits"), directed=directed)
        if "without" in table:
            coupling = coupling.without(table.sequence("without"))
    except DeviceError as problem:
        raise problem.located(where=table.where) from None
    return Coupling(coupling.n_qubits, coupling.edges, directed)
