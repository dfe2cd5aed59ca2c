"""Options, markers and profiles for all tests."""

import pytest
from hypothesis import HealthCheck, settings

# Every run tries the same examples, so that a failure is a change and not luck.
# `--hypothesis-profile explore` looks for new ones.
settings.register_profile(
    "repeatable",
    deadline=None,
    derandomize=True,
    suppress_health_check=[HealthCheck.too_slow],
)
settings.register_profile("explore", settings.get_profile("repeatable"), derandomize=False)
settings.load_profile("repeatable")


def pytest_addoption(parser: pytest.Parser) -> None:
    """Add ``--slow``."""
    parser.addoption("--slow", action="store_true", help="also run tests marked as slow")


def pytest_configure(config: pytest.Config) -> None:
    """Register the marker, and let no warning pass unseen."""
    config.addinivalue_line("markers", "slow: takes minutes; runs only with --slow")
    config.addinivalue_line(
        "markers", "slurm: runs on a Slurm that it starts, where one is installed"
    )
    # In front, so that exceptions in pyproject.toml still count.
    config.getini("filterwarnings").insert(0, "error")


def pytest_collection_modifyitems(config: pytest.Config, items: list[pytest.Item]) -> None:
    """Skip slow tests unless they are asked for."""
    if config.getoption("--slow"):
        return
    skip = pytest.mark.skip(reason="slow: give --slow to run it")
    for item in items:
        if "slow" in item.keywords:
            item.add_marker(skip)
