"""The import contract of pyproject.toml holds, and each of its rules would notice a room that breaks it."""

from __future__ import annotations

import shutil
import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[1]
LINT = "from importlinter.cli import lint_imports_command; lint_imports_command()"


@pytest.fixture
def copy(tmp_path: Path) -> Path:
    shutil.copytree(ROOT / "rtid", tmp_path / "rtid", ignore=shutil.ignore_patterns("__pycache__"))
    shutil.copy(ROOT / "pyproject.toml", tmp_path)
    return tmp_path


def lint(folder: Path) -> subprocess.CompletedProcess[str]:
    command = [sys.executable, "-c", LINT, "--no-cache"]
    return subprocess.run(command, cwd=folder, capture_output=True, text=True, timeout=120)


def test_the_rooms_keep_the_contract() -> None:
    done = lint(ROOT)
    assert done.returncode == 0, done.stdout
    assert " 0 broken" in done.stdout


@pytest.mark.parametrize(
    ("file", "line", "rule"),
    [
        ("identify/__init__.py", "import time", "The pure rooms know no clock"),
        ("loop.py", "import yaml", "The pure rooms know no clock"),
        ("knowledge.py", "import rtid.loop", "Nothing runs back"),
        ("kept.py", "import rtid.judge", "The ground floor imports no room"),
        ("identify/__init__.py", "import rtid.rows", "The estimation mathematics and the simulated plants stand alone"),
        ("judge/__init__.py", "import rtid.model", "Nothing runs back"),
        ("intake/__init__.py", "import rtid.publish", "Nothing runs back"),
        ("publish/__init__.py", "import rtid.judge", "The intake and the publishing know nothing of the mathematics"),
        ("settings.py", "import rtid.errors", "The shared records know nothing of each other"),
        ("report.py", "import rtid.publish", "The ground floor imports no room"),
        ("service/__init__.py", "import rtid.plants", "Nothing that watches a real plant knows the simulated ones"),
    ],
)
def test_a_forbidden_import_is_found(copy: Path, file: str, line: str, rule: str) -> None:
    with (copy / "rtid" / file).open("a") as module:
        module.write(f"\n{line}\n")
    done = lint(copy)
    broken = [said for said in done.stdout.splitlines() if said.endswith("BROKEN")]
    assert done.returncode == 1
    assert any(said.startswith(rule) for said in broken), done.stdout
