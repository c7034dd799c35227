"""Reading matrices: what NumPy and `json` write, text of several shapes, and files that are damaged or hostile."""

from __future__ import annotations

import io
import json
import pickle
import sys
import zipfile
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from gatewright.errors import GatewrightError, MatrixError, NotUnitaryError
from gatewright.gates import GATES
from gatewright.linalg import haar_unitary, kron
from gatewright.matrices import MAX_ROWS, read_matrix

U = haar_unitary(4, rng=5)


def npy(array: object, **options) -> bytes:
    buffer = io.BytesIO()
    np.save(buffer, np.asarray(array), **options)
    return buffer.getvalue()


def npz(**arrays: object) -> bytes:
    buffer = io.BytesIO()
    np.savez_compressed(buffer, **arrays)
    return buffer.getvalue()


def as_text(matrix: np.ndarray, between: str, unit: str = "i") -> bytes:
    rows = [between.join(f"{z.real!r}{z.imag:+.17g}{unit}" for z in row.tolist()) for row in matrix]
    return "\n".join(rows).encode()


def savetxt(matrix: np.ndarray) -> bytes:
    buffer = io.BytesIO()
    np.savetxt(buffer, matrix, header="as numpy.savetxt writes complex numbers", fmt="%.17e")
    return buffer.getvalue()


PAIRS = [[[z.real, z.imag] for z in row] for row in U.tolist()]
CONTENTS = {
    "u.npy": npy(U),
    "fortran.npy": npy(np.asfortranarray(U)),
    "big-endian.npy": npy(U.astype(">c16")),
    "one.npz": npz(anything=U),
    "named.npz": npz(other=np.eye(3), unitary=U),
    "u.csv": as_text(U, ","),
    "j.csv": as_text(U, " , ", "j"),
    "semicolons.csv": as_text(U, ";"),
    "u.txt": b"# a comment\n\n" + as_text(U, "  ") + b"  # another\n\n",
    "tabs.txt": as_text(U, "\t").replace(b"\n", b"\r\n"),
    "savetxt.txt": savetxt(U),
    "pairs.json": json.dumps(PAIRS).encode(),
    "object.json": json.dumps({"unitary": PAIRS, "note": "x"}, indent=1).encode(),
    "strings.json": json.dumps(
        [[f"{z.real!r} + {z.imag!r}i".replace("+ -", "- ") for z in row] for row in U.tolist()]
    ).encode(),
    "marked.json": b"\xef\xbb\xbf \n" + json.dumps(PAIRS).encode(),
}


