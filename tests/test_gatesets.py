"""Native gate sets: the shipped ones against the literature's generators, and files that are wrong."""

from __future__ import annotations

import copy
import math
import pickle
from collections.abc import Callable
from typing import Any

import numpy as np
import openqasm3
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from openqasm3 import ast
from scipy.linalg import expm, norm, polar
from scipy.spatial.transform import Rotation

from gatewright.devices.gateset import (
    STANDARD_LIBRARY,
    GateSet,
    check_definitions,
    read_gate_set,
    shipped_gate_sets,
)
from gatewright.devices.reach import Reach, one_qubit_reach
from gatewright.devices.resources import gate_set_folder, shipped_gate_set_files
from gatewright.errors import GateSetError, GatewrightError
from gatewright.gates import GATES
from gatewright.linalg import distance, haar_unitary, unitarity_defect
from gatewright.qasm.library import BUILT_IN, LIBRARIES

X, Y, Z, ONE = np.array([[0, 1], [1, 0]]), np.array([[0, -1j], [1j, 0]]), np.diag([1, -1]), np.eye(2)

RZ: dict[str, Any] = {
    "qubits": 1,
    "parameters": [{"name": "theta", "from": "-pi", "to": "pi"}],
    "matrix": [["exp(-i*theta/2)", 0], [0, "exp(i*theta/2)"]],
}
SX: dict[str, Any] = {"qubits": 1, "matrix": [["(1+i)/2", "(1-i)/2"], ["(1-i)/2", "(1+i)/2"]]}
CZ: dict[str, Any] = {"qubits": 2, "matrix": [[1, 0, 0, 0], [0, 1, 0, 0], [0, 0, 1, 0], [0, 0, 0, -1]]}


def made_of(**gates: Any) -> dict[str, Any]:
    return {"name": "test", "gates": copy.deepcopy({"rz": RZ, "sx": SX, **gates})}


@pytest.fixture(params=shipped_gate_sets())
def shipped(request: pytest.FixtureRequest) -> GateSet:
    return read_gate_set(request.param)


# What each shipped matrix must be, as an exponential of Pauli operators, computed by SciPy. Sources: OpenQASM 3's
# stdgates.inc for rz, rx, ry, sx, x, cx, cz; Nielsen & Chuang section 4.2 for rotations; iSWAP = exp(i π/4 (XX + YY)),
# Schuch & Siewert, PRA 67, 032301 (2003); exp(-iθ/2 XX), Mølmer & Sørensen, PRL 82, 1835 (1999); the cross-resonance
# ZX90 = exp(-i π/4 ZX), Chow et al., PRL 107, 080502 (2011).
LITERATURE: dict[str, Callable[..., Any]] = {
    "rz": lambda t: -0.5j * t * Z,
    "rx": lambda t: -0.5j * t * X,
    "ry": lambda t: -0.5j * t * Y,
    "r": lambda t, phi: -0.5j * t * (np.cos(phi) * X + np.sin(phi) * Y),
    "sx": lambda: -0.25j * np.pi * X,
    "x": lambda: -0.5j * np.pi * X,
    "cz": lambda: 0.25j * np.pi * np.kron(ONE - Z, ONE - Z),
    "cx": lambda: 0.25j * np.pi * np.kron(ONE - Z, ONE - X),
    "iswap": lambda: 0.25j * np.pi * (np.kron(X, X) + np.kron(Y, Y)),
    "rxx": lambda t: -0.5j * t * np.kron(X, X),
    "zx90": lambda: -0.25j * np.pi * np.kron(Z, X),
    "h": lambda: -0.5j * np.pi * (X + Z) / np.sqrt(2),
    "rn": lambda t: -0.5j * t * (np.sin(np.pi / 3) * X + np.cos(np.pi / 3) * Z),
    "cp": lambda t: 0.25j * t * np.kron(ONE - Z, ONE - Z),
    "csx": lambda: 0.125j * np.pi * np.kron(ONE - Z, ONE - X),
    "half_iswap": lambda: 0.125j * np.pi * (np.kron(X, X) + np.kron(Y, Y)),
    # SWAP is -1 on the singlet, its root i: Loss & DiVincenzo, PRA 57, 120 (1998).
    "half_swap": lambda: -0.125j * np.pi * (np.kron(X, X) + np.kron(Y, Y) + np.kron(Z, Z)),
    # Zhang, Vala, Sastry & Whaley, PRL 93, 020502 (2004).
    "b": lambda: 0.25j * np.pi * np.kron(X, X) + 0.125j * np.pi * np.kron(Y, Y),
    # fSim(80 degrees, 30 degrees): Foxen et al., PRL 125, 120504 (2020).
    "fsim": lambda: -2j / 9 * np.pi * (np.kron(X, X) + np.kron(Y, Y)) - 1j / 24 * np.pi * np.kron(ONE - Z, ONE - Z),
}


