"""The command line: what it writes, its exit codes, and one clear line for whatever is wrong."""

from __future__ import annotations

import io
import json
import re
import subprocess
import sys
from pathlib import Path

import numpy as np
import openqasm3
import pytest

import gatewright as gw
from gatewright.cli import main
from gatewright.linalg import haar_unitary

DEVICE = "grid-9.toml"


def run(capsys: pytest.CaptureFixture[str], *arguments: object) -> tuple[int, str, str]:
    code = main([str(argument) for argument in arguments])
    captured = capsys.readouterr()
    return code, captured.out, captured.err


@pytest.mark.parametrize(
    ("source", "device"),
    [
        ("qft-8.qasm", "grid-9.toml"),
        ("ghz-9.qasm", "grid-9.toml"),
        ("adder-3.qasm", "hexagons-27.toml"),
        ("adder-3.qasm", "grid-100.toml"),
        ("spin-ring-10.qasm", "chain-11.toml"),
        ("syndrome.qasm", "kite-5.toml"),
        ("haar-2.npy", "kite-5.toml"),
        ("haar-3.npy", "hexagons-27.toml"),
    ],
)
def test_every_example_compiles_checks_and_parses(
    source: str, device: str, examples: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    out, proof = tmp_path / "out.qasm", tmp_path / "out.proof"
    arguments = ("--device", examples / device, "-o", out, "--proof", proof, "--json", "-")
    code, printed, _ = run(capsys, "compile", examples / source, *arguments)
    assert code == 0
    summary = json.loads(printed)
    assert summary["proof"]["verified"] is True
    assert summary["proof"]["error_bound"] < 1e-10
    assert summary["lower_bound"]["two_qubit_gates"] <= summary["output"]["two_qubit_gates"]
    openqasm3.parse(out.read_text())
    code, printed, _ = run(
        capsys, "check", examples / source, out, "--device", examples / device, "--proof", proof, "--json", "-"
    )
    assert code == 0
    verdict = json.loads(printed)
    # The text states every angle so exactly that reading it back changes nothing.
    assert verdict["error_bound"] == summary["proof"]["error_bound"]
    assert verdict["placement"] == summary["placement"]
    assert verdict["legality_checked"] is True
    if source not in ("syndrome.qasm",):
        assert run(capsys, "check", examples / source, out, "--device", examples / device)[0] == 0


def test_the_same_seed_gives_the_same_bytes(examples: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    written = []
    for number in range(2):
        out, proof = tmp_path / f"{number}.qasm", tmp_path / f"{number}.proof"
        arguments = ("--device", examples / DEVICE, "--seed", 5, "-o", out, "--proof", proof)
        assert run(capsys, "compile", examples / "qft-8.qasm", *arguments)[0] == 0
        written.append((out.read_bytes(), proof.read_bytes()))
    assert written[0] == written[1]


def test_a_changed_gate_is_named(examples: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    out, proof = tmp_path / "out.qasm", tmp_path / "out.proof"
    source = examples / "qft-8.qasm"
    common = ("--device", examples / DEVICE)
    assert run(capsys, "compile", source, *common, "-o", out, "--proof", proof)[0] == 0
    text = out.read_text()
    angle = re.search(r"rz\((\d\.\d{6,})\)", text)
    assert angle
    out.write_text(text.replace(angle[0], f"rz({float(angle[1]) + 1e-5!r})", 1))
    code, printed, error = run(capsys, "check", source, out, *common, "--proof", proof)
    assert (code, printed) == (3, "")
    assert re.search(r"window \d+ on physical qubits", error)
    assert "the output has been changed since the proof was made" in error
    assert run(capsys, "check", source, out, *common)[0] == 3
    # A gate of another kind, one that is not native, one on an absent edge, one left out.
    for old, new in (
        (r"sx q\[(\d)\];", r"rz(pi) q[\1];"),
        (r"sx q\[(\d)\];", r"x q[\1];"),
        (r"cz q\[\d\], q\[\d\];", "cz q[0], q[8];"),
        (r"sx q\[\d\];\n", ""),
    ):
        out.write_text(re.sub(old, new, text, count=1))
        code, _, error = run(capsys, "check", source, out, *common, "--proof", proof)
        assert code == 3, (old, error)
        assert error.count("\n") == 1


def test_check_without_a_device_and_between_unlike_things(
    examples: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    u = haar_unitary(4, rng=8)
    matrix, out = tmp_path / "u.npy", tmp_path / "u.qasm"
    np.save(matrix, u)
    assert run(capsys, "compile", matrix, "--device", examples / "chain-11.toml", "-o", out)[0] == 0
    assert run(capsys, "check", matrix, out)[0] == 0
    np.save(matrix, haar_unitary(4, rng=9))
    code, _, error = run(capsys, "check", matrix, out)
    assert (code, "full unitaries differ" in error) == (3, True)


@pytest.mark.parametrize("version", [2, 3])
def test_standard_output_and_versions(version: int, examples: Path, capsys: pytest.CaptureFixture[str]) -> None:
    arguments = ("--device", examples / "grid-100.toml", "--qasm", version, "-o", "-", "--quiet")
    code, printed, error = run(capsys, "compile", examples / "ghz-9.qasm", *arguments)
    assert (code, error) == (0, "")
    assert f"OPENQASM {version}.0;" in printed
    assert "gate iswap" in printed
    if version == 3:
        openqasm3.parse(printed)


def test_a_matrix_on_standard_input(
    examples: Path, capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch
) -> None:
    for data in (b"0 1\n1 0\n", b"[[0, 1], [1, 0]]", b'OPENQASM 3.0;\ninclude "stdgates.inc";\nqubit q;\nx q;\n'):
        monkeypatch.setattr(sys, "stdin", io.TextIOWrapper(io.BytesIO(data)))
        code, printed, _ = run(capsys, "compile", "-", "--device", examples / DEVICE, "--json", "-")
        assert code == 0
        assert json.loads(printed)["output"]["two_qubit_gates"] == 0


def test_the_other_qubit_order(examples: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    matrix = tmp_path / "m.csv"
    # A CNOT whose control is the second factor.
    matrix.write_text("1,0,0,0\n0,0,0,1\n0,0,1,0\n0,1,0,0\n")
    out = tmp_path / "m.qasm"
    arguments = ("--device", examples / "kite-5.toml", "--placement", "0,1", "--qubit-order")
    for order, expected in (("first", [0, 1, 3, 2]), ("last", [0, 1, 3, 2])):
        assert run(capsys, "compile", matrix, *arguments, order, "-o", out)[0] == 0
        circuit = gw.read(out)
        columns = np.abs(circuit.unitary()[:, :: 2**3]).argmax(axis=0) // 2**3
        straight = [0, 3, 2, 1] if order == "first" else expected
        assert columns.tolist() == straight


def test_count_and_budgets(examples: Path, capsys: pytest.CaptureFixture[str]) -> None:
    common = ("count", examples / "ghz-9.qasm", "--device", examples / DEVICE)
    code, printed, _ = run(capsys, *common)
    assert code == 0
    # The tree of its CNOTs does not embed in the grid: eight of them, and one more for a swap.
    assert re.search(r"two-qubit gates +\d+ +at least 9", printed)
    assert re.search(r"swaps inserted +\d+ +at least 1 ", printed)
    code, printed, error = run(capsys, *common, "--budget", "two_qubit_gates=7", "--json", "-")
    assert code == 4
    assert json.loads(printed)["budget"][0]["met"] is False
    assert "required: two_qubit_gates ≤ 7" in error
    assert run(capsys, *common, "--budget", "two_qubit_gates=50", "--budget", "success_estimate=0.01")[0] == 0
    assert run(capsys, *common, "--budget", "success_estimate=0.999")[0] == 4
    assert run(capsys, *common, "--budget", "cnots=7")[0] == 1
    for wrong in ("two_qubit_gates", "two_qubit_gates=", "=4", "two_qubit_gates=nan", "two_qubit_gates=many"):
        assert run(capsys, *common, "--budget", wrong)[0] == 2


def test_over_budget_writes_no_circuit(examples: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    out = tmp_path / "out.qasm"
    arguments = ("--device", examples / DEVICE, "-o", out, "--budget", "depth=1")
    assert run(capsys, "compile", examples / "ghz-9.qasm", *arguments)[0] == 4
    assert list(tmp_path.iterdir()) == []


def test_describe(examples: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    code, printed, _ = run(capsys, "describe", "cz-virtual-z", "--json", "-")
    facts = json.loads(printed)
    assert (code, facts["universal"]) == (0, True)
    assert facts["entanglers"][0]["name"] == "cz"
    assert facts["entanglers"][0]["mean_uses"] == 3
    assert facts["entanglers"][0]["coordinates"] == pytest.approx([np.pi / 4, 0, 0], abs=1e-15)
    code, printed, _ = run(capsys, "describe", examples / "hexagons-27.toml", "--json", "-")
    facts = json.loads(printed)
    assert (facts["qubits"], facts["gate_set"]) == (27, "cross-resonance")
    assert facts["edges"] == len(facts["edge_list"])
    np.save(tmp_path / "swap.npy", np.eye(4)[[0, 2, 1, 3]])
    code, printed, _ = run(capsys, "describe", tmp_path / "swap.npy", "--json", "-")
    facts = json.loads(printed)
    # Makhlin's invariants of SWAP: G1 = -1, G2 = -3 (Quant. Inf. Proc. 1, 243 (2002)).
    assert facts["invariants"]["G1"] == pytest.approx([-1, 0], abs=1e-14)
    assert facts["invariants"]["G2"] == pytest.approx(-3)
    assert facts["cnot_count"] == 3
    for thing in ("ion-xx", examples / "chain-11.toml", tmp_path / "swap.npy", examples / "haar-3.npy"):
        code, printed, _ = run(capsys, "describe", thing)
        assert code == 0
        assert printed


def test_describe_draws_the_chamber_and_counts_targets(
    examples: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    target, picture = examples / "haar-2.npy", tmp_path / "chamber.svg"
    swap = tmp_path / "swap.npy"
    np.save(swap, np.eye(4)[[0, 2, 1, 3]])
    common = ("describe", "sqrt-iswap-virtual-z", "--target", target, "--target", swap)
    code, printed, _ = run(capsys, *common, "--json", "-", "--chamber", picture)
    facts = json.loads(printed)
    assert code == 0
    assert facts["targets"][str(swap)]["uses"] == 3 and facts["targets"][str(target)]["uses"] == 2
    assert "haar-2.npy" in picture.read_text() and picture.read_text().startswith("<svg")
    code, printed, _ = run(capsys, "describe", examples / "chain-11.toml", "--chamber", "-")
    assert code == 0 and printed.startswith("<svg") and printed.endswith("</svg>\n")
    assert run(capsys, "describe", target, "--chamber", picture)[0] == 0
    picture.unlink()
    swap.unlink()
    refused(capsys, tmp_path, "required: a gate set or a device", "describe", target, "--target", target)
    wide = examples / "haar-3.npy"
    refused(capsys, tmp_path, "2 qubits", "describe", "cz-virtual-z", "--target", wide, "--chamber", picture)
    refused(capsys, tmp_path, "2 qubits", "describe", wide, "--chamber", picture)
    refused(capsys, tmp_path, "same destination", "describe", target, "--chamber", picture, "--json", picture)


def test_help_and_usage(capsys: pytest.CaptureFixture[str]) -> None:
    for arguments in ((), ("--help",), *((name, "--help") for name in ("compile", "count", "check", "describe"))):
        code, printed, _ = run(capsys, *arguments)
        assert code == (0 if arguments else 2)
        assert "exit codes: 0 done" in " ".join(printed.split())
    assert run(capsys, "--version")[1] == f"gatewright {gw.__version__}\n"
    for wrong in (("compile",), ("compose", "x"), ("compile", "x", "--device", "y", "--seed", "-1"), ("--frob",)):
        assert run(capsys, *wrong)[0] == 2


def test_help_and_import_load_no_numerical_library() -> None:
    program = (
        "import sys\nfrom gatewright.cli import main\nimport gatewright\n"
        "assert main(['compile', '--help']) == 0\n"
        "loaded = {'numpy', 'scipy', 'numba', 'sympy', 'networkx', 'rich'} & set(sys.modules)\n"
        "assert not loaded, loaded"
    )
    subprocess.run([sys.executable, "-c", program], check=True, stdout=subprocess.DEVNULL)


QASM = 'OPENQASM 3.0;\ninclude "stdgates.inc";\nqubit[3] q;\n'

BAD_PROGRAMS: dict[str, tuple[bytes, str]] = {
    "unknown gate": (f"{QASM}cxx q[0], q[1];\n".encode(), r":4:1: .*did you mean 'cx'"),
    "wrong arity": (f"{QASM}cx q[0];\n".encode(), r":4:"),
    "wrong number of parameters": (f"{QASM}rz q[0];\n".encode(), r":4:"),
    "repeated qubit": (f"{QASM}cx q[1], q[1];\n".encode(), r":4:"),
    "index out of range": (f"{QASM}x q[3];\n".encode(), r":4:"),
    "recursive definition": (f"{QASM}gate a q {{ a q; }}\na q[0];\n".encode(), r":4:"),
    "doubling definitions": (
        QASM.encode()
        + b"".join(
            b"gate d%d q { d%d q; d%d q; }\n" % (k, k - 1, k - 1) if k else b"gate d0 q { x q; }\n" for k in range(60)
        )
        + b"d59 q[0];\n",
        "operations",
    ),
    "foreign include": (b'OPENQASM 3.0;\ninclude "/etc/passwd";\n', r":2:.*include"),
    "escaping include": (b'OPENQASM 2.0;\ninclude "../qelib1.inc";\n', r":2:.*include"),
    "hostile expression": (f"{QASM}rz(__import__('os')) q[0];\n".encode(), r":4:"),
    "tower of powers": (f"{QASM}rz(9**9**9) q[0];\n".encode(), r":4:"),
    "ten thousand parentheses": (f"{QASM}rz({'(' * 10000}1{')' * 10000}) q[0];\n".encode(), r":4:"),
    "division by zero": (f"{QASM}rz(1/0) q[0];\n".encode(), r":4:"),
    "control flow": (f"{QASM}bit c;\nif (c) x q[c];\n".encode(), r":5:12: .*depends on the run"),
    "modifier without a gate": (f"{QASM}ctrl @ reset q[0], q[1];\n".encode(), r":4:8: .*reset"),
    "timing": (f"{QASM}box[10ns] {{ x q[0]; }}\n".encode(), r":4:1: .*box"),
    "endless loop": (f"{QASM}for int i in [0:10**12] {{ x q[0]; }}\n".encode(), r":4:.*at most 1000000"),
    "too many qubits": (b'OPENQASM 3.0;\ninclude "stdgates.inc";\nqubit[10] q;\nh q;\n', "more qubits than the device"),
    "empty": (b"", "empty"),
    "blank": (b" \n\t\n", "empty"),
    "binary": (bytes(range(256)) * 40, ""),
    "ten megabytes of garbage": (b"\x00\xff;{}(" * (10 * 2**20 // 6), ""),
    "ten megabytes of text": (b"lorem ipsum ( [ { dolor\n" * (10 * 2**20 // 24), ""),
    "one long line": (b"x" * 10 * 2**20, ""),
    "missing semicolon": (f"{QASM}h q[0]\ncx q[0], q[1];\n".encode(), r":[45]:"),
    "unclosed comment": (f"{QASM}/* h q[0];\n".encode(), r":4:"),
}

BAD_MATRICES: dict[str, tuple[str, bytes, str]] = {
    "not square": (".csv", b"1,0\n", "not square"),
    "ragged": (".csv", b"1,0\n0\n", r":2|row"),
    "not a power of two": (".csv", b"1,0,0\n0,1,0\n0,0,1\n", "power of two"),
    "not finite": (".csv", b"nan,0\n0,1\n", ""),
    "not unitary": (".csv", b"1,0\n0,1.1\n", r"found: 0\.21; the nearest unitary is 0\.1 away.*--nearest-unitary"),
    "not numbers": (".csv", b"a,b\nc,d\n", ""),
    "code": (".csv", b"__import__('os').getcwd(),0\n0,1\n", ""),
    "broken JSON": (".json", b"[[1, 0], [0,", ""),
    "JSON of something else": (".json", b'{"a": 1}', ""),
    "deep JSON": (".json", b"[" * 100000, ""),
    "not NumPy": (".npy", b"hello", ""),
    "cut NumPy": (".npy", b"\x93NUMPY\x01\x00v\x00{'descr': '<c16', 'fortran_order': False, 'shape': (4, 4), }", ""),
    "huge NumPy": (
        ".npy",
        b"\x93NUMPY\x01\x00v\x00"
        + b"{'descr': '<c16', 'fortran_order': False, 'shape': (1000000, 1000000), }".ljust(117)
        + b"\n",
        "",
    ),
    "cut archive": (".npz", b"PK\x03\x04nonsense", ""),
    "empty": (".txt", b"", "empty"),
    "garbage": (".txt", b"\xfe\xff" * 5 * 2**20, ""),
}


def refused(capsys: pytest.CaptureFixture[str], folder: Path, pattern: str, *arguments: object) -> None:
    """Check for exit code 1, one line that fits, and nothing written."""
    before = {path: path.read_bytes() if path.is_file() else b"" for path in folder.rglob("*")}
    code, printed, error = run(capsys, *arguments)
    assert (code, printed) == (1, ""), error
    assert error.startswith("gatewright: ")
    assert error.count("\n") == 1
    assert len(error) < 1500
    assert "Traceback" not in error
    assert re.search(pattern, error), error
    assert before == {path: path.read_bytes() if path.is_file() else b"" for path in folder.rglob("*")}


@pytest.mark.parametrize("kind", sorted(BAD_PROGRAMS))
def test_bad_programs(kind: str, examples: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    data, pattern = BAD_PROGRAMS[kind]
    path = tmp_path / "bad.qasm"
    path.write_bytes(data)
    arguments = ("--device", examples / DEVICE, "-o", tmp_path / "out.qasm", "--proof", tmp_path / "out.proof")
    refused(capsys, tmp_path, pattern, "compile", path, *arguments)


@pytest.mark.parametrize("kind", sorted(BAD_MATRICES))
def test_bad_matrices(kind: str, examples: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    suffix, data, pattern = BAD_MATRICES[kind]
    path = tmp_path / f"bad{suffix}"
    path.write_bytes(data)
    refused(capsys, tmp_path, pattern, "compile", path, "--device", examples / DEVICE, "-o", tmp_path / "out.qasm")
    refused(capsys, tmp_path, pattern, "describe", path)


CZ = "[gates.cz]\nqubits = 2\nmatrix = [[1,0,0,0],[0,1,0,0],[0,0,1,0],[0,0,0,-1]]\n"
RZ = (
    '[gates.rz]\nqubits = 1\nvirtual = true\nparameters = [{ name = "t", from = "-pi", to = "pi" }]\n'
    'matrix = [["exp(-i*t/2)", 0], [0, "exp(i*t/2)"]]\n'
)
SX = '[gates.sx]\nqubits = 1\nmatrix = [["(1+i)/2", "(1-i)/2"], ["(1-i)/2", "(1+i)/2"]]\n'
GRAPH = '[coupling]\nshape = "line"\nqubits = 3\n'

BAD_DEVICES: dict[str, tuple[str, str]] = {
    "no such gate set": (f'name = "d"\ngate_set = "cz-virtual"\n{GRAPH}', "cz-virtual-z"),
    "unknown shape": ('name = "d"\ngate_set = "cz-virtual-z"\n[coupling]\nshape = "torus"\nqubits = 3\n', "torus"),
    "broken TOML": ('name = "d\n', ""),
    "edge out of range": ('name = "d"\ngate_set = "cz-virtual-z"\n[coupling]\nqubits = 2\nedges = [[0, 5]]\n', "5"),
    "empty": ("", ""),
    "disconnected": (
        'name = "d"\ngate_set = "cz-virtual-z"\n[coupling]\nqubits = 9\nedges = [[0, 1], [2, 3], [4, 5], [6, 7]]\n',
        "connected part",
    ),
}

BAD_GATE_SETS: dict[str, tuple[str, str]] = {
    "not unitary": (f'name = "g"\n{RZ}{SX}{CZ.replace("-1", "-2")}', "cz.*unitary"),
    "hostile entry": (f'name = "g"\n{RZ}{SX}{CZ.replace("-1", chr(34) + "__import__(1)" + chr(34))}', "cz"),
    "tower of powers": (f'name = "g"\n{RZ}{SX}{CZ.replace("-1", chr(34) + "9^9^9" + chr(34))}', "cz"),
    "deep parentheses": (
        f'name = "g"\n{RZ}{SX}{CZ.replace("-1", chr(34) + "(" * 10000 + "1" + ")" * 10000 + chr(34))}',
        "cz",
    ),
    "one axis only": (f'name = "g"\n{RZ}{CZ}', "one-qubit"),
    "unitary at one end only": (
        f'name = "g"\n{RZ.replace("exp(i*t/2)", "exp(i*t/2)*(1+t/100)")}{SX}{CZ}',
        "rz.*unitary",
    ),
    "misnamed standard gate": (f'name = "g"\n{RZ}{SX.replace("1+i", "1-i", 1)}{CZ}', "sx"),
    "unknown key": (f'name = "g"\ncolour = "red"\n{RZ}{SX}{CZ}', "colour"),
}


@pytest.mark.parametrize("kind", sorted(BAD_DEVICES))
def test_bad_devices(kind: str, examples: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    text, pattern = BAD_DEVICES[kind]
    path = tmp_path / "bad.toml"
    path.write_text(text)
    refused(
        capsys, tmp_path, pattern, "compile", examples / "ghz-9.qasm", "--device", path, "-o", tmp_path / "out.qasm"
    )


@pytest.mark.parametrize("kind", sorted(BAD_GATE_SETS))
def test_bad_gate_sets(kind: str, tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    text, pattern = BAD_GATE_SETS[kind]
    path = tmp_path / "bad.toml"
    path.write_text(text)
    refused(capsys, tmp_path, pattern, "describe", path)


def test_missing_files_directories_and_unwritable_outputs(
    examples: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    device = ("--device", examples / DEVICE)
    good = examples / "ghz-9.qasm"
    refused(capsys, tmp_path, "absent.qasm", "compile", tmp_path / "absent.qasm", *device)
    refused(capsys, tmp_path, "directory", "compile", tmp_path, *device)
    refused(capsys, tmp_path, "absent.toml", "compile", good, "--device", tmp_path / "absent.toml")
    refused(capsys, tmp_path, "", "compile", good, "--device", tmp_path)
    refused(capsys, tmp_path, "cannot write", "compile", good, *device, "-o", tmp_path / "no" / "out.qasm")
    refused(capsys, tmp_path, "cannot write", "compile", good, *device, "-o", tmp_path)
    same = tmp_path / "same"
    refused(capsys, tmp_path, "same destination", "compile", good, *device, "-o", same, "--proof", same)
    refused(capsys, tmp_path, "", "describe", tmp_path / "absent.toml")
    refused(capsys, tmp_path, "", "describe", tmp_path / "absent.npy")


def test_one_failing_output_leaves_the_others_unwritten(
    examples: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    out = tmp_path / "out.qasm"
    out.write_text("precious")
    arguments = ("--device", examples / DEVICE, "-o", out, "--proof", tmp_path / "no" / "out.proof")
    refused(capsys, tmp_path, "cannot write", "compile", examples / "ghz-9.qasm", *arguments)
    assert out.read_text() == "precious"


@pytest.mark.parametrize("damage", ["cut", "flipped", "text", "empty", "other", "absent"])
def test_damaged_proof_files(damage: str, examples: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    out, proof = tmp_path / "out.qasm", tmp_path / "out.proof"
    source, device = examples / "adder-3.qasm", ("--device", examples / DEVICE)
    assert run(capsys, "compile", source, *device, "-o", out, "--proof", proof)[0] == 0
    data = bytearray(proof.read_bytes())
    if damage == "cut":
        proof.write_bytes(data[: len(data) // 2])
    elif damage == "flipped":
        for k in range(200, len(data), 997):
            data[k] ^= 0xFF
        proof.write_bytes(data)
    elif damage == "absent":
        proof.unlink()
    else:
        proof.write_bytes({"text": b"not a proof", "empty": b"", "other": b"PK\x05\x06" + bytes(18)}[damage])
    refused(capsys, tmp_path, "proof", "check", source, out, *device, "--proof", proof)


def test_interrupted(
    examples: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch
) -> None:
    def interrupt(*_: object, **__: object) -> None:
        raise KeyboardInterrupt

    monkeypatch.setattr("gatewright.pipeline.check_proof", interrupt)
    arguments = ("--device", examples / DEVICE, "-o", tmp_path / "out.qasm")
    code, printed, error = run(capsys, "compile", examples / "ghz-9.qasm", *arguments)
    assert (code, printed) == (130, "")
    assert "interrupted" in error
    assert list(tmp_path.iterdir()) == []


def test_the_module_runs_as_a_program(examples: Path) -> None:
    command = [sys.executable, "-m", "gatewright", "compile", examples / "haar-2.npy", "--device", examples / DEVICE]
    done = subprocess.run([*map(str, command), "--json", "-"], capture_output=True, text=True, check=True)
    assert json.loads(done.stdout)["proof"]["verified"] is True
