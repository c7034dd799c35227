"""Output that is compiled again: it comes back as it is, unless something in it becomes cheaper."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import openqasm3
import pytest

import gatewright as gw
from circuits import random_circuit
from gatewright.cli import main
from gatewright.devices import Device
from gatewright.qasm import read
from gatewright.stages.settle import _counted

GATE_SETS = sorted(path.stem for path in (Path(__file__).resolve().parent.parent / "gatesets").glob("*.toml"))


def statements(text: str) -> list[str]:
    return [line for line in text.splitlines() if not line.startswith("//")]


@pytest.mark.parametrize("gate_set", GATE_SETS)
@pytest.mark.parametrize("seed", range(4))
def test_output_compiled_again(gate_set: str, seed: int) -> None:
    device = Device.from_graph([(0, 1), (1, 2), (2, 3), (3, 4), (4, 0)], gate_set)
    result = gw.compile(random_circuit(4, 20, seed, measured=seed % 2 == 1), device)
    for _ in range(6):
        text = result.to_qasm()
        openqasm3.parse(text)
        again = gw.compile(read(text, natives=device.gate_set.natives), device)
        assert _counted(again.costs) <= _counted(result.costs)
        same = statements(again.to_qasm()) == statements(text)
        if same:
            assert again.verdict.initial == again.verdict.final == tuple(range(5))
            assert again.verdict.error_bound < 1e-10 and again.costs.swaps_inserted == 0
            assert np.array_equal(again.starts, result.starts)
            break
        # It is another one only where it is cheaper.
        assert _counted(again.costs) < _counted(result.costs)
        result = again
    assert same


def test_a_dear_native_circuit_is_made_cheaper() -> None:
    device = Device.from_graph([(0, 1)], "cz-virtual-z")
    circuit = gw.Builder(2).gate("cz", 0, 1).gate("cz", 0, 1).gate("sx", 0).gate("sx", 0).build()
    result = gw.compile(circuit, device)
    assert result.costs.two_qubit_gates == 0


def test_a_placement_that_is_asked_for_is_kept() -> None:
    device = Device.from_graph([(0, 1)], "cz-virtual-z")
    circuit = gw.Builder(2).gate("sx", 0).gate("cz", 0, 1).build()
    assert gw.compile(circuit, device).verdict.initial == (0, 1)
    assert gw.compile(circuit, device, placement=[1, 0]).verdict.initial == (1, 0)


def test_by_the_command_line_with_gates_that_the_library_lacks(
    tmp_path: Path, examples: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    device_text = 'name = "line"\ngate_set = "cross-resonance"\n[coupling]\nedges = [[0, 1], [1, 2], [2, 3]]\n'
    (tmp_path / "line.toml").write_text(device_text)
    (tmp_path / "a.qasm").write_text(
        'OPENQASM 3.0; include "stdgates.inc"; qubit[3] q; h q[0]; cx q[0], q[1]; cx q[1], q[2];'
    )
    device = str(tmp_path / "line.toml")
    for source, output in (("a", "b"), ("b", "c")):
        code = main(
            ["compile", str(tmp_path / f"{source}.qasm"), "--device", device, "-o", str(tmp_path / f"{output}.qasm")]
        )
        assert code == 0, capsys.readouterr().err
    first, second = ((tmp_path / f"{name}.qasm").read_text() for name in "bc")
    assert "zx90" in first and statements(first) == statements(second)


def test_a_gate_of_a_native_name_that_is_another_gate(tmp_path: Path) -> None:
    text = 'OPENQASM 3.0; include "stdgates.inc"; gate zx90 a, b { cz a, b; } qubit[2] q; zx90 q[0], q[1];'
    device = Device.from_graph([(0, 1)], "cross-resonance")
    natives = device.gate_set.natives
    assert [op.name for op in read(text, natives=natives, strict=False)] == ["cz"]
    with pytest.raises(gw.errors.QasmError, match="differs from the device's native gate"):
        read(text, natives=natives)
    with pytest.raises(gw.errors.QasmError, match="unknown gate"):
        read("OPENQASM 3.0; qubit[2] q; zx90 q[0], q[1];", natives=natives, strict=False)
