"""What several test files share."""

from __future__ import annotations

import os
import subprocess
import sys
from collections.abc import Callable, Mapping
from pathlib import Path

import hushrail
import pytest
import small_process

Run = Callable[..., "subprocess.CompletedProcess[str]"]


@pytest.fixture
def small(tmp_path: Path) -> Path:
    """The study of the small invented process, in a folder of its own."""
    return small_process.write(tmp_path)


@pytest.fixture(scope="session")
def process(tmp_path_factory: pytest.TempPathFactory) -> hushrail.Process:
    """The small invented process."""
    return hushrail.Process.read(small_process.write(tmp_path_factory.mktemp("process")).parent / "cards.lib")


def environment(extra: Mapping[str, str] | None = None) -> dict[str, str]:
    """This process's environment, warnings as errors, output as UTF-8."""
    return os.environ | {"PYTHONWARNINGS": "error", "PYTHONUTF8": "1", "COLUMNS": "100"} | dict(extra or {})


@pytest.fixture
def run(tmp_path: Path) -> Run:
    """Run the command in the test's folder."""

    def run(*words: str | Path, env: Mapping[str, str] | None = None) -> subprocess.CompletedProcess[str]:
        return subprocess.run(
            [sys.executable, "-m", "hushrail", *map(str, words)],
            cwd=tmp_path,
            env=environment(env),
            capture_output=True,
            text=True,
            encoding="utf-8",
            timeout=120,
            check=False,
        )

    return run