def test_shipped_matrices_are_those_of_the_literature(shipped: GateSet) -> None:
    for name, native in shipped.gates.items():
        points = native.samples()[::37]
        matrices = native.gate.matrix(points)
        if name == "u":
            # Nielsen & Chuang, theorem 4.1: a general unitary as z, y, z rotations.
            expected = [expm(-0.5j * p * Z) @ expm(-0.5j * t * Y) @ expm(-0.5j * q * Z) for t, p, q in points]
        else:
            expected = [expm(LITERATURE[name](*point)) for point in points]
        assert np.max(distance(matrices, np.array(expected))) < 1e-12


def test_shipped_sets_are_unitary_sufficient_and_complete(shipped: GateSet) -> None:
    assert shipped.reach == Reach("all", adjustable=True)
    assert shipped.can_entangle
    assert "invented" in shipped.description
    assert shipped.one_qubit and shipped.two_qubit
    assert list(shipped.natives) == [gate.gate.name for gate in (*shipped.one_qubit, *shipped.two_qubit)]
    for name, native in shipped.gates.items():
        points = native.samples()
        assert np.max(unitarity_defect(native.gate.matrix(points))) < 1e-13
        for k, (low, high) in enumerate(native.ranges):
            assert points[:, k].min() == low and points[:, k].max() == high
        assert native.error is not None and native.duration_ns is not None
        assert (native.duration_ns == 0) == native.virtual
        assert native.definition or name in STANDARD_LIBRARY
        pair = native.gate.n_qubits == 2
        either_way = {"cz", "iswap", "rxx", "cp", "half_iswap", "half_swap", "b", "fsim"}
        assert native.symmetric == (name in either_way) or not pair


def test_names_are_those_of_the_files() -> None:
    assert len(shipped_gate_sets()) >= 15
    for name in shipped_gate_sets():
        assert read_gate_set(name).name == name
        path = gate_set_folder() / f"{name}.toml"
        assert list(read_gate_set(str(path)).gates) == list(read_gate_set(name).gates)
    assert list(shipped_gate_set_files()) == shipped_gate_sets() == sorted(shipped_gate_sets())


# An evaluator of gate definitions that shares nothing with ours: the reference parser's syntax tree, with the matrices
# of OpenQASM 3's stdgates.inc written out once more.
STANDARD: dict[str, Callable[..., Any]] = {
    "U": lambda t, p, q: expm(-0.5j * p * Z) @ expm(-0.5j * t * Y) @ expm(-0.5j * q * Z),
    "h": lambda: (X + Z) / np.sqrt(2),
    "s": lambda: np.diag([1, 1j]),
    "rz": lambda t: expm(-0.5j * t * Z),
    "cx": lambda: np.kron(np.diag([1, 0]), ONE) + np.kron(np.diag([0, 1]), X),
}
STANDARD["u3"] = STANDARD["U"]


