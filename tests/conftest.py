"""Shared by all tests: a clean environment, and the shipped examples."""

from __future__ import annotations

import os

# Before NumPy is loaded: with a test process on every core, threads of linear algebra only get in each other's way.
os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")

from pathlib import Path  # noqa: E402

import pytest  # noqa: E402
from hypothesis import HealthCheck, settings

EXAMPLES = Path(__file__).resolve().parent.parent / "examples"

settings.register_profile("suite", deadline=None, suppress_health_check=[HealthCheck.too_slow], print_blob=True)
settings.load_profile("suite")


@pytest.fixture(autouse=True)
def clean_environment(monkeypatch: pytest.MonkeyPatch) -> None:
    for name in list(os.environ):
        if name.startswith("GATEWRIGHT_") or name in ("NO_COLOR", "FORCE_COLOR", "COLUMNS"):
            monkeypatch.delenv(name)


@pytest.fixture(scope="session")
def examples() -> Path:
    return EXAMPLES
