"""How many random circuits the long loops go through: an eighth of them, or all."""

from __future__ import annotations

from collections.abc import Callable

import pytest


def pytest_addoption(parser: pytest.Parser) -> None:
    """The option for the long way."""
    parser.addoption("--thorough", action="store_true", help="long loops over random cases in full, not an eighth")


@pytest.fixture
def share(request: pytest.FixtureRequest) -> Callable[[int], int]:
    """Of so many random circuits those that are looked at now."""
    thorough = request.config.getoption("--thorough")
    return lambda count: count if thorough else count // 8