def value_of(node: ast.Expression, names: dict[str, float]) -> float:
    if isinstance(node, ast.Identifier):
        return {**names, "pi": math.pi}[node.name]
    if isinstance(node, (ast.IntegerLiteral, ast.FloatLiteral)):
        return node.value
    if isinstance(node, ast.UnaryExpression):
        assert node.op.name == "-"
        return -value_of(node.expression, names)
    assert isinstance(node, ast.BinaryExpression)
    left, right = value_of(node.lhs, names), value_of(node.rhs, names)
    quotient = left / right if right else math.nan
    return {"+": left + right, "-": left - right, "*": left * right, "/": quotient}[node.op.name]


def defined_matrix(text: str, point: list[float]) -> Any:
    (definition,) = openqasm3.parse(f"OPENQASM 3.0;\n{text}").statements
    assert isinstance(definition, ast.QuantumGateDefinition)
    names = {argument.name: value for argument, value in zip(definition.arguments, point, strict=True)}
    wires = [qubit.name for qubit in definition.qubits]
    total = np.eye(2 ** len(wires))
    for call in definition.body:
        matrix = STANDARD[call.name.name](*(value_of(argument, names) for argument in call.arguments))
        places = [wires.index(qubit.name) for qubit in call.qubits]
        if len(places) < len(wires):
            matrix = np.kron(matrix, ONE) if places == [0] else np.kron(ONE, matrix)
        elif places == [1, 0]:
            matrix = matrix.reshape(2, 2, 2, 2).transpose(1, 0, 3, 2).reshape(4, 4)
        total = matrix @ total
    return total


def test_definitions_give_the_matrices_by_the_reference_parser(shipped: GateSet) -> None:
    for native in shipped.gates.values():
        for point in native.samples()[::53] if native.definition else ():
            assert distance(native.gate.matrix(point), defined_matrix(native.definition, point.tolist())) < 1e-12


def test_the_standard_library_is_that_of_the_reader() -> None:
    assert STANDARD_LIBRARY == LIBRARIES[3] | BUILT_IN[3]
    assert STANDARD_LIBRARY <= set(GATES)


def test_definitions_give_the_matrices_by_our_reader(shipped: GateSet) -> None:
    check_definitions(shipped)


def test_a_wrong_definition_is_found() -> None:
    gate = {**RZ, "definition": "gate turn(theta) q { rz(-theta) q; }"}
    with pytest.raises(GateSetError, match="'gates.turn.definition' is not the gate of the matrix; .* at theta = "):
        read_gate_set(made_of(turn=gate))
    gate["definition"] = "gate turn(theta) q { rz(theta) q; }"
    assert read_gate_set(made_of(turn=gate)).gates["turn"].definition == gate["definition"]
    gate["definition"] = "gate turn(theta) q { nosuch(theta) q; }"
    with pytest.raises(GateSetError, match="'gates.turn.definition' cannot be read: .*nosuch"):
        read_gate_set(made_of(turn=gate))
    for body in (
        "U(theta, 0, 0) q, q;",
        'include "/etc/passwd";',
        "defcal x q",
        "h q; h",
        "measure q;",
        "turn(theta) q;",
    ):
        gate["definition"] = f"gate turn(theta) q {{ {body} }}"
        with pytest.raises(GateSetError, match="'gates.turn.definition' cannot be read"):
            read_gate_set(made_of(turn=gate))


@given(st.sampled_from(["rad", "deg", "turn"]), st.floats(0.01, 0.5))
@settings(max_examples=20)
def test_ranges_are_converted_from_their_unit(unit: str, size: float) -> None:
    radians = {"rad": 1.0, "deg": np.pi / 180, "turn": 2 * np.pi}[unit]
    gate = {**RZ, "parameters": [{"name": "theta", "from": -size, "to": "1/2", "unit": unit}]}
    ((low, high),) = read_gate_set(made_of(rz=gate)).gates["rz"].ranges
    assert low == pytest.approx(-size * radians) and high == pytest.approx(0.5 * radians)


