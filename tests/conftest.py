"""Options for the whole suite."""

import os

import pytest
from hypothesis import settings

settings.register_profile("plain", deadline=None)
settings.register_profile("ci", deadline=None, derandomize=True)
settings.load_profile("ci" if os.environ.get("CI") else "plain")


def pytest_addoption(parser: pytest.Parser) -> None:
    parser.addoption("--slow", action="store_true", help="run the long tests too")


def pytest_collection_modifyitems(config: pytest.Config, items: list[pytest.Item]) -> None:
    if config.getoption("--slow"):
        return
    leave_out = [item for item in items if item.get_closest_marker("slow")]
    if leave_out:
        config.hook.pytest_deselected(items=leave_out)
        items[:] = [item for item in items if not item.get_closest_marker("slow")]
