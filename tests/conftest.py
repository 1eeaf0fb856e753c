"""What all tests share: hypothesis draws the same cases every time, and lets a busy machine take its time.

The longest tests come first: one that began last would leave the other processor idle.
"""

import pytest
from hypothesis import settings

LONGEST = (
    "tests/test_house.py::test_the_tools_find_nothing[mypy]",
    "tests/test_readme.py::test_every_example_runs",
    "tests/test_simulated_registers.py",
)

settings.register_profile("repeatable", derandomize=True, deadline=None)
settings.load_profile("repeatable")


def pytest_collection_modifyitems(items: list[pytest.Item]) -> None:
    items.sort(key=lambda item: not item.nodeid.startswith(LONGEST))
