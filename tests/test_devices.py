"""Devices: look-ups against networkx and by brute force, the example files, and files that are wrong."""

from __future__ import annotations

import copy
import math
import os
import pickle
import subprocess
import sys
from pathlib import Path
from typing import Any

import networkx as nx
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from gatewright.devices import Device, GateSet, grid, line, read_any, read_device, read_gate_set
from gatewright.devices.reading import MAX_BYTES
from gatewright.devices.resources import shipped_gate_set_files
from gatewright.errors import DeviceError, GateSetError, GatewrightError

EXAMPLES = Path(__file__).parent.parent / "examples"

GOOD: dict[str, Any] = {
    "name": "five",
    "description": "invented",
    "gate_set": "cross-resonance",
    "coupling": {"qubits": 5, "edges": [[0, 1], [1, 2], [2, 3], [3, 4], [4, 0]], "directed": True},
    "out_of_service": {"qubits": [3], "edges": [[2, 1]]},
    "calibration": {
        "t1_ns": [50e3, 40e3, math.nan, 30e3, 20e3],
        "t2_ns": 40e3,
        "readout_error": 0.02,
        "gates": {
            "sx": {"error": [1e-3, 2e-3, math.nan, 0, 0.5]},
            "zx90": {"error": 0.01, "duration_ns": 300, "pairs": [{"qubits": [4, 0], "error": 0.03}]},
        },
    },
}


def with_changes(**changes: Any) -> dict[str, Any]:
    return {"name": "test", "gate_set": "cz-virtual-z", "coupling": {"shape": "line", "qubits": 3}, **changes}


def calibrated(**calibration: Any) -> dict[str, Any]:
    return with_changes(calibration=calibration)


def test_a_directed_device_with_parts_out_of_service() -> None:
    device = read_device(GOOD)
    assert device.pairs.tolist() == [[0, 1], [4, 0]] and device.pairs.dtype == np.int32
    assert device.edges.tolist() == [[0, 1], [0, 4]]
    assert device.removed_edges.tolist() == [[1, 2], [2, 3], [3, 4]]
    assert device.active.tolist() == [True, True, True, False, True]
    assert [part.tolist() for part in device.components()] == [[0, 1, 4], [2]]
    assert not device.is_connected
    assert nx.utils.graphs_equal(device.graph, nx.DiGraph({0: [1], 1: [], 2: [], 4: [0]}))
    assert device.allowed_qubits("sx").tolist() == [0, 1, 2, 4]
    assert device.allowed_pairs("zx90").tolist() == [[0, 1], [4, 0]]
    # Own value, value for all pairs, wrong order, out of service; then what the gate set says.
    assert device.errors("zx90", [[4, 0], [0, 1], [0, 4], [2, 3]]).tolist() == pytest.approx(
        [0.03, 0.01, math.nan, math.nan], nan_ok=True
    )
    assert device.duration("zx90", (4, 0)) == 300
    assert device.errors("sx", [[0], [1], [2], [3]]).tolist() == pytest.approx(
        [1e-3, 2e-3, math.nan, math.nan], nan_ok=True
    )
    assert device.error("x", [4]) == read_gate_set("cross-resonance").gates["x"].error
    assert device.error("rz", [1]) == device.duration("rz", [1]) == 0
    assert device.error("measure", [1]) == 0.02 and math.isnan(device.duration("measure", [1]))
    assert math.isnan(device.error("reset", [1])) and math.isnan(device.duration("reset", [1]))
    assert device.t2_ns.tolist() == [40e3] * 5 and math.isnan(device.t1_ns[2])