def test_matrices_are_batched_and_arrays_are_taken() -> None:
    native = read_gate_set("ion-xx").gates["r"].gate
    points = np.random.default_rng(5).uniform(-3, 3, (4, 5, 2))
    stack = native.matrix(points)
    assert stack.shape == (4, 5, 2, 2)
    assert np.abs(stack - GATES["r"].matrix(points)).max() < 1e-15
    assert read_gate_set("cz-virtual-z").gates["cz"].gate.matrix(np.zeros((3, 0))).shape == (3, 4, 4)

    entangler = haar_unitary(4, rng=3)
    found = read_gate_set(made_of(mine={"qubits": 2, "matrix": entangler}))
    assert np.abs(found.gates["mine"].gate.matrix() - entangler).max() < 1e-14
    assert found.gates["mine"].definition == "" and found.can_entangle


def test_gate_sets_are_pickled_and_gates_compare_by_value() -> None:
    first, second = read_gate_set("cross-resonance"), read_gate_set("cross-resonance")
    copied = pickle.loads(pickle.dumps(first))
    for name, native in first.gates.items():
        assert native.gate == second.gates[name].gate == copied.gates[name].gate
        assert hash(native.gate) == hash(copied.gates[name].gate)
    assert first.gates["sx"].gate != first.gates["x"].gate


def test_symmetric_gates_are_found_from_the_matrix() -> None:
    minus = np.diag([1.0, 1, -1, 1])  # not symmetric; and antisymmetric up to a phase below
    exchange = np.array([[0, 0, 0, 1], [0, 1, 0, 0], [0, 0, -1, 0], [-1, 0, 0, 0]])
    found = read_gate_set(
        made_of(first={"qubits": 2, "matrix": minus}, second={"qubits": 2, "matrix": exchange}, cz=CZ)
    )
    assert [found.gates[name].symmetric for name in ("first", "second", "cz")] == [False, False, True]


@pytest.mark.parametrize(
    ("matrix", "entangles"),
    [
        (np.kron(haar_unitary(2, rng=1), haar_unitary(2, rng=2)), False),
        (np.kron(haar_unitary(2, rng=1), haar_unitary(2, rng=2)) @ GATES["swap"].matrix(), False),
        (GATES["iswap"].matrix(), True),
        (expm(0.25j * np.pi * np.kron(Z, X)), True),
        (expm(1e-3j * np.kron(Z, X)), True),
    ],
)
def test_what_entangles(matrix: Any, entangles: bool) -> None:
    # Brylinski & Brylinski (2002): everything but products and products times SWAP.
    assert read_gate_set(made_of(mine={"qubits": 2, "matrix": matrix})).can_entangle is entangles


# --- measured gates


def noisy(u: Any, size: float, seed: int) -> Any:
    rng = np.random.default_rng(seed)
    return u + size * (rng.normal(size=u.shape) + 1j * rng.normal(size=u.shape))


@given(st.floats(-12, -1.6), st.integers(0, 2**32 - 1), st.sampled_from([2, 4]))
@settings(max_examples=30, deadline=None)
def test_measured_matrices_become_the_nearest_unitary(power: float, seed: int, size: int) -> None:
    # Fan and Hoffman, Proc. AMS 6, 111 (1955): the polar factor, here by SciPy; its distance by SciPy's norm.
    matrix = noisy(haar_unitary(size, rng=seed), 10**power, seed)
    entry = {"qubits": size.bit_length() - 1, "matrix": matrix, "measured": True}
    native = read_gate_set(made_of(mine=entry)).gates["mine"]
    factor = polar(matrix)[0]
    assert np.abs(native.gate.matrix() - factor).max() < 1e-13
    assert native.measured and native.moved == pytest.approx(norm(matrix - factor, 2), abs=1e-14)
    assert read_gate_set(made_of(mine=entry)).measured == {"mine": native.moved}
    if power > -11:
        with pytest.raises(GateSetError, match="is not unitary"):
            read_gate_set(made_of(mine={**entry, "measured": False}))


