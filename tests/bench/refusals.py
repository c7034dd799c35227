"""Time how long the command line takes, as a whole process, to refuse each kind of bad input of the test suite.

python tests/bench/refusals.py
"""

from __future__ import annotations

import subprocess
import sys
import tempfile
import time
from pathlib import Path

HERE = Path(__file__).resolve().parent
sys.path.insert(0, str(HERE.parent))

from test_cli import BAD_DEVICES, BAD_GATE_SETS, BAD_MATRICES, BAD_PROGRAMS  # noqa: E402

EXAMPLES = HERE.parent.parent / "examples"


def seconds(*arguments: str, code: int) -> float:
    begun = time.perf_counter()
    done = subprocess.run([sys.executable, "-m", "gatewright", *arguments], capture_output=True)
    assert done.returncode == code, (arguments, done.stderr)
    return time.perf_counter() - begun


def main() -> None:
    device = str(EXAMPLES / "grid-9.toml")
    floor = min(seconds("--version", code=0) for _ in range(3))
    print(f"gatewright --version: {floor:.3f} s")
    cases = [(f"program, {k}", ".qasm", data, True) for k, (data, _) in BAD_PROGRAMS.items()]
    cases += [(f"matrix, {k}", suffix, data, True) for k, (suffix, data, _) in BAD_MATRICES.items()]
    cases += [(f"device, {k}", ".toml", text.encode(), False) for k, (text, _) in BAD_DEVICES.items()]
    cases += [(f"gate set, {k}", ".toml", text.encode(), False) for k, (text, _) in BAD_GATE_SETS.items()]
    times = []
    with tempfile.TemporaryDirectory() as folder:
        for name, suffix, data, is_input in cases:
            path = Path(folder) / f"bad{suffix}"
            path.write_bytes(data)
            if is_input:
                arguments = ["count", str(path), "--device", device]
            elif name.startswith("gate set"):
                arguments = ["describe", str(path)]
            else:
                arguments = ["count", str(EXAMPLES / "ghz-9.qasm"), "--device", str(path)]
            times.append((seconds(*arguments, code=1), name))
    for value, name in sorted(times, reverse=True):
        print(f"{value:7.3f} s  {value / floor:6.1f} × --version  {name}")


if __name__ == "__main__":
    main()
