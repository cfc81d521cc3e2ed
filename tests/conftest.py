"""Shared by every test: the data folder beside the checkout, seeded chance, and no silent skips in CI."""

from __future__ import annotations

import os
from pathlib import Path

import numpy as np
import pytest

ROOT = Path(__file__).resolve().parents[1]
SHARED = ROOT.parent / "shared"


def skip_or_fail(reason: str) -> None:
    """Skip with a reason; under CI=true a missing server, browser or data folder is a failure."""
    if os.environ.get("CI") == "true":
        pytest.fail(f"may not be skipped in CI: {reason}")
    pytest.skip(reason)


@pytest.fixture
def measured() -> Path:
    """The folder of measured sweeps of real parts, read in place and never copied."""
    folder = SHARED / "measured"
    if not folder.is_dir():
        skip_or_fail("the folder of measured sweeps (../shared/measured) is not beside this checkout")
    return folder


@pytest.fixture
def rng(request: pytest.FixtureRequest) -> np.random.Generator:
    """A generator seeded by the test's own name: the same in any order and in any process."""
    return np.random.default_rng(list(request.node.nodeid.encode()))
