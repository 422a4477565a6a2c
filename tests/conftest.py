"""Rules for every test: where the real sets are, and that nothing is skipped unseen."""

from __future__ import annotations

import os
from pathlib import Path

import pytest

SHARED = Path(__file__).resolve().parents[2] / "shared"
MISSING = "../shared is missing"

_skipped: list[str] = []


@pytest.fixture(scope="session")
def real() -> Path:
    """Folder of the real sets; the test is skipped, saying so, where they are not there."""
    if not (SHARED / "real").is_dir():
        pytest.skip(f"{MISSING}: the checks on real sets were not made")
    return SHARED / "real"


@pytest.fixture(autouse=True)
def _home(tmp_path_factory: pytest.TempPathFactory, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("ROADHEM_HOME", str(tmp_path_factory.getbasetemp() / "home"))


def pytest_runtest_logreport(report: pytest.TestReport) -> None:
    """Note tests skipped for any other reason than missing real sets."""
    if report.skipped and MISSING not in str(report.longrepr):
        _skipped.append(report.nodeid)


def pytest_sessionfinish(session: pytest.Session) -> None:
    """Fail the run in CI if a test was skipped."""
    if os.environ.get("CI") and _skipped and session.exitstatus == 0:
        print("\nSkipped, which fails the run in CI:", *_skipped, sep="\n  ")
        session.exitstatus = 1