def test_what_cannot_be_a_measured_gate() -> None:
    def refused(**entry: Any) -> str:
        with pytest.raises(GateSetError) as caught:
            read_gate_set(made_of(mine={"qubits": 1, "measured": True, **entry}))
        return str(caught.value)

    far = "the measured matrix of 'gates.mine' is too far from any unitary; required: at most 0.3 in operator norm"
    assert far in refused(matrix=[[1, 0], [0, 0.6]])
    assert "singular" in refused(matrix=[[1, 0], [0, 0]])
    assert "required: a matrix without parameters" in refused(parameters=[RANGED], matrix=RZ["matrix"])
    assert "required: true or false" in refused(matrix=[[1, 0], [0, 1]], measured="nearly")
    with pytest.raises(GateSetError, match="say measured = true"):
        read_gate_set(made_of(mine={"qubits": 1, "matrix": [[1, 0.01], [0, 1]]}))
    # A measured CZ is not the CZ of that name.
    with pytest.raises(GateSetError, match="'cz' is the name of another gate"):
        read_gate_set(made_of(cz={"qubits": 2, "measured": True, "matrix": noisy(np.diag([1, 1, 1, -1]), 0.01, 1)}))


def test_a_set_without_a_two_qubit_gate_is_allowed() -> None:
    alone = read_gate_set(made_of())
    assert alone.two_qubit == () and not alone.can_entangle


# --- what the one-qubit gates reach


def rotation_matrices(rotations: Rotation) -> list[Any]:
    """SU(2) matrices of SciPy's rotations, one stack of one matrix each."""
    return [np.array([w * ONE - 1j * (x * X + y * Y + z * Z)]) for x, y, z, w in np.atleast_2d(rotations.as_quat())]


def family(axis: Any, low: float = -1.0, high: float = 1.0) -> Any:
    generator = np.tensordot(np.asarray(axis) / np.linalg.norm(axis), [X, Y, Z], 1)
    angles = np.linspace(low, high, 9)[:, None, None]
    return np.cos(angles / 2) * ONE - 1j * np.sin(angles / 2) * generator


@pytest.mark.parametrize("name", ["I", "O", "T", "C5", "D7", "C1", "D2", "C48", "D30"])
def test_finite_groups_have_the_order_that_scipy_gives(name: str) -> None:
    rotations = Rotation.create_group(name)
    reach = one_qubit_reach(rotation_matrices(rotations))
    assert (reach.kind, reach.order) == ("finite", len(rotations))
    assert "a continuously adjustable one-qubit gate" in reach.missing


def test_generators_give_the_whole_group() -> None:
    def fixed(*names: str) -> Reach:
        return one_qubit_reach([GATES[name].matrix()[None] for name in names])

    # The one-qubit Clifford group modulo phase has 24 elements (Calderbank, Rains, Shor, Sloane, 1998).
    assert fixed("h", "s").order == 24
    assert fixed("x", "y").order == 4
    assert fixed("t").order == 8
    # Clifford + T is universal, but only densely (Boykin et al., 1999).
    assert fixed("h", "t").kind == "dense"
    # Icosahedral from a fifth of a turn and a half turn, a = b = 1 of the (2, 3, 5) triangle group.
    golden = (1 + np.sqrt(5)) / 2
    spins = Rotation.from_rotvec([[0, 0, np.pi], np.array([0, 1, golden]) * 2 * np.pi / 5 / np.hypot(1, golden)])
    assert one_qubit_reach(rotation_matrices(spins)).order == 60


