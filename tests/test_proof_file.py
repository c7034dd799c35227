"""Proof files: the same bytes after a round trip, small, and refused when they are damaged or belong elsewhere."""

from __future__ import annotations

import io
import json
import zipfile
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from hypothesis.extra import numpy as hnp

import gatewright as gw
from circuits import random_circuit
from gatewright.errors import ProofError, ProofFileError
from gatewright.proof import Proof, check_proof, decode_proof, encode_proof
from gatewright.proof.packing import (
    follow_wires,
    pack_differences,
    pack_integers,
    pack_seams,
    unpack_differences,
    unpack_integers,
    unpack_seams,
)
from gatewright.proof.reorder import Reorder

DEVICE = gw.Device.from_graph([(0, 1), (1, 2), (2, 3), (3, 4)], "cz-virtual-z")


@pytest.fixture(scope="module")
def compiled() -> gw.Result:
    return gw.compile(random_circuit(4, 30, 5, measured=True), DEVICE)


@pytest.fixture(scope="module")
def data(compiled: gw.Result) -> bytes:
    return compiled.encode_proof()


@given(st.integers(1, 5), st.integers(0, 25), st.integers(0, 2**32))
def test_reading_and_writing_again_gives_the_same_bytes(n: int, operations: int, seed: int) -> None:
    result = gw.compile(random_circuit(n, operations, seed), DEVICE)
    data = result.encode_proof()
    read = decode_proof(data)
    assert encode_proof(read) == data
    for before, after in zip(result.proof.steps, read.steps, strict=True):
        assert type(before) is type(after)
        if isinstance(before, Reorder):
            assert np.array_equal(before.rank, after.rank)
            continue
        for name in ("initial", "final", "source_window", "output_window", "offsets", "wires", "entry", "exit"):
            assert np.array_equal(getattr(before, name), getattr(after, name)), name
        assert np.array_equal(before.seams.view(np.int64), after.seams.view(np.int64))
    check_proof(result.source, result.circuit, read, device=DEVICE)


def test_save_writes_what_read_proof_reads(compiled: gw.Result, tmp_path: Path) -> None:
    compiled.proof.save(tmp_path / "x.proof")
    assert (tmp_path / "x.proof").read_bytes() == compiled.encode_proof()
    assert [path.name for path in tmp_path.iterdir()] == ["x.proof"]
    read = gw.read_proof(tmp_path / "x.proof")
    assert read.made_for == compiled.proof.made_for
    assert gw.check(compiled.source, compiled.circuit, device=DEVICE, proof=read).error_bound < 1e-11
    with pytest.raises(ProofFileError, match="cannot write"):
        compiled.proof.save(tmp_path / "absent" / "x.proof")


def test_a_long_proof_takes_few_bytes_a_gate() -> None:
    rng = np.random.default_rng(0)
    builder = gw.Builder(5)
    for _ in range(4000):
        a, b = rng.permutation(5)[:2].tolist()
        builder.gate("u3", a, parameters=rng.uniform(-3, 3, 3).tolist()).gate("cx", a, b)
    result = gw.compile(builder.build(), DEVICE)
    size = len(result.encode_proof())
    assert size < 24 * (result.source.count("cx") + result.costs.swaps_inserted)


INTEGERS = hnp.arrays(np.int32, st.integers(0, 20), elements=st.integers(-(2**31), 2**31 - 1))


@given(INTEGERS)
def test_integers_come_back(array: np.ndarray) -> None:
    assert np.array_equal(unpack_integers(pack_integers(array)), array)
    assert np.array_equal(unpack_differences(pack_differences(array)), array)


@given(st.integers(0, 2**32), st.sampled_from(["unit", "axis", "any", "identity", "special"]))
def test_seams_come_back_bit_by_bit(seed: int, kind: str) -> None:
    rng = np.random.default_rng(seed)
    seams = rng.standard_normal((9, 4))
    if kind == "unit":
        seams /= np.linalg.norm(seams, axis=1, keepdims=True)
    elif kind == "axis":
        angle = rng.uniform(-7, 7, 9) * 10.0 ** rng.integers(-18, 1, 9)
        seams = np.stack([np.cos(angle), 0 * angle, -0.0 * angle, np.sin(angle)], axis=1)
    elif kind == "identity":
        seams = np.tile([1.0, 0, 0, 0], (9, 1))
    elif kind == "special":
        seams = rng.choice([0.0, -0.0, 1, -1, np.nan, np.inf, -np.inf, 5e-324, 1e308, 0.5], (9, 4))
    parts = pack_seams(seams)
    assert np.array_equal(unpack_seams(parts).view(np.int64), seams.view(np.int64)) or kind == "special"
    again = unpack_seams(parts)
    assert np.array_equal(np.isnan(again), np.isnan(seams))
    assert np.array_equal(again[~np.isnan(again)], seams[~np.isnan(seams)])
    if kind in ("axis", "identity"):
        assert len(parts["small"]) <= 18 and len(parts["odd"]) == 0


def test_wires_that_do_not_chain_are_not_followed() -> None:
    first, loop = np.array([0, 1]), np.array([1, 0, 0, 1])
    assert follow_wires(first, np.array([0, 1]), np.array([1, 0])).tolist() == [0, 1]
    assert follow_wires(first, np.array([0, 1, 1]), np.array([0, 1, 0])) is None
    assert follow_wires(np.array([0, 0]), loop, loop) is None


def rebuilt(data: bytes, change: Any) -> bytes:
    """Return the archive with `change` applied to its members, a dict of name to bytes."""
    with zipfile.ZipFile(io.BytesIO(data)) as archive:
        members = {name: archive.read(name) for name in archive.namelist()}
    change(members)
    buffer = io.BytesIO()
    with zipfile.ZipFile(buffer, "w", zipfile.ZIP_DEFLATED) as archive:
        for name, content in members.items():
            archive.writestr(name, content)
    return buffer.getvalue()