@pytest.mark.parametrize("name", CONTENTS)
def test_formats(name: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    file = tmp_path / name
    file.write_bytes(CONTENTS[name])
    read = read_matrix(file)
    assert read.matrix.dtype == np.complex128 and read.n_qubits == 2
    np.testing.assert_allclose(read.matrix, U, atol=2e-16)
    np.testing.assert_array_equal(read_matrix(CONTENTS[name]).matrix, read.matrix)
    np.testing.assert_array_equal(read_matrix(str(file)).matrix, read.matrix)
    monkeypatch.setattr(sys, "stdin", io.TextIOWrapper(io.BytesIO(CONTENTS[name])))
    np.testing.assert_array_equal(read_matrix("-").matrix, read.matrix)


def test_real_and_integer_types() -> None:
    for dtype in (np.int8, np.uint32, np.float16, np.float32, np.float64, np.complex64):
        np.testing.assert_array_equal(read_matrix(npy(np.array([[0, 1], [1, 0]], dtype))).matrix, GATES["x"].matrix())
    np.testing.assert_array_equal(read_matrix(b"[[0, 1], [1, 0]]").matrix, GATES["x"].matrix())


def test_entries_are_expressions() -> None:
    text = b"1/sqrt(2), 1/sqrt(2)\nexp(i*pi/4)/sqrt(2), -exp(i*pi/4) / sqrt(2)"
    np.testing.assert_allclose(read_matrix(text).matrix, GATES["t"].matrix() @ GATES["h"].matrix(), atol=1e-16)
    np.testing.assert_array_equal(read_matrix(b"0 + 0i  0 - i\n0 + i  0").matrix, GATES["y"].matrix())
    # A sign that touches the next number begins an entry of its own.
    np.testing.assert_array_equal(read_matrix(b"0 -i\ni 0").matrix, GATES["y"].matrix())
    np.testing.assert_array_equal(read_matrix(b'"0","-1j"\n"1j","0",\n').matrix, GATES["y"].matrix())


def test_qubit_order() -> None:
    a, b, c = haar_unitary(2, 3, rng=1)
    content = npy(kron(kron(a, b), c))
    np.testing.assert_allclose(read_matrix(content, qubit_order="last").matrix, kron(kron(c, b), a), atol=1e-16)
    with pytest.raises(MatrixError, match="'first' or 'last'"):
        read_matrix(content, qubit_order="middle")  # type: ignore[arg-type]


def test_rounded_matrices() -> None:
    rounded = npy(U.round(6))
    with pytest.raises(NotUnitaryError) as caught:
        read_matrix(rounded, where="u.npy")
    assert caught.value.where == "u.npy" and 1e-8 < caught.value.distance < 1e-5
    for options in ({"tolerance": 1e-4}, {"nearest": True}):
        read = read_matrix(rounded, **options)
        np.testing.assert_allclose(read.matrix @ read.matrix.conj().T, np.eye(4), atol=1e-15)
        # The distance moved, by SciPy's definition of the operator norm.
        assert read.moved == pytest.approx(np.linalg.svd(U.round(6) - read.matrix)[1][0], rel=1e-6)
    assert read_matrix(npy(U)).moved == 0


class Trap:
    """Unpickling it would be seen."""

    def __reduce__(self):
        return pytest.fail, ("the file was unpickled",)


def zip_of(name: str, data: bytes) -> bytes:
    buffer = io.BytesIO()
    with zipfile.ZipFile(buffer, "w", zipfile.ZIP_DEFLATED) as archive:
        archive.writestr(name, data)
    return buffer.getvalue()


def header(text: str) -> bytes:
    """A .npy file of version 1.0 with any header and no data."""
    line = text.encode() + b"\n"
    return b"\x93NUMPY\x01\x00" + len(line).to_bytes(2, "little") + line


HUGE = "{'descr': '<c16', 'fortran_order': False, 'shape': (1048576, 1048576), }"
REFUSED = [
    (npy(np.array([[Trap(), 1], [1, 1]], dtype=object), allow_pickle=True), "Python objects, which are never loaded"),
    (pickle.dumps(U), "not a matrix"),
    (header(HUGE), f"at most {MAX_ROWS} rows"),
    (zip_of("a.npy", header(HUGE)), f"at most {MAX_ROWS} rows"),
    (header("{'descr': '<c16', 'fortran_order': False, 'shape': (4, 4), }"), "damaged"),
    (header("{'descr': '<c16', 'fortran_order': False, 'shape': (-4, 4), }"), "damaged"),
    (header("(" * 9000), "damaged"),
    (header("__import__('os')"), "damaged"),
    (b"\x93NUMPY\x09\x00", "unknown version of the .npy format"),
    (b"\x93NUMPY", "damaged"),
    (npy(U)[:-5], "damaged"),
    (npy(np.eye(4)[None]), "the array is not a matrix"),
    (npy(np.eye(2, dtype=bool)), "does not hold numbers"),
    (npy(np.array([["a", "b"], ["c", "d"]])), "does not hold numbers"),
    (npy(np.zeros((2, 2), dtype=[("a", float)])), "does not hold numbers"),
    (npz(a=U, b=U), "exactly one, or one called 'unitary'; found: a, b"),
    (npz(), "found: none"),
    (npz(a=U)[:-30], "damaged"),
    (b"PK\x03\x04 nonsense", "damaged"),
    (zip_of("a.npy", b"nonsense"), "damaged"),
    (b"", "the matrix is empty"),
    (b" \n ", "the matrix is empty"),
    (b"# only a comment", "the matrix is empty"),
    (b"\xff\xfe\x00", "not a matrix"),
    (b"1 0\n0", "2 entries in each, as in row 0; found: 1 in row 1"),
    (b"1,0\n0,x", "row 1, column 1 (counted from 0) cannot be read: unknown name 'x'"),
    (b"1,0\n0,", "2 entries in each"),
    (b"1,,0\n0,1,0", "row 0, column 1"),
    (b"1 0\n0 nan", "row 1, column 1"),
    (b"1 0\n0 inf", "row 1, column 1"),
    (b"1 0\n0 1e999", "row 1, column 1"),
    (b"1 0\n0 9**9**9", "no finite value"),
    (b"1 0\n0 __import__('os').getpid()", "unknown name '__import__'"),
    (b"1 0 0\n0 1 0", "not square"),
    (b"1 0 0\n0 1 0\n0 0 1", "power of two"),
    (b"1", "power of two"),
    (b"2 0\n0 1", "not unitary"),
    (b"1e200 0\n0 1", "not unitary"),
    (b"hello world", "unknown name 'hello'"),
    (b"1 " * (MAX_ROWS + 1), "at most 4096"),
    (b"[1, 2]", "not a matrix"),
    (b"{}", "not a matrix"),
    (b"[]", "not a matrix"),
    (b"[[1, 0], [0", "JSON text cannot be read"),
    (b"[" * 100_000, "JSON text cannot be read"),
    (b"[[1, 0], [0]]", "different lengths"),
    (b"[[1, 0], [0, true]]", "row 1, column 1 (counted from 0) cannot be read"),
    (b"[[1, 0], [0, null]]", "row 1, column 1"),
    (b"[[1, 0], [0, [1, 2, 3]]]", "row 1, column 1"),
    (b"[[1, 0], [0, NaN]]", "row 1, column 1"),
    (b"[[1, 0], [0, 1e999]]", "row 1, column 1"),
    (b"[[1, 0], [0, 1" + b"0" * 400 + b"]]", "row 1, column 1"),
    (b"[[1, 0], [0, 1" + b"0" * 9000 + b"]]", "JSON text cannot be read"),
    (b'[[1, 0], [0, "1+"]]', "ends early"),
    (npy(np.array([[1, 0], [0, np.nan]])), "(nan+0j) in row 1, column 1"),
]


@pytest.mark.parametrize(("content", "words"), REFUSED, ids=[f"{k}-{row[1][:30]}" for k, row in enumerate(REFUSED)])
def test_refused(content: bytes, words: str) -> None:
    with pytest.raises(MatrixError) as caught:
        read_matrix(content, where="the input")
    message = str(caught.value)
    assert words in message
    assert message.startswith("the input")
    assert "\n" not in message and len(message) < 500


def test_positions_in_text() -> None:
    with pytest.raises(MatrixError) as caught:
        read_matrix(b"# comment\n1 0\n\n0 1+*2\n")
    assert caught.value.line == 4
    with pytest.raises(MatrixError) as caught:
        read_matrix(b"[[1, 0],\n [0, ]]")
    assert (caught.value.line, caught.value.column) == (2, 6)


def test_files_that_cannot_be_read(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    for path in (tmp_path, tmp_path / "missing.npy", "nul\0name.npy"):
        with pytest.raises(MatrixError, match="cannot be read"):
            read_matrix(path)
    for name in ("a.npy", "a.npz"):
        (tmp_path / name).write_bytes(b"1 0\n0 1")
        with pytest.raises(MatrixError, match=f"this is not a .{name[2:]} file"):
            read_matrix(tmp_path / name)
    (tmp_path / "empty.npy").write_bytes(b"")
    with pytest.raises(MatrixError, match="an empty file"):
        read_matrix(tmp_path / "empty.npy")
    monkeypatch.setattr("gatewright.matrices.MAX_BYTES", 5)
    with pytest.raises(MatrixError, match="too large"):
        read_matrix(b"1 0\n0 1")


@settings(max_examples=300)
@given(
    st.sampled_from(list(CONTENTS.values())),
    st.lists(st.tuples(st.integers(0, 600), st.integers(0, 9), st.binary(max_size=3)), max_size=4),
)
def test_mutated_files_are_read_or_refused(content: bytes, edits: list[tuple[int, int, bytes]]) -> None:
    for place, length, piece in edits:
        content = content[:place] + piece + content[place + length :]
    try:
        read_matrix(content)
    except GatewrightError as problem:
        assert "\n" not in str(problem)


@given(st.binary(max_size=40) | st.text(alphabet='0123456789.+-ij ,;\n[]"{}#()e', max_size=40).map(str.encode))
def test_any_bytes_are_read_or_refused(content: bytes) -> None:
    try:
        read_matrix(content)
    except GatewrightError as problem:
        assert str(problem)
