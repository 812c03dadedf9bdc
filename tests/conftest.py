"""Options and paths that all tests share."""

from __future__ import annotations

import pytest


def pytest_addoption(parser: pytest.Parser) -> None:
    """``-m long --pairs 100000 --seed 7`` for a long run on random nests."""
    parser.addoption("--pairs", type=int, default=2000, help="random pairs of nest and plan in a long run")
    parser.addoption("--seed", type=int, default=1, help="the first seed of a long run")