def test_a_symmetric_gate_may_be_used_in_both_orders_of_a_directed_coupling() -> None:
    device = Device.from_graph([(1, 0), (1, 2)], "cz-virtual-z", directed=True)
    assert device.pairs.tolist() == [[1, 0], [1, 2]]
    assert device.allowed_pairs("cz").tolist() == [[0, 1], [1, 0], [1, 2], [2, 1]]
    assert device.allows("cz", [[0, 1], [1, 0], [0, 2]]).tolist() == [True, True, False]
    rows = {"pairs": [{"qubits": [0, 1], "error": 0.25}]}
    coupling = {"edges": [[1, 0], [1, 2]], "directed": True}
    device = read_device(with_changes(coupling=coupling, calibration={"gates": {"cz": rows}}))
    assert device.errors("cz", [[0, 1], [1, 0], [2, 1]]).tolist() == [0.25, 0.25, 0.005]


def test_a_row_for_one_order_holds_for_the_other_unless_that_has_its_own() -> None:
    pairs = [
        {"qubits": [1, 0], "error": 0.1, "duration_ns": 100},
        {"qubits": [0, 1], "error": 0.2},
        {"qubits": [2, 1], "error": 0.3},
    ]
    data = with_changes(gate_set="cross-resonance", calibration={"gates": {"zx90": {"pairs": pairs}}})
    device = read_device(data)
    assert device.errors("zx90", [[1, 0], [0, 1], [2, 1], [1, 2]]).tolist() == [0.1, 0.2, 0.3, 0.3]
    assert device.durations("zx90", [[1, 0], [0, 1], [2, 1]]).tolist() == [100, 340, 340]


@given(st.data(), st.integers(1, 9), st.booleans())
@settings(max_examples=60, deadline=None)
def test_look_ups_agree_with_networkx(data: st.DataObject, n: int, directed: bool) -> None:
    pool = [[a, b] for a in range(n) for b in range(n) if a != b and (directed or a < b)]
    edges = data.draw(st.lists(st.sampled_from(pool), unique_by=tuple)) if pool else []
    gone_qubits = sorted(data.draw(st.sets(st.integers(0, n - 1), max_size=n - 1)))
    gone_edges = data.draw(st.lists(st.sampled_from(edges), unique_by=tuple, max_size=3)) if edges else []
    rows = data.draw(st.lists(st.sampled_from(edges), unique_by=tuple)) if edges else []
    values = {tuple(row): 0.5 + 0.001 * k for k, row in enumerate(rows)}
    device = read_device(
        {
            "name": "random",
            "gate_set": "cross-resonance",
            "coupling": {"qubits": n, "edges": edges, "directed": directed},
            "out_of_service": {"qubits": gone_qubits, "edges": gone_edges},
            "calibration": {"gates": {"zx90": {"pairs": [{"qubits": list(k), "error": v} for k, v in values.items()]}}},
        }
    )
    expected = nx.DiGraph()
    expected.add_nodes_from(range(n))
    expected.add_edges_from(edges)
    if not directed:
        expected.add_edges_from([edge[::-1] for edge in edges])
    for a, b in gone_edges:
        expected.remove_edges_from([(a, b), (b, a)])
    expected.remove_nodes_from(gone_qubits)
    assert nx.utils.graphs_equal(device.graph, expected)
    parts = sorted(sorted(part) for part in nx.weakly_connected_components(expected))
    assert [part.tolist() for part in device.components()] == parts
    assert device.is_connected == nx.is_weakly_connected(expected)
    everywhere = np.array([[a, b] for a in range(n) for b in range(n)])
    allowed = device.allows("zx90", everywhere)
    assert allowed.tolist() == [expected.has_edge(a, b) for a, b in everywhere.tolist()]
    for (a, b), known, error in zip(everywhere.tolist(), allowed, device.errors("zx90", everywhere), strict=True):
        if not known:
            assert math.isnan(error)
        else:
            assert error == values.get((a, b), values.get((b, a), 8e-3))