CASES: list[tuple[list[Any], str]] = [
    ([family([0, 0, 1])], "axis"),
    ([family([0, 0, 1], 0.2, 0.3)], "axis"),
    ([family([0, 0, 1]), GATES["t"].matrix()[None]], "axis"),
    ([family([0, 0, 1]), GATES["x"].matrix()[None]], "flips"),
    ([family([0, 0, 1]), GATES["x"].matrix()[None], GATES["y"].matrix()[None]], "flips"),
    ([family([0, 0, 1]), GATES["sx"].matrix()[None]], "all"),
    ([family([0, 0, 1]), GATES["h"].matrix()[None]], "all"),
    ([family([0, 0, 1]), family([1, 0, 0], 0, 1e-3)], "all"),
    ([family([0, 0, 1]), family([0, 1e-3, 1])], "all"),
    ([family([0, 0, 1]) @ GATES["x"].matrix()], "flips"),
    ([family([0, 0, 1]) @ GATES["h"].matrix()], "all"),
    ([np.exp(1j * np.linspace(0, 1, 9))[:, None, None] * GATES["h"].matrix(), GATES["t"].matrix()[None]], "dense"),
    ([GATES["rz"].matrix([[1.0]])], "axis"),
    ([GATES["rz"].matrix([[1.0]]), GATES["x"].matrix()[None]], "flips"),
    ([GATES["x"].matrix()[None], expm(-0.5j * np.pi * (np.cos(1) * X + np.sin(1) * Y))[None]], "flips"),
    ([GATES["rz"].matrix([[1.0]]), GATES["rx"].matrix([[1.0]])], "dense"),
    ([], "none"),
]


@pytest.mark.parametrize("case", range(len(CASES)))
@pytest.mark.parametrize("seed", [None, 1, 2])
def test_reach_does_not_depend_on_the_frame(case: int, seed: int | None) -> None:
    families, kind = CASES[case]
    frame = np.eye(2) if seed is None else haar_unitary(2, rng=seed)
    reach = one_qubit_reach([frame @ stack @ frame.conj().T for stack in families])
    assert reach.kind == kind
    assert (reach.axis is not None) == (kind in ("axis", "flips"))
    assert bool(reach.missing) == (kind != "all")
    assert reach.found
    if seed is None and reach.axis:
        assert reach.axis == (0.0, 0.0, 1.0)


@pytest.mark.parametrize(
    ("gates", "message"),
    [
        ({"rz": RZ}, "found: only rotations about the z axis; missing: a one-qubit gate that tilts the z axis"),
        (
            {"rz": RZ, "x": {"qubits": 1, "matrix": [[0, 1], [1, 0]]}},
            "found: only rotations about the z axis and half turns that reverse it; missing: a one-qubit gate that",
        ),
        ({"sx": SX}, "found: a finite group of 4 elements; missing: a continuously adjustable one-qubit gate"),
        ({"cz": CZ}, "found: no one-qubit gate; missing: a continuously adjustable one-qubit gate"),
        (
            {
                "h": {"qubits": 1, "matrix": [["1/sqrt(2)", "1/sqrt(2)"], ["1/sqrt(2)", "-1/sqrt(2)"]]},
                "t": {"qubits": 1, "matrix": [[1, 0], [0, "exp(i*pi/4)"]]},
            },
            "found: a dense but countable set, from fixed gates only; missing: a continuously adjustable",
        ),
    ],
)
def test_insufficient_sets_are_refused_with_what_is_missing(gates: dict[str, Any], message: str) -> None:
    with pytest.raises(GateSetError) as caught:
        read_gate_set({"name": "test", "gates": gates})
    assert "the one-qubit gates do not reach all of SU(2)" in str(caught.value)
    assert message in str(caught.value)


# --- files that are wrong


def gate(**changes: Any) -> dict[str, Any]:
    return made_of(g={"qubits": 1, "matrix": [[1, 0], [0, "i"]], **changes})


RANGED = {"name": "t", "from": 0, "to": 1}

