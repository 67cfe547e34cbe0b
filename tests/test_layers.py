"""The arrows between folders go one way; the contracts stand in pyproject.toml."""

import os
import subprocess
import sys
from pathlib import Path

ROOT = Path(__file__).parent.parent


def test_imports_go_one_way():
    command = [str(Path(sys.executable).parent / "lint-imports"), "--no-cache"]
    done = subprocess.run(
        command, cwd=ROOT, capture_output=True, text=True, env=os.environ | {"COLUMNS": "100"}
    )
    assert done.returncode == 0, done.stdout + done.stderr
