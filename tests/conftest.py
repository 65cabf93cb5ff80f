"""What holds for every test: reproducible examples, a clean environment, and the markers calc and wine."""

import os
import shutil

import hypothesis
import pytest

hypothesis.settings.register_profile(
    "steelyard", derandomize=True, deadline=None, max_examples=100, database=None
)
hypothesis.settings.load_profile("steelyard")

# Which program a marker needs. In continuous integration a missing program is a failure, never a skip.
PROGRAMS = {"calc": "soffice", "wine": "wine"}
IN_CI = os.environ.get("CI", "").lower() in {"1", "true", "yes"}


def pytest_configure() -> None:
    """Drop the one variable of the caller's environment that changes the bytes of a book."""
    os.environ.pop("SOURCE_DATE_EPOCH", None)


def pytest_collection_modifyitems(config: pytest.Config, items: list[pytest.Item]) -> None:
    """Leave the Wine tests, a set of their own, out of every run that does not ask for them by marker."""
    if "wine" in config.option.markexpr:
        return
    wine = [item for item in items if item.get_closest_marker("wine")]
    config.hook.pytest_deselected(items=wine)
    items[:] = [item for item in items if item not in wine]


def pytest_runtest_setup(item: pytest.Item) -> None:
    """Skip, or in continuous integration fail, a test whose program is not installed."""
    for marker, program in PROGRAMS.items():
        if item.get_closest_marker(marker) and shutil.which(program) is None:
            report = pytest.fail if IN_CI else pytest.skip
            report(f"needs the program {program}, which is not on the PATH")