def test_devices_from_networkx_graphs() -> None:
    tuples = Device.from_graph(nx.grid_2d_graph(2, 3), "cz-virtual-z", name="grid")
    assert tuples.edges.tolist() == grid(2, 3).edges.tolist()
    backwards = nx.Graph([(2, 1), (1, 0)])
    assert Device.from_graph(backwards, "cz-virtual-z").edges.tolist() == [[0, 1], [1, 2]]
    one_way = Device.from_graph(nx.DiGraph([(1, 0), (1, 2)]), read_gate_set("cnot-textbook"))
    assert one_way.allowed_pairs("cx").tolist() == [[1, 0], [1, 2]]
    alone = Device.from_graph(nx.empty_graph(3), "cz-virtual-z")
    assert len(alone.components()) == 3 and alone.allowed_pairs("cz").shape == (0, 2)
    assert alone.allows("cz", [[0, 1]]).tolist() == [False]
    assert Device.from_graph(line(4), "cz-virtual-z", directed=True).pairs.tolist() == [[0, 1], [1, 2], [2, 3]]
    with pytest.raises(DeviceError, match="edge 0"):
        Device.from_graph(nx.Graph([(0, 0)]), "cz-virtual-z")


def test_wrong_questions_get_clear_answers() -> None:
    device = read_device(GOOD)
    with pytest.raises(DeviceError, match="'zx9' is not native here; did you mean 'zx90'\\? known: rz, sx, x, zx90"):
        device.errors("zx9", [[0, 1]])
    with pytest.raises(DeviceError, match="qubit index out of range; required: 0 to 4"):
        device.durations("zx90", [[0, 5]])
    with pytest.raises(DeviceError, match="required: \\(k, 2\\); found: \\(1, 1\\)"):
        device.errors("zx90", [[0]])
    with pytest.raises(DeviceError, match="another number of qubits"):
        device.allowed_pairs("sx")
    assert device.errors("zx90", np.zeros((0, 2), dtype=int)).shape == (0,)


def test_arrays_are_read_only_and_devices_are_pickled() -> None:
    device = read_device(GOOD)
    assert device.graph.number_of_edges() == 2
    for values in (device.pairs, device.edges, device.t1_ns, device.gate_errors["zx90"], device.active):
        with pytest.raises(ValueError, match="read-only"):
            values[0] = 0
    copied = pickle.loads(pickle.dumps(device))
    assert copied.errors("zx90", device.pairs).tolist() == device.errors("zx90", device.pairs).tolist()


# --- the example files


@pytest.mark.parametrize("path", sorted(EXAMPLES.glob("*.toml")), ids=lambda path: path.stem)
def test_examples_load_and_are_fully_calibrated(path: Path) -> None:
    device = read_device(path)
    assert device.is_connected and "invented" in device.description
    for name, native in device.gate_set.gates.items():
        one = native.gate.n_qubits == 1
        qubits = device.allowed_qubits(name)[:, None] if one else device.allowed_pairs(name)
        errors, durations = device.errors(name, qubits), device.durations(name, qubits)
        assert np.isfinite(errors).all() and np.isfinite(durations).all()
        assert native.virtual or (errors.min() > 0 and durations.min() > 0)


@pytest.mark.parametrize(
    ("name", "expected"),
    [
        ("grid-9", nx.grid_2d_graph(3, 3)),
        ("chain-11", nx.complete_graph(11)),
        ("grid-100", nx.grid_2d_graph(10, 10)),
    ],
)
def test_examples_have_the_graphs_they_are_named_after(name: str, expected: nx.Graph) -> None:
    assert nx.is_isomorphic(read_device(EXAMPLES / f"{name}.toml").graph.to_undirected(), expected)


def test_the_hexagons_are_a_honeycomb_without_a_corner_and_an_edge() -> None:
    device = read_device(str(EXAMPLES / "hexagons-27.toml"))
    assert device.n_qubits == 27 and device.removed_edges.tolist() == [[12, 13]]
    whole = device.graph.to_undirected()
    whole.add_edge(12, 13)
    # Corners of degree two next to one of degree three, left out one by one: one of them gives our patch.
    honeycomb = nx.hexagonal_lattice_graph(4, 2)
    assert any(nx.is_isomorphic(whole, nx.restricted_view(honeycomb, [site], [])) for site in honeycomb)
    errors = device.errors("zx90", device.pairs)
    assert errors.max() > 5 * errors.min()


