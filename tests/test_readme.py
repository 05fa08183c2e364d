"""What the README shows works."""

from __future__ import annotations

import re
import shlex
import subprocess
import sys
from pathlib import Path

import hushrail
from conftest import environment
from hushrail import demo

README = Path(__file__).parents[1] / "README.md"
TEXT = README.read_text(encoding="utf-8")


def test_the_example_runs(tmp_path: Path) -> None:
    (code,) = re.findall(r"```python\n(.*?)```", TEXT, re.DOTALL)
    done = subprocess.run(
        [sys.executable, "-c", code],
        cwd=tmp_path,
        env=environment(),
        capture_output=True,
        text=True,
        encoding="utf-8",
        check=False,
        timeout=120,
    )
    assert done.returncode == 0, done.stderr
    lines = done.stdout.splitlines()
    assert [line[:5] for line in lines[:3]] == ["0.0 V", "0.2 V", "0.4 V"]
    assert "gidl" in lines[2]
    assert "A=0 B=0 Y=1" in done.stdout


def test_the_commands_exist() -> None:
    from hushrail import command

    words = [shlex.split(line)[1] for line in TEXT.splitlines() if line.startswith("    hushrail ")]
    ours = "estimate cells compare count awake transitions keep optimum choose park"
    assert words == ours.split()
    listed = subprocess.run(
        [sys.executable, "-m", "hushrail", "--help"], capture_output=True, text=True, check=True
    ).stdout
    assert all(word in listed for word in words)
    assert callable(command.main)


def test_the_picture_and_the_paths_are_there() -> None:
    root = README.parent
    for path in [*re.findall(r"!\[.*?\]\((.*?)\)", TEXT), "python/hushrail/demo_data/study.toml"]:
        assert (root / path).is_file(), path
        assert path in TEXT


def test_the_number_of_cells_is_the_netlist_s() -> None:
    counts = hushrail.count(demo.DATA / "buoy_hub.v", top="buoy_hub")
    assert f"{counts.instances:,} cells" in TEXT
