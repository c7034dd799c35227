"""The README's examples run, and its generated parts are up to date."""

from __future__ import annotations

import doctest
import re
import shlex
import shutil
from pathlib import Path

import pytest

from gatewright.cli import main
from gatewright.devices import read_gate_set, shipped_gate_sets

ROOT = Path(__file__).resolve().parent.parent
README = ROOT / "README.md"
START, END = "<!-- gate sets -->\n", "<!-- end of gate sets -->"


def gate_set_table() -> str:
    """Write the table of shipped gate sets."""
    rows = ["| name | one-qubit gates | two-qubit gates | about |", "|---|---|---|---|"]
    for name in shipped_gate_sets():
        gate_set = read_gate_set(name)
        columns = []
        for gates in (gate_set.one_qubit, gate_set.two_qubit):
            shown = [
                f"`{native.gate.name}"
                + (f"({', '.join(native.parameters)})" if native.parameters else "")
                + ("`, virtual" if native.virtual else "`")
                for native in gates
            ]
            columns.append("; ".join(shown))
        about = " ".join(gate_set.description.split()).replace(" Durations and errors are invented.", "")
        rows.append(f"| `{name}` | {columns[0]} | {columns[1]} | {about} |")
    return "\n".join(rows) + "\n"


@pytest.fixture
def copy(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    shutil.copytree(ROOT / "examples", tmp_path / "examples")
    monkeypatch.chdir(tmp_path)
    return tmp_path


def test_python_examples(copy: Path) -> None:
    result = doctest.testfile(str(README), module_relative=False, optionflags=doctest.REPORT_NDIFF)
    assert result.attempted > 10
    assert result.failed == 0


def test_command_line_examples(copy: Path, capsys: pytest.CaptureFixture[str]) -> None:
    commands = re.findall(r"^gatewright ((?:compile|count|check|describe) .*)$", README.read_text(), re.MULTILINE)
    assert len(commands) >= 10
    for command in commands:
        assert main(shlex.split(command)) == 0, (command, capsys.readouterr().err)


def test_the_table_of_gate_sets_is_up_to_date() -> None:
    text = README.read_text()
    assert text[text.index(START) + len(START) : text.index(END)] == gate_set_table()


if __name__ == "__main__":
    # python tests/test_readme.py writes the table anew.
    old = README.read_text()
    README.write_text(old[: old.index(START) + len(START)] + gate_set_table() + old[old.index(END) :])