def header(change: Any) -> Any:
    def edit(members: dict[str, bytes]) -> None:
        facts = json.loads(members["proof.json"])
        change(facts)
        members["proof.json"] = json.dumps(facts).encode()

    return edit


def overwrite(name: str, fill: int) -> Any:
    def edit(members: dict[str, bytes]) -> None:
        members[name] = bytes([fill]) * len(members[name])

    return edit


HOSTILE: dict[str, Any] = {
    "no header": lambda m: m.pop("proof.json"),
    "header not JSON": lambda m: m.update({"proof.json": b"{"}),
    "header not text": lambda m: m.update({"proof.json": b"\xff\xfe"}),
    "header nested deeply": lambda m: m.update({"proof.json": b"[" * 100_000}),
    "header a list": lambda m: m.update({"proof.json": b"[]"}),
    "another format": header(lambda h: h.update(format="x")),
    "another version": header(lambda h: h.update(format_version=99)),
    "a version that is not a number": header(lambda h: h.update(format_version=[{}])),
    "no steps": header(lambda h: h.pop("steps")),
    "steps not a list": header(lambda h: h.update(steps=7)),
    "no fingerprints": header(lambda h: h.pop("fingerprints")),
    "claims unknown": header(lambda h: h.update(claims=["believe me"])),
    "an array missing": lambda m: m.pop("0.entry"),
    "an array not listed": lambda m: m.update({"more": b""}),
    "an array cut short": lambda m: m.update({"0.entry": m["0.entry"][:-1]}),
    "an array of objects": header(lambda h: h["arrays"].update({"0.entry": ["|O", [8]]})),
    "an array of a strange type": header(lambda h: h["arrays"].update({"0.entry": ["9" * 50 + "i4", [8]]})),
    "an array of negative size": header(lambda h: h["arrays"].update({"0.entry": ["<i4", [-1, -8]]})),
    "an array of enormous size": header(lambda h: h["arrays"].update({"0.entry": ["<i4", [2**62, 2**62]]})),
    "an array of text sizes": header(lambda h: h["arrays"].update({"0.entry": ["<i4", ["a"]]})),
    "wires out of range": overwrite("0.entry", 255),
    "widths out of range": overwrite("0.widths", 255),
    "windows out of range": overwrite("0.output_window", 254),
    "claims out of range": overwrite("0.claims", 200),
    "seam codes out of range": overwrite("0.seams.code", 255),
    "exits out of range": overwrite("0.exit", 7),
}


@pytest.mark.parametrize("what", sorted(HOSTILE))
def test_a_hostile_file_is_refused(compiled: gw.Result, data: bytes, what: str) -> None:
    with pytest.raises((ProofFileError, ProofError)) as caught:
        check_proof(compiled.source, compiled.circuit, decode_proof(rebuilt(data, HOSTILE[what])), device=DEVICE)
    assert "\n" not in str(caught.value)


@given(st.data())
def test_a_truncated_file_is_refused(compiled: gw.Result, data: bytes, draw: st.DataObject) -> None:
    cut = draw.draw(st.integers(0, len(data) - 1))
    with pytest.raises(ProofFileError):
        decode_proof(data[:cut])


@given(st.data())
def test_an_edited_file_is_refused_or_says_the_same(compiled: gw.Result, data: bytes, draw: st.DataObject) -> None:
    at, by = draw.draw(st.integers(0, len(data) - 1)), draw.draw(st.integers(1, 255))
    edited = data[:at] + bytes([data[at] ^ by]) + data[at + 1 :]
    try:
        read = decode_proof(edited)
    except ProofFileError:
        return
    # Dates and the like in the archive's own tables say nothing.
    assert encode_proof(read) == data


def test_any_bytes_are_refused() -> None:
    rng = np.random.default_rng(0)
    for size in (0, 1, 4, 22, 1000):
        with pytest.raises(ProofFileError):
            decode_proof(rng.bytes(size))
    with pytest.raises(ProofFileError):
        decode_proof(b"PK\x05\x06" + bytes(18))


@pytest.mark.parametrize("field", ["source", "output", "gate_set", "device"])
def test_an_edited_fingerprint_is_refused(compiled: gw.Result, field: str) -> None:
    broken = replace(compiled.proof, made_for=replace(compiled.proof.made_for, **{field: "0" * 64}))
    with pytest.raises(ProofError, match=field.replace("_", " ")):
        check_proof(compiled.source, compiled.circuit, broken, device=DEVICE)


def test_a_change_too_small_for_the_windows_is_seen_by_the_fingerprint(compiled: gw.Result) -> None:
    parameters = compiled.circuit.parameters.copy()
    parameters[0] += 1e-14
    with pytest.raises(ProofError, match="the output has been changed"):
        check_proof(compiled.source, replace(compiled.circuit, parameters=parameters), compiled.proof, device=DEVICE)
    check_proof(compiled.source, replace(compiled.circuit, phase=0.3), compiled.proof, device=DEVICE)
    named_again = replace(compiled.circuit, qubit_registers=(("other", 5),))
    check_proof(compiled.source, named_again, compiled.proof, device=DEVICE)


def test_a_proof_for_another_device_is_refused(compiled: gw.Result) -> None:
    wider = gw.Device.from_graph([(0, 1), (1, 2), (2, 3), (3, 4), (4, 0)], "cz-virtual-z")
    with pytest.raises(ProofError, match="device"):
        check_proof(compiled.source, compiled.circuit, compiled.proof, device=wider)
    check_proof(compiled.source, compiled.circuit, Proof(compiled.proof.steps), device=wider)
