"""Fixtures of the contract: `bout` opens what a test is parametrised with."""

from __future__ import annotations

from collections.abc import Iterator

import pytest

from tests.contract.opponents import OPPONENTS, Bout, Opponent, of_role


def pytest_generate_tests(metafunc: pytest.Metafunc) -> None:
    """Give `bout` every opponent, or those of the role that the test's module names in ROLE."""
    if "opponent" in metafunc.fixturenames:
        role = getattr(metafunc.cls, "ROLE", None) if metafunc.cls else None
        opponents = of_role(role) if role else OPPONENTS
        metafunc.parametrize("opponent", opponents, ids=[one.name for one in opponents])


@pytest.fixture
def bout(opponent: Opponent) -> Iterator[Bout]:
    """One driver facing one instrument, nothing said yet."""
    with opponent.bout() as one:
        yield one
