"""The demo library is what its tables and the seed give, and its tables are right chemistry."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

SCRIPT = Path(__file__).parents[2] / "scripts" / "make_demo_library.py"


def test_the_demo_files_are_what_the_script_makes() -> None:
    done = subprocess.run([sys.executable, str(SCRIPT), "--check"], capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stdout + done.stderr


def test_every_demo_file_says_that_it_is_invented() -> None:
    folder = SCRIPT.parents[1] / "demo_library"
    files = [*(folder / "spectra").iterdir(), *(folder / "unknowns").iterdir()]
    assert files
    assert all("invented" in path.read_text(encoding="utf-8") for path in files)
