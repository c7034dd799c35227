"""Parameters that are not known yet: their arithmetic, compiling with them, binding, proofs and what breaks these."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
import sympy
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

import gatewright as gw
from gatewright.circuit import Builder, Circuit
from gatewright.errors import CircuitError, ExpressionError, ProofError, UnsupportedError
from gatewright.gates import GATES, Gate
from gatewright.parameters import Affine, close, product, read_affine, within
from gatewright.pipeline import proven
from gatewright.proof import Proof, check_legal, check_proof, dense_distance
from gatewright.proof.file import decode_proof
from gatewright.proof.fingerprints import fingerprint
from gatewright.proof.parametrised import HARMONICS
from gatewright.qasm import read, write
from gatewright.rotations import PARAMETRISED

GATE_SETS = ["cz-virtual-z", "cnot-textbook", "cross-resonance", "cz-rz-rx", "ion-xx", "cz-general-pulse"]
ATOMS = ["alpha", "beta", "sin(alpha)", "alpha*beta", "exp(-beta)"]
NUMBERS = st.one_of(st.sampled_from([1.0, -1.0, 0.5, 2.0, -3.0, math.pi / 4, math.pi, 1 / 3, 0.1]), st.floats(-20, 20))
AFFINE = st.builds(
    lambda constant, factors: sum((Affine.of(a) * f for a, f in factors.items()), Affine(0.0)) + constant,
    NUMBERS,
    st.dictionaries(st.sampled_from(ATOMS), NUMBERS, max_size=3),
)
VALUES = st.fixed_dictionaries({"alpha": st.floats(-9, 9), "beta": st.floats(-9, 9)})


# ---------------------------------------------------------------- arithmetic and text


@given(AFFINE, AFFINE, NUMBERS, VALUES)
def test_arithmetic(a: Affine, b: Affine, factor: float, values: dict[str, float]) -> None:
    x, y = a.evaluate(values), b.evaluate(values)
    size = 1e-12 * (1 + abs(x) + abs(y)) * (1 + abs(factor)) * 1e3
    assert (a + b).evaluate(values) == pytest.approx(x + y, abs=size)
    assert (a - b).evaluate(values) == pytest.approx(x - y, abs=size)
    assert (a * factor + factor).evaluate(values) == pytest.approx(x * factor + factor, abs=size)
    assert (-a).evaluate(values) == pytest.approx(-x)


@given(AFFINE)
def test_text_reads_back_to_the_last_bit(a: Affine) -> None:
    back = read_affine(str(a), ["alpha", "beta"])
    assert (back if isinstance(back, Affine) else Affine(back)) == a
    whole = read_affine(a.text({"alpha", "beta"}), ["alpha", "beta"])
    assert (whole if isinstance(whole, Affine) else Affine(whole)) == a


@given(AFFINE, VALUES)
def test_sympy_both_ways(a: Affine, values: dict[str, float]) -> None:
    # SymPy is the oracle: it reads the expression on its own, and evaluates it.
    expression = a.to_sympy()
    named = {symbol: values[str(symbol)] for symbol in expression.free_symbols}
    wanted = float(expression.evalf(30, subs=named))
    assert a.evaluate(values) == pytest.approx(wanted, rel=1e-9, abs=1e-9 * (1 + sum(abs(f) for _, f in a.terms)) * 1e4)
    back = Affine.from_sympy(expression)
    there = back.evaluate(values) if isinstance(back, Affine) else back
    assert there == pytest.approx(wanted, rel=1e-9, abs=1e-9 * (1 + sum(abs(f) for _, f in a.terms)) * 1e4)


@pytest.mark.parametrize(
    ("text", "shown"),
    [
        ("2*theta + pi/4", "2*theta + pi/4"),
        ("(theta + pi)/2 - theta", "-theta/2 + pi/2"),
        ("theta*phi", "phi*theta"),
        ("phi*(2*theta)", "2*phi*theta"),
        ("sin(theta + 0)*3", "3*sin(theta)"),
        ("theta - theta", "0"),
        ("theta**2/7", "theta**2/7"),
        ("1/theta", "(1/theta)"),
        ("(theta + phi)*(theta - phi)", "(-phi + theta)*(phi + theta)"),
        ("-theta", "-theta"),
        ("pi*theta/2", "pi/2*theta"),
        ("cos(pi) + theta", "theta - 1.0"),
    ],
)
def test_reading(text: str, shown: str) -> None:
    value = read_affine(text, ["theta", "phi"])
    assert (str(value) if isinstance(value, Affine) else f"{value:g}") == shown
    numbers = {"theta": 0.7, "phi": -1.9}
    wanted = float(sympy.sympify(text).evalf(subs=numbers))
    got = value.evaluate(numbers) if isinstance(value, Affine) else value
    assert got == pytest.approx(wanted, abs=1e-12)


@pytest.mark.parametrize("text", ["theta/0", "theta/(1 - 1)", "1e308*theta*1e308", "theta +", "2*unknown"])
def test_reading_refused(text: str) -> None:
    with pytest.raises(ExpressionError):
        read_affine(text, ["theta"])


def test_products_of_products_do_not_grow_without_end() -> None:
    value: Affine | float = Affine.of("theta") + 1
    with pytest.raises(ExpressionError, match="too long"):
        for _ in range(40):
            value = product(value, value)


@given(st.floats(-50, 50), st.floats(-7, 0))
def test_within_a_range_of_one_turn(value: float, low: float) -> None:
    moved = within(value, low, low + 2 * math.pi)
    assert low <= moved <= low + 2 * math.pi
    assert abs(np.exp(1j * moved) - np.exp(1j * value)) < 1e-13


def test_close_is_a_matter_of_rounding() -> None:
    a = Affine.of("theta") * 0.3
    assert close(a, Affine.of("theta") * (0.1 + 0.2))
    assert not close(a, a * (1 + 1e-12))
    assert not close(a, a + 1e-12)
    assert not close(a, 0.3)


# ---------------------------------------------------------------- circuits


def unknown_circuit(n: int, operations: int, seed: int, names: tuple[str, ...] = ("alpha", "beta")) -> Circuit:
    """Draw gates of which many have unknown parameters."""
    rng = np.random.default_rng(seed)
    builder = Builder(n, n)
    kinds = [gate for gate in GATES.values() if gate.n_qubits <= min(n, 3)]
    unknown = [GATES[name] for name in sorted(PARAMETRISED) if GATES[name].n_qubits <= n]
    factors = (1.0, -1.0, 0.5, 2.0, 1 / 3, 0.37)
    for _ in range(operations):
        symbolic = rng.random() < 0.6
        gate = unknown[rng.integers(len(unknown))] if symbolic else kinds[rng.integers(len(kinds))]
        values: list[Affine | float] = rng.uniform(-4, 4, gate.n_parameters).tolist()
        for k in range(gate.n_parameters) if symbolic else ():
            if rng.random() < 0.7:
                atom = (*names, f"sin({names[0]})", "*".join(names))[rng.integers(len(names) + 2)]
                values[k] = Affine.of(atom) * factors[rng.integers(len(factors))] + float(
                    rng.choice([0.0, 0.3, np.pi / 2])
                )
        builder.gate(gate, *rng.permutation(n)[: gate.n_qubits].tolist(), parameters=values)
        if rng.random() < 0.05:
            builder.barrier(*rng.permutation(n)[:2].tolist())
    return builder.build()


def line(n: int, gate_set: str) -> gw.Device:
    return gw.Device.from_graph([(i, i + 1) for i in range(n - 1)], gate_set, name="line")


@pytest.mark.parametrize("gate_set", [*GATE_SETS, "iswap-virtual-z"])
@settings(max_examples=4, deadline=None, suppress_health_check=[HealthCheck.too_slow])
@given(seed=st.integers(0, 10**6), values=VALUES)
def test_binding_after_compiling_equals_compiling_after_binding(
    gate_set: str, seed: int, values: dict[str, float]
) -> None:
    circuit = unknown_circuit(3, 12, seed)
    device = line(3, gate_set)
    late = gw.compile(circuit, device)
    assert late.verdict.error_bound < 1e-11
    values = {name: values[name] for name, _ in circuit.inputs}
    bound = late.bind(values)
    assert not bound.circuit.symbolic
    check_legal(bound.circuit, device)
    early = gw.compile(circuit.bind(values), device)
    known = circuit.bind(values)
    assert dense_distance(known, bound.circuit, bound.initial, bound.final) < 1e-11
    assert dense_distance(known, early.circuit, early.initial, early.final) < 1e-11


@settings(max_examples=5, deadline=None)
@given(seed=st.integers(0, 10**6))
def test_the_bound_holds_at_every_binding(seed: int) -> None:
    circuit = unknown_circuit(3, 10, seed)
    result = gw.compile(circuit, line(3, "cz-virtual-z"))
    rng = np.random.default_rng(seed)
    for _ in range(5):
        values = {name: float(rng.uniform(-30, 30)) for name, _ in circuit.inputs}
        made = result.circuit.bind(values)
        distance = dense_distance(circuit.bind(values), made, result.initial, result.final)
        assert distance < result.verdict.error_bound + 1e-12


def test_partial_binding() -> None:
    circuit = unknown_circuit(3, 20, 5)
    result = gw.compile(circuit, line(3, "cz-virtual-z"))
    half = result.bind({"alpha": 0.4})
    assert half.circuit.inputs == (("beta", "float"),)
    assert "alpha" not in write(half.circuit)
    whole = half.bind({"beta": -2.5})
    at_once = circuit.bind({"alpha": 0.4, "beta": -2.5})
    assert dense_distance(at_once, whole.circuit, whole.initial, whole.final) < 1e-11


def test_native_rotations_stay_native() -> None:
    theta = sympy.Symbol("theta")
    circuit = Builder(1).gate("rx", 0, parameters=[theta]).build()
    made = {s: [op.name for op in gw.compile(circuit, line(2, s)).circuit] for s in GATE_SETS}
    assert made["cz-rz-rx"] == ["rx"]
    assert made["ion-xx"] == ["r"]
    assert made["cz-general-pulse"] == ["u"]
    # A rotation about z between two pulses of a quarter turn (McKay et al., PRA 96, 022330 (2017)).
    assert made["cz-virtual-z"].count("sx") == 2
    whole = Builder(1).gate("u3", 0, parameters=[theta, 2 * theta, sympy.pi / 8]).build()
    assert [op.name for op in gw.compile(whole, line(2, "cz-general-pulse")).circuit] == ["u"]


@pytest.mark.parametrize("name", ["rzz", "rxx", "ryy", "rzx", "cp", "crx", "cry", "crz", "cu", "cu3"])
def test_two_entanglers_for_a_rotation_of_two_qubits(name: str) -> None:
    values = [Affine.of(letter) for letter in "abcd"[: GATES[name].n_parameters]]
    circuit = Builder(2).gate(name, 0, 1, parameters=values).build()
    assert gw.compile(circuit, line(2, "cz-virtual-z")).costs.two_qubit_gates == 2


def test_costs_count_unknown_gates() -> None:
    circuit = (
        Builder(2).gate("rx", 0, parameters=[Affine.of("a")]).gate("crz", 0, 1, parameters=[Affine.of("b")]).build()
    )
    result = gw.compile(circuit, line(2, "cz-rz-rx"))
    numbers = gw.compile(circuit.bind({"a": 0.3, "b": 0.7}), line(2, "cz-rz-rx"))
    assert result.costs.by_gate["rx"] >= 1
    assert result.costs.one_qubit_gates == sum(op.matrix is None or len(op.matrix) == 2 for op in result.circuit)
    assert result.summary()["input"]["two_qubit_gates"] == 1
    assert result.summary()["input"]["parameters"] == {"a": "float", "b": "float"}
    assert numbers.costs.two_qubit_gates == result.costs.two_qubit_gates


def test_measurements_resets_and_unknown_angles_keep_their_order() -> None:
    builder = Builder(2, 2).gate("rx", 0, parameters=[Affine.of("a")]).measure(0, 0).reset(0)
    builder.gate("cry", 0, 1, parameters=[Affine.of("a") * 2]).measure(0, 1)
    result = gw.compile(builder.build(), line(2, "cz-virtual-z"))
    wire = result.initial[0]
    names = [op.name for op in result.circuit if wire in op.qubits and op.name in ("measure", "reset", "cz")]
    assert names == ["measure", "reset", "cz", "cz", "measure"]


# ---------------------------------------------------------------- what is refused


def test_no_rotation_by_an_unknown_angle() -> None:
    # Clifford and T alone cannot turn by an unknown angle; neither can a rotation of half a turn at most.
    table = {
        "name": "half turns",
        "gates": {
            "rz": {
                "qubits": 1,
                "parameters": [{"name": "t", "from": 0, "to": "pi"}],
                "matrix": [["exp(-i*t/2)", 0], [0, "exp(i*t/2)"]],
            },
            "sx": {"qubits": 1, "matrix": [["(1+i)/2", "(1-i)/2"], ["(1-i)/2", "(1+i)/2"]]},
            "cz": {"qubits": 2, "matrix": [[1, 0, 0, 0], [0, 1, 0, 0], [0, 0, 1, 0], [0, 0, 0, -1]]},
        },
    }
    gate_set = gw.read_gate_set(table)
    device = gw.Device.from_graph([(0, 1)], gate_set)
    circuit = Builder(1).gate("rz", 0, parameters=[Affine.of("a")]).build()
    with pytest.raises(UnsupportedError, match="not known yet"):
        gw.compile(circuit, device)
    gw.compile(circuit.bind({"a": 0.4}), device)
    with pytest.raises(ProofError, match="no full turn"):
        check_legal(replace(circuit, table=(gate_set.natives["rz"],)), device)


def test_values_that_do_not_fit() -> None:
    circuit = Builder(1).input("n", "uint[8]").gate("rz", 0, parameters=[Affine.of("n")]).build()
    assert circuit.bind({"n": 3}).operation(0).parameters == (3.0,)
    for value in (-1, 0.5, math.nan, math.inf, "x"):
        with pytest.raises(CircuitError, match="does not fit"):
            circuit.bind({"n": value})  # type: ignore[dict-item]
    with pytest.raises(CircuitError, match="not an input"):
        circuit.bind({"m": 1})
    with pytest.raises(CircuitError, match="not known yet"):
        circuit.unitary()


def test_builder_refuses() -> None:
    with pytest.raises(CircuitError, match="name in OpenQASM"):
        Builder(1).gate("rz", 0, parameters=[sympy.Symbol("θ")])
    with pytest.raises(CircuitError, match="not real"):
        Builder(1).gate("rz", 0, parameters=[sympy.I * sympy.Symbol("a")])
    with pytest.raises(CircuitError, match="cannot be said"):
        Builder(1).gate("rz", 0, parameters=[sympy.gamma(sympy.Symbol("a"))])
    with pytest.raises(CircuitError, match="standard table"):
        own = Gate("mine", 1, 1, GATES["rz"].function)
        Builder(1).gate(own, 0, parameters=[Affine.of("a")])
    with pytest.raises(CircuitError, match="type of an input"):
        Builder(1).input("a", "complex")


# ---------------------------------------------------------------- proofs, and what breaks them


def _changed(circuit: Circuit, row: int, column: int, value: Affine | float) -> Circuit:
    table = list(circuit.symbolic)
    link = circuit.link.copy()
    old = list(table[link[row]])
    old[column] = value
    table.append(tuple(old))
    link[row] = len(table) - 1
    return replace(circuit, symbolic=tuple(table), link=link)


def _mutations(circuit: Circuit) -> list[tuple[str, Circuit]]:
    """Change one unknown parameter in every way."""
    made = []
    for row in np.flatnonzero(circuit.is_symbolic).tolist():
        for column, value in enumerate(circuit.symbolic[circuit.link[row]]):
            if not isinstance(value, Affine):
                made.append(("number", _changed(circuit, row, column, value + 1e-6)))
                continue
            atom, factor = value.terms[0]
            other = "beta" if atom == "alpha" else "alpha"
            rest = value - Affine.of(atom) * factor
            made += [
                ("sign", _changed(circuit, row, column, value * -1.0)),
                ("constant", _changed(circuit, row, column, value + 1e-6)),
                ("coefficient", _changed(circuit, row, column, rest + Affine.of(atom) * (factor * (1 + 1e-6)))),
                ("atom", _changed(circuit, row, column, rest + Affine.of(other) * factor)),
                ("fixed", _changed(circuit, row, column, value.evaluate({"alpha": 0.3, "beta": 0.4}))),
            ]
    return made


@pytest.mark.parametrize("gate_set", ["cz-virtual-z", "ion-xx", "cz-general-pulse"])
def test_mutations_are_caught(gate_set: str) -> None:
    builder = Builder(2).gate("h", 0).gate("u3", 0, parameters=[Affine.of("alpha"), Affine.of("beta") + 0.3, 0.2])
    builder.gate("cu", 0, 1, parameters=[Affine.of("alpha"), Affine.of("beta"), 0.4, Affine.of("alpha") * 0.5])
    builder.gate("rxx", 1, 0, parameters=[Affine.of("beta") + 1.0])
    source, device = builder.build(), line(2, gate_set)
    result = gw.compile(source, device)
    first = result.proof.steps[0]
    assert first.output is not None
    check_proof(source, result.circuit, result.proof, device=device)
    mutants = _mutations(result.circuit)
    assert len(mutants) > 20
    for what, mutant in mutants:
        with pytest.raises(ProofError):
            check_proof(source, mutant, result.proof, device=device)
        assert what
    for _, mutant in _mutations(first.output):
        # The rewriting, judged on its own.
        with pytest.raises(ProofError):
            check_proof(source, mutant, Proof((replace(first, output=None),)))
    for row in np.flatnonzero(first.output.is_symbolic).tolist():
        keep = np.arange(len(first.output)) != row
        step = replace(first, output=None, output_window=first.output_window[keep])
        with pytest.raises(ProofError):
            check_proof(source, first.output.take(np.flatnonzero(keep)), Proof((step,)))


def test_a_gate_that_only_has_a_standard_name_is_refused() -> None:
    circuit = Builder(1).gate("rz", 0, parameters=[Affine.of("a")]).build()
    result = gw.compile(circuit, line(2, "cz-virtual-z"))
    impostor = replace(result.circuit, table=(Gate("rz", 1, 1, GATES["rx"].function),))
    with pytest.raises(ProofError, match="standard table"):
        check_proof(circuit, impostor, result.proof)


def test_many_equal_windows_cost_one() -> None:
    builder = Builder(2)
    for k in range(1, 200):
        builder.gate("cu3", 0, 1, parameters=[Affine.of(f"a{k}"), Affine.of(f"b{k}") * k, 0.1])
    result = gw.compile(builder.build(), line(2, "cz-virtual-z"))
    assert result.verdict.error_bound < 1e-9


@pytest.mark.parametrize("name", sorted(HARMONICS))
def test_harmonics_of_every_gate(name: str) -> None:
    """Fourier coefficients of the entries, sampled over two turns, vanish outside the stated frequencies alone."""
    gate = GATES[name]
    rng = np.random.default_rng(3)
    assert len(HARMONICS[name]) == gate.n_parameters
    for place, (low, high) in enumerate(HARMONICS[name]):
        values = np.tile(rng.uniform(-3, 3, gate.n_parameters), (32, 1))
        values[:, place] = 4 * np.pi * np.arange(32) / 32
        size = np.abs(np.fft.fft(gate.matrix(values), axis=0)).max(axis=(1, 2)) / 32
        found = [k - 32 if k > 16 else k for k in np.flatnonzero(size > 1e-12).tolist()]
        assert (min(found), max(found)) == (low, high)


@given(degree=st.integers(1, 12), extra=st.integers(1, 20), seed=st.integers(0, 10**6))
def test_sampling_bounds_trigonometric_polynomials(degree: int, extra: int, seed: int) -> None:
    # Ehlich and Zeller, Math. Z. 86, 41 (1964): N > 2D equally spaced points, sup ≤ max / cos(πD/N).
    rng = np.random.default_rng(seed)
    frequencies = np.arange(-degree, degree + 1)
    factors = rng.normal(size=len(frequencies)) + 1j * rng.normal(size=len(frequencies))
    n = 2 * degree + extra

    def values(t: np.ndarray) -> np.ndarray:
        return np.abs(np.exp(1j * np.outer(t, frequencies)) @ factors)

    bound = values(2 * np.pi * np.arange(n) / n).max() / np.cos(np.pi * degree / n)
    assert values(np.linspace(0, 2 * np.pi, 4000)).max() <= bound * (1 + 1e-12)


@settings(max_examples=5, deadline=None)
@given(seed=st.integers(0, 10**6))
def test_proof_files_and_programs_round_trip(seed: int) -> None:
    circuit = unknown_circuit(3, 12, seed)
    device = line(3, "cz-virtual-z")
    result = gw.compile(circuit, device)
    data = result.encode_proof()
    assert data == result.encode_proof()
    file = decode_proof(data)
    source, output = read(write(circuit, definitions={})), read(result.to_qasm(), natives=device.gate_set.natives)
    assert isinstance(source, Circuit)
    assert isinstance(output, Circuit)
    assert [(op.name, op.qubits, op.parameters) for op in output] == [
        (op.name, op.qubits, op.parameters) for op in result.circuit
    ]
    assert fingerprint(output) == fingerprint(result.circuit) == file.made_for.output
    assert check_proof(circuit, output, file, device=device).error_bound == result.verdict.error_bound
    proven(circuit, output, file, device=device, tolerance=1e-12)
    # Compiled once more, the output costs no more.
    again = gw.compile(output, device, placement=range(3))
    assert again.costs.two_qubit_gates <= result.costs.two_qubit_gates


@pytest.mark.parametrize(
    ("entry", "link"),
    [
        ([[["x", []]]], 0),
        ([[[0.0, [["a", "nan"]]]]], 0),
        ([[[0.0, [["b", 1.0], ["a", 1.0]]]]], 0),
        ([[[0.0, [["a", 1.0]]]]], 7),
        ([[[0.0, [["a", 1.0]]], 1.0]], 0),
    ],
)
def test_damaged_proof_files(entry: list[object], link: int) -> None:
    import io
    import json
    import zipfile

    from gatewright.errors import ProofFileError

    circuit = Builder(1).gate("rz", 0, parameters=[Affine.of("a")]).build()
    data = gw.compile(circuit, line(2, "cz-virtual-z")).encode_proof()
    buffer = io.BytesIO()
    with zipfile.ZipFile(io.BytesIO(data)) as old, zipfile.ZipFile(buffer, "w") as new:
        for name in old.namelist():
            content = old.read(name)
            if name == "proof.json":
                header = json.loads(content)
                header["steps"][0]["output"]["symbolic"] = entry
                content = json.dumps(header).encode()
            if name == "0.output.link":
                content = np.array([link], dtype="<i4").tobytes()
            new.writestr(name, content)
    with pytest.raises(ProofFileError):
        decode_proof(buffer.getvalue())