# --- files that are wrong

WRONG: list[tuple[Any, str]] = [
    ([], "the outermost value is wrong; required: a table"),
    ({}, "'name' is missing"),
    ({1: 2}, "required: text as keys"),
    ({"name": "x"}, "'gate_set' is missing"),
    ({"name": "x", "gate_set": "cz-virtual-z"}, "'coupling' is missing"),
    ({**GOOD, "colour": 1}, "unknown key 'colour'; known: calibration, coupling"),
    (with_changes(gate_set="cz"), "unknown gate set 'cz'"),
    (with_changes(gate_set=3), "'gate_set' is wrong; required: text"),
    (with_changes(gate_set="no/such/file.toml"), "the file cannot be read; found: no such file or directory"),
    (with_changes(gate_set={"name": "x"}), "'gates' is missing"),
    (with_changes(coupling={"edges": [[0, 0]]}), "edge 0 (counted from 0) is wrong"),
    (with_changes(coupling={"edges": [[0, 1], [1, 0]]}), "an edge is given twice"),
    (with_changes(coupling={"qubits": 2, "edges": [[0, 2]]}), "required: two distinct qubits from 0 to 1"),
    (with_changes(coupling=[]), "'coupling' is wrong; required: a table"),
    (with_changes(out_of_service={"qubit": [1]}), "unknown key 'qubit' in 'out_of_service'; did you mean 'qubits'?"),
    (with_changes(out_of_service={"qubits": [3]}), "'out_of_service.qubits' is wrong; required: qubits from 0 to 2"),
    (with_changes(out_of_service={"qubits": [0, 1, 2]}), "every qubit is out of service"),
    (with_changes(out_of_service={"edges": [[0, 2]]}), "'out_of_service.edges[0]' is wrong; required: an edge"),
    (with_changes(out_of_service={"edges": [[0]]}), "required: two qubits from 0 to 2; found: [0]"),
    (with_changes(out_of_service={"edges": ["01"]}), "'out_of_service.edges[0]' is wrong; required: a list"),
    (calibrated(t1=3), "unknown key 't1' in 'calibration'; did you mean 't1_ns'?"),
    (calibrated(t1_ns=-3), "'calibration.t1_ns' is wrong; required: a number of at least 0.001"),
    (calibrated(t1_ns="3"), "found: '3'"),
    (calibrated(t1_ns=10**400), "'calibration.t1_ns' is wrong"),
    (calibrated(t1_ns=10**5000), "found: a value of type int"),
    (calibrated(t1_ns=[3, 3]), "required: one number, or 3 (one a qubit); found: 2 entries"),
    (calibrated(t1_ns=[3, 3, True]), "'calibration.t1_ns[2]' is wrong"),
    (calibrated(t1_ns=100, t2_ns=[200, math.nan, 201]), "T2 of qubit 2 is too long; required: at most twice T1"),
    (calibrated(readout_error=1.2), "'calibration.readout_error' is wrong; required: a number from 0 to 1"),
    (calibrated(readout_error=[0, 0, -0.1]), "'calibration.readout_error[2]' is wrong"),
    (calibrated(gates={"cx": {}}), "unknown key 'cx' in 'calibration.gates'; did you mean"),
    (calibrated(gates={"rz": {"error": 0.1}}), "'rz' is virtual"),
    (calibrated(gates={"sx": {"pairs": []}}), "unknown key 'pairs' in 'calibration.gates.sx'"),
    (calibrated(gates={"cz": {"error": [0.1, 0.1]}}), "required: one number for all pairs"),
    (calibrated(gates={"cz": {"error": math.inf}}), "found: inf"),
    (calibrated(gates={"cz": {"pairs": [{"error": 0.1}]}}), "'qubits' is missing in 'calibration.gates.cz.pairs[0]'"),
    (calibrated(gates={"cz": {"pairs": [{"qubits": [0, 1]}]}}), "required: 'error' or 'duration_ns'"),
    (
        calibrated(gates={"cz": {"pairs": [{"qubits": [0, 2], "error": 0}]}}),
        "a pair of the coupling that may carry 'cz'",
    ),
    (calibrated(gates={"cz": {"pairs": [{"qubits": [0, 9], "error": 0}]}}), "required: two qubits from 0 to 2"),
    (calibrated(gates={"cz": {"pairs": [{"qubits": q, "error": 0} for q in ([0, 1], [1, 0])]}}), "each pair once"),
    (calibrated(gates={"cz": {"pairs": [{"qubits": [0, 1], "eror": 0}]}}), "unknown key 'eror'"),
]


