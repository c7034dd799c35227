"""Fourth stage: fuse the routed circuit, its inserted swaps included, into windows."""

from __future__ import annotations

from dataclasses import replace

from gatewright.stages.draft import Draft
from gatewright.stages.windows import fuse_circuit

__all__ = ["fuse"]


def fuse(draft: Draft) -> Draft:
    """Cut the circuit into windows of one or two wires; see `gatewright.stages.windows`."""
    return replace(draft, fused=fuse_circuit(draft.circuit))
