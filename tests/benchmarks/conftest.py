"""Benchmarks run only when asked for: `pytest tests/benchmarks --benchmark-enable -s`."""

import pytest


def pytest_collection_modifyitems(config: pytest.Config, items: list[pytest.Item]) -> None:
    if not config.getoption("benchmark_disable", default=True) or config.getoption("benchmark_enable", default=False):
        return
    here = [item for item in items if "benchmarks" in item.path.parts]
    if here:
        config.hook.pytest_deselected(items=here)
        items[:] = [item for item in items if item not in here]
