"""Shared set-up of the tests."""

from __future__ import annotations

import os
from pathlib import Path

import pytest
from hypothesis import settings

os.environ.setdefault("MPLBACKEND", "Agg")

TABLES = "LADDERFIT_TABLES"
IN_CI = os.environ.get("CI") == "true"

# No deadlines on a shared machine; the same examples on every run of the integration.
settings.register_profile("ladderfit", deadline=None, derandomize=IN_CI)
settings.load_profile("ladderfit")


# Files of few long tests: begun first, so that two workers end together, and in an
# order in which no two browsers are likely to be open at once.
LONG = (
    "test_browser_own_tables",
    "test_runs",
    "test_browser_runs",
    "test_browser_workbench",
    "test_quality",
    "test_launcher",
    "test_browser_readers",
    "test_faults",
    "test_workbench_board",
    "test_parallax_coverage",
    "test_cli",
    "test_published_review",
    "test_fuzz",
)


def pytest_collection_modifyitems(items: list[pytest.Item]) -> None:
    """Long files first; long tests and those of absent published tables are skipped."""
    place = {name: number for number, name in enumerate(LONG)}
    items.sort(key=lambda item: place.get(item.path.stem, len(place)))
    brief = pytest.mark.skip(reason="long: runs with LADDERFIT_FULL=1")
    if os.environ.get("LADDERFIT_FULL") != "1":
        for item in items:
            if item.get_closest_marker("long") is not None:
                item.add_marker(brief)
    folder = os.environ.get(TABLES)
    if folder is not None:
        if not Path(folder).is_dir():
            raise pytest.UsageError(f"{TABLES} names {folder}, which is no folder")
        return
    absent = pytest.mark.skip(reason=f"published tables absent: set {TABLES} to their folder")
    for item in items:
        if item.get_closest_marker("published") is not None:
            item.add_marker(absent)


@pytest.fixture(scope="session")
def published_tables() -> Path:
    """The folder of published tables, for tests marked ``published``."""
    return Path(os.environ[TABLES])


@pytest.fixture(scope="session")
def in_full() -> bool:
    """Whether tests marked ``full`` run at full length (LADDERFIT_FULL=1)."""
    return os.environ.get("LADDERFIT_FULL") == "1"


@pytest.fixture(scope="session")
def repository() -> Path:
    """The root of the checkout."""
    return Path(__file__).resolve().parent.parent