@pytest.mark.parametrize("case", range(len(WRONG)))
def test_wrong_content_is_refused_on_one_line(case: int) -> None:
    data, message = WRONG[case]
    with pytest.raises((DeviceError, GateSetError)) as caught:
        read_device(data)
    assert message in str(caught.value)
    assert "\n" not in str(caught.value)


FILES: list[tuple[bytes, str]] = [
    (b"", "bad.toml: the file is empty"),
    (b" \n\n", "bad.toml: the file is empty"),
    (b"name = 'x'\nqubits = \n", "bad.toml:2:10: not valid TOML"),
    (b"name = 'x'\n[coupling\n", "bad.toml:2:10: not valid TOML"),
    (b"name = 'x'\nedges = [1,", "bad.toml:2: not valid TOML"),
    (b"name = 'x'\nname = 'y'\n", "bad.toml:2:11: not valid TOML"),
    (b"name = 'x'\n\xff\xfe", "bad.toml:2: the file is not text"),
    (bytes(range(256)) * 10, "bad.toml:2: the file is not text"),
    (b"PK\x03\x04" + b"\0" * 100, "bad.toml:1:3: not valid TOML"),
    (np.random.default_rng(0).bytes(10_000_000), "bad.toml: the file is too large"),
    (b"a" * (MAX_BYTES + 1), f"required: at most {MAX_BYTES} bytes"),
    (b"a = " + b"[" * 500_000, "bad.toml: the brackets are nested too deeply"),
    (b"a = " + b"{a=" * 300_000, "bad.toml: the brackets are nested too deeply"),
    (b"\n" + b"a." * 500_000 + b"a = 1", "bad.toml:2: a dotted key has too many parts"),
    (b"a = " + b"9" * 500_000, "bad.toml: not valid TOML"),
    (b"[[coupling]]\n" * 10, "'name' is missing"),
]


@pytest.mark.parametrize("case", range(len(FILES)))
def test_wrong_files_are_refused_on_one_line(case: int, tmp_path: Path) -> None:
    content, message = FILES[case]
    path = tmp_path / "bad.toml"
    path.write_bytes(content)
    with pytest.raises(DeviceError) as caught:
        read_device(path)
    assert message in str(caught.value)
    assert "\n" not in str(caught.value)


def test_what_is_no_file_is_refused(tmp_path: Path) -> None:
    for path, message in [
        (tmp_path, "is a directory"),
        (tmp_path / "none.toml", "no such file or directory"),
        ("a\0b.toml", "embedded null byte"),
        ("x" * 5000, "file name too long"),
    ]:
        with pytest.raises(DeviceError, match=message):
            read_device(path)