WRONG: list[tuple[Any, str]] = [
    ({"name": "test"}, "'gates' is missing"),
    ({**made_of(), "gate": {}}, "unknown key 'gate'; did you mean 'gates'?"),
    ({**made_of(), "name": ""}, "'name' is wrong; required: 1 to 80 printable characters"),
    ({"name": "test", "gates": {}}, "required: 1 to 32 gates; found: 0 gates"),
    ({"name": "test", "gates": []}, "'gates' is wrong; required: a table"),
    (gate(qubit=1), "unknown key 'qubit' in 'gates.g'; did you mean 'qubits'?"),
    (gate(qubits=3), "'gates.g.qubits' is wrong; required: an integer from 1 to 2; found: 3"),
    (gate(qubits=True), "found: True"),
    (gate(qubits=2), "'gates.g.matrix' is wrong; required: 4 rows; found: 2 rows"),
    (gate(matrix=[[1, 0], [0]]), "'gates.g.matrix[1]' is wrong; required: 2 entries; found: 1 entries"),
    (gate(matrix=[[1, 0], [0, None]]), "'gates.g.matrix[1][1]' is wrong; required: a number or an expression"),
    (gate(matrix=[[1, 0], [0, math.nan]]), "'gates.g.matrix[1][1]' is wrong; required: a finite number; found: nan"),
    (gate(matrix=[[1, 0], [0, 10**400]]), "required: a number of ordinary size"),
    (gate(matrix=[[1, 0], [0, 1e300]]), "the matrix of 'gates.g' is not unitary"),
    (gate(matrix=[[1, 0], [0, 0.9999999]]), "not unitary; required: ‖U†U − 1‖ ≤ 1e-12; found: 2e-07; write roots"),
    (gate(matrix=[[1, 0], [0, "2"]]), "not unitary; required: ‖U†U − 1‖ ≤ 1e-12; found: 3"),
    (gate(matrix=[[1, 0], [0, "exp(t)"]]), "unknown name 't'"),
    (gate(matrix=[[1, 0], [0, "__import__('os').system('true')"]]), "'gates.g.matrix[1][1]' cannot be read"),
    (gate(matrix=[[1, 0], [0, "9**9**9"]]), "'gates.g.matrix[1][1]' cannot be read: '9**9**9' has no finite value"),
    (gate(matrix=[[1, 0], [0, "(" * 10_000 + "1" + ")" * 10_000]]), "required: at most 1000 characters"),
    (gate(matrix=[[1, 0], [0, "(" * 400 + "1" + ")" * 400]]), "nested too deeply"),
    (gate(virtual=True, duration_ns=10), "required: a diagonal one-qubit gate without duration and error"),
    (gate(virtual=True, matrix=[[0, 1], [1, 0]]), "required: a diagonal one-qubit gate"),
    (gate(virtual="yes"), "required: true or false"),
    (gate(error=1.5), "'gates.g.error' is wrong; required: a number from 0 to 1; found: 1.5"),
    (gate(duration_ns=-1), "'gates.g.duration_ns' is wrong; required: a number of at least 0; found: -1"),
    (gate(duration_ns=math.inf), "found: inf"),
    (gate(parameters=[RANGED]), "'gates.g.definition' is missing"),
    (gate(parameters={"t": 1}), "'gates.g.parameters' is wrong; required: a list"),
    (gate(parameters=[{**RANGED, "to": 0}]), "required: from < to"),
    (gate(parameters=[{**RANGED, "to": "1/0"}]), "'gates.g.parameters[0].to' cannot be read"),
    (gate(parameters=[{**RANGED, "to": "i"}]), "is not real"),
    (gate(parameters=[{**RANGED, "to": 1e9}]), "'gates.g.parameters[0].to' is wrong"),
    (
        gate(parameters=[{**RANGED, "unit": "degree"}]),
        "unknown unit 'degree' in 'gates.g.parameters[0]'; did you mean 'deg'",
    ),
    (gate(parameters=[{**RANGED, "name": "pi"}]), "'gates.g.parameters[0].name' is wrong"),
    (gate(parameters=[RANGED, RANGED]), "'gates.g.parameters[1].name' is wrong"),
    (gate(parameters=[{**RANGED, "name": f"t{k}"} for k in range(7)]), "required: at most 6; found: 7 parameters"),
    (gate(parameters=[RANGED], matrix=[[1, 0], [0, "1 + t*0.001"]]), "is not unitary at t = 1;"),
    (gate(parameters=[RANGED], matrix=[[1, 0], [0, "exp(i*t)/t"]]), "has no finite value"),
    (gate(definition=3), "'gates.g.definition' is wrong; required: text"),
    (gate(definition="gate f q { s q; }"), "required: one definition, 'gate g"),
    (gate(definition="gate g q { s q; } gate f q { s q; }"), "required: one definition, 'gate g"),
    (made_of(measure={"qubits": 1, "matrix": [[1, 0], [0, 1]]}), "'measure' cannot name a gate"),
    (made_of(**{"9x": {}}), "'9x' cannot name a gate"),
    (made_of(**{"a\nb": {}}), "cannot name a gate"),
    (
        made_of(sx={**SX, "definition": "gate sx q { rx(pi/2) q; }"}),
        "required: none, as OpenQASM's standard library has",
    ),
    (made_of(cz={**CZ, "matrix": np.diag([1, 1, -1, 1])}), "'cz' is the name of another gate; required: the matrix"),
    (made_of(cx={"qubits": 1, "matrix": [[1, 0], [0, 1]]}), "'cx' is the name of another gate; required: qubits: 2"),
]


