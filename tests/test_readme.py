"""What README.md tells people to type is what the checks type."""

from __future__ import annotations

import os
import shutil
import subprocess
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parents[1]
CHECKS = ROOT / ".ci" / "run"


def set_up_line() -> str:
    """The line of .ci/run that makes the environment and runs the tests."""
    lines = [line.strip() for line in CHECKS.read_text(encoding="utf-8").splitlines()]
    found = [line for line in lines if line.startswith("python3 -m venv")]
    assert len(found) == 1, f".ci/run has {len(found)} lines that start with 'python3 -m venv'; it should have one"
    return found[0]


def test_readme_gives_the_line_that_the_checks_run():
    readme = ROOT / "README.md"
    assert readme.exists(), "README.md is missing"
    lines = [line.strip() for line in readme.read_text(encoding="utf-8").splitlines()]
    assert set_up_line() in lines, f"README.md lacks this line, alone and word for word: {set_up_line()}"


def test_the_line_installs_what_the_tests_need_and_runs_them():
    assert set_up_line() == "python3 -m venv .venv && .venv/bin/pip install -e '.[test]' && .venv/bin/python -m pytest -n 2"


@pytest.mark.skipif(os.name == "nt", reason="a shell script")
def test_the_checks_can_be_started():
    assert os.access(CHECKS, os.X_OK)
    words = CHECKS.read_text(encoding="utf-8")
    assert words.startswith("#!/usr/bin/env bash\n")
    assert "set -euo pipefail" in words
    bash = shutil.which("bash")
    assert bash
    done = subprocess.run([bash, "-n", str(CHECKS)], capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stderr
