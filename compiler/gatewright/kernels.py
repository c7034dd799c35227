"""Compile the numerical kernels when that is needed, say so, and use two cores for it.

numba compiles a kernel once for an installation and keeps it in its cache. Loading what is in the cache takes a
fraction of a second; compiling all of it, many seconds. A second process then compiles half of the kernels while
this one does the others.
"""

from __future__ import annotations

import gc
import subprocess
import sys
from collections.abc import Callable
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from gatewright.devices import Device

__all__ = ["load_kernels"]

_OTHERS = "import gc; gc.disable(); import gatewright.mapping.search, gatewright.stages.windows"


def load_kernels(tell: Callable[[str], None], device: Device | None = None) -> None:
    """Load every module with kernels, compiling them if need be.

    Parameters
    ----------
    tell : callable
        Called with one line if kernels have to be compiled.
    device : Device, optional
        What is compiled for; the solver for entanglers without closed forms is loaded only if it needs that.
    """
    import numba.core.event

    event: Any = numba.core.event

    helpers: list[subprocess.Popen[bytes]] = []

    class Listener(event.Listener):  # type: ignore[misc]
        def on_start(self, _: Any) -> None:
            if not helpers:
                tell("compiling numerical kernels, once for this installation: some seconds")
                quiet = subprocess.DEVNULL
                helpers.append(subprocess.Popen([sys.executable, "-c", _OTHERS], stdout=quiet, stderr=quiet))

        def on_end(self, _: Any) -> None:
            pass

    listener = Listener()
    event.register("numba:compile", listener)
    collecting = gc.isenabled()
    # Compiling makes garbage by the million objects; looking for it all the while would take a quarter of the time.
    gc.disable()
    try:
        import gatewright.cost
        import gatewright.mapping._beam
        import gatewright.stages._kernels
        import gatewright.synthesis._kernels

        for helper in helpers:
            helper.wait()
        import gatewright.pipeline  # noqa: F401
        from gatewright.synthesis.native import native_set

        if device is not None:
            tools = native_set(device.gate_set).straight
            if len(tools) > 1 or not all(tool.entangler.closed for tool in tools):
                import gatewright.synthesis.interior  # noqa: F401
    finally:
        event.unregister("numba:compile", listener)
        if collecting:
            gc.enable()
        for helper in helpers:
            if helper.poll() is None:
                helper.kill()