def test_gate_sets_by_relative_path_and_in_the_file(tmp_path: Path) -> None:
    shipped = shipped_gate_set_files()["iswap-virtual-z"].read_text()
    (tmp_path / "sets").mkdir()
    (tmp_path / "sets" / "ours.toml").write_text("# ... our own\n" + shipped)
    (tmp_path / "a.toml").write_text(
        'name = "a"\ngate_set = "sets/ours.toml"\n[coupling]\nshape = "ring"\nqubits = 3\n'
    )
    assert read_device(tmp_path / "a.toml").gate_set.name == "iswap-virtual-z"
    inline = shipped.replace("[gates.", "[gate_set.gates.").replace("name = ", "[gate_set]\nname = ", 1)
    (tmp_path / "b.toml").write_text('name = "b"\ncoupling = {shape = "ring", qubits = 3}\n' + inline)
    assert list(read_device(tmp_path / "b.toml").gate_set.gates) == ["rz", "sx", "iswap"]
    (tmp_path / "sets" / "ours.toml").write_text("name = 'x'\ngates = 3\n")
    with pytest.raises(GateSetError, match="ours.toml: 'gates' is wrong"):
        read_device(tmp_path / "a.toml")


def test_either_kind_of_file_is_told_by_its_keys(tmp_path: Path) -> None:
    assert isinstance(read_any("cz-rz-rx"), GateSet)
    assert isinstance(read_any(shipped_gate_set_files()["cz-rz-rx"]), GateSet)
    assert isinstance(read_any(EXAMPLES / "grid-9.toml"), Device)
    (tmp_path / "x.toml").write_text("name = 'x'\n")
    with pytest.raises(DeviceError, match="x.toml: the file is neither a gate set nor a device; required: 'gates', or"):
        read_any(tmp_path / "x.toml")
    with pytest.raises(DeviceError, match="nosuch: the file cannot be read"):
        read_any("nosuch")


json_like = st.recursive(
    st.none() | st.booleans() | st.integers() | st.floats() | st.text(max_size=8) | st.sampled_from(["line", "cz"]),
    lambda inner: st.lists(inner, max_size=4) | st.dictionaries(st.text(max_size=6), inner, max_size=4),
    max_leaves=12,
)


def places(data: Any, path: tuple[Any, ...] = ()) -> list[tuple[Any, ...]]:
    found = [path] if path else []
    if isinstance(data, (dict, list)):
        for key in data if isinstance(data, dict) else range(len(data)):
            found += places(data[key], (*path, key))
    return found


@given(st.data())
@settings(max_examples=200, deadline=None)
def test_no_change_to_good_content_raises_anything_else(data: st.DataObject) -> None:
    changed = copy.deepcopy(GOOD)
    path = data.draw(st.sampled_from(places(GOOD)))
    inner: Any = changed
    for key in path[:-1]:
        inner = inner[key]
    inner[path[-1]] = data.draw(json_like)
    try:
        device = read_device(changed)
    except GatewrightError as problem:
        assert "\n" not in str(problem)
    else:
        assert device.n_qubits >= 1 and device.components()


@given(st.dictionaries(st.sampled_from(list(GOOD)) | st.text(max_size=5), json_like, max_size=6))
@settings(max_examples=100, deadline=None)
def test_no_content_raises_anything_else(data: dict[str, Any]) -> None:
    with pytest.raises(GatewrightError):
        read_device(data)


def test_a_large_device_is_read(tmp_path: Path) -> None:
    values = ", ".join(["71_234.5"] * 10_000)
    path = tmp_path / "large.toml"
    path.write_text(
        'name = "large"\ngate_set = "cz-virtual-z"\ncoupling = {shape = "grid", rows = 100, columns = 100}\n'
        f"[calibration]\nt1_ns = [{values}]\nt2_ns = [{values}]\n"
    )
    device = read_device(path)
    assert device.is_connected and len(device.edges) == 19_800


def test_importing_and_reading_need_no_networkx() -> None:
    code = (
        "import sys, gatewright.devices as d; d.Device.from_graph([(0, 1)], 'cz-virtual-z');"
        "sys.exit(any(name in sys.modules for name in ('networkx', 'scipy', 'sympy', 'numba')))"
    )
    environment = {**os.environ, "PYTHONPATH": os.pathsep.join(filter(None, sys.path))}
    assert subprocess.run([sys.executable, "-c", code], env=environment, check=False).returncode == 0