@pytest.mark.parametrize("case", range(len(WRONG)))
def test_wrong_files_are_refused_on_one_line(case: int) -> None:
    data, message = WRONG[case]
    with pytest.raises(GateSetError) as caught:
        read_gate_set(data, where="mine.toml")
    assert message in str(caught.value)
    assert str(caught.value).startswith("mine.toml: ") and "\n" not in str(caught.value)


def test_unknown_names_get_the_nearest_one() -> None:
    with pytest.raises(GateSetError, match="unknown gate set 'cz-virtualz'; did you mean 'cz-virtual-z'\\? known: "):
        read_gate_set("cz-virtualz")


json_like = st.recursive(
    st.none()
    | st.booleans()
    | st.integers()
    | st.floats()
    | st.text(max_size=8)
    | st.sampled_from(["theta", "1/0", "i"]),
    lambda inner: st.lists(inner, max_size=4) | st.dictionaries(st.text(max_size=6), inner, max_size=4),
    max_leaves=12,
)


def places(data: Any, path: tuple[Any, ...] = ()) -> list[tuple[Any, ...]]:
    """Every place in a nested structure."""
    found = [path] if path else []
    if isinstance(data, (dict, list)):
        for key in data if isinstance(data, dict) else range(len(data)):
            found += places(data[key], (*path, key))
    return found


def replaced(data: Any, path: tuple[Any, ...], value: Any) -> Any:
    changed = copy.deepcopy(data)
    inner = changed
    for key in path[:-1]:
        inner = inner[key]
    inner[path[-1]] = value
    return changed


@given(json_like)
@settings(max_examples=100, deadline=None)
def test_no_content_raises_anything_else(data: Any) -> None:
    if isinstance(data, (str, bytes)):
        return
    with pytest.raises(GatewrightError):
        read_gate_set({"name": "x", "gates": data})


@given(st.data())
@settings(max_examples=200, deadline=None)
def test_no_change_to_a_good_file_raises_anything_else(data: st.DataObject) -> None:
    definition = "gate turn(theta) q { rz(theta) q; }"
    good = made_of(cz={**CZ, "error": 0.01, "duration_ns": 40}, turn={**RZ, "definition": definition, "virtual": True})
    changed = replaced(good, data.draw(st.sampled_from(places(good))), data.draw(json_like))
    try:
        found = read_gate_set(changed)
    except GatewrightError as problem:
        assert "\n" not in str(problem)
    else:
        assert found.reach.kind == "all"
