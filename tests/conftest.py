"""Fixtures shared by all tests."""

from __future__ import annotations

from pathlib import Path

import pytest

REPOSITORY = Path(__file__).resolve().parents[1]


@pytest.fixture(scope="session")
def repository() -> Path:
    """The root of the checkout."""
    return REPOSITORY


@pytest.fixture(scope="session")
def shared() -> Path:
    """The developers' folder of real fields and records beside the checkout; a user's clone lacks it and must still pass."""
    path = REPOSITORY.parent / "shared"
    if not (path / "fields").is_dir():
        pytest.skip("the developers' folder of real fields and records is not beside this checkout")
    return path
