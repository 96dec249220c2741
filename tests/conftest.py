"""What several test files share: a small study, whole and finished."""

from __future__ import annotations

import shutil
from pathlib import Path

import pytest


@pytest.fixture
def small(tmp_path: Path) -> Path:
    """A small study folder of the test's own, nothing run yet."""
    from tests.small_study import make_small_study

    return make_small_study(tmp_path / "study")


@pytest.fixture(scope="session")
def finished_once(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """The small study with all six artifacts, made once; to be read, not written to."""
    from tests.small_study import make_small_study, run_steps

    folder = make_small_study(tmp_path_factory.mktemp("finished") / "study")
    run_steps(folder)
    return folder


@pytest.fixture
def finished(finished_once: Path, tmp_path: Path) -> Path:
    """A copy of the finished small study that a test may change."""
    return Path(shutil.copytree(finished_once, tmp_path / "study"))
