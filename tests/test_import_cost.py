"""What loading speclib may load: nothing from outside for the package, only click for `--help`.

Run in fresh processes.
"""

from __future__ import annotations

import json
import os
import subprocess
import sys
from pathlib import Path

import pytest

import speclib
from speclib.cli.main import COMMANDS

ALLOWED_FOR_HELP = {"click", "colorama"}  # colorama: click on Windows
PROBE = """
import json, sys
before = set(sys.modules)
{statement}
names = {{name.partition(".")[0] for name in set(sys.modules) - before}}
print(json.dumps(sorted(names - set(sys.stdlib_module_names) - {{"speclib"}})), file=sys.__stderr__)
"""


def loaded_from_outside(statement: str) -> set[str]:
    """Top-level names of third-party modules that a fresh interpreter loads by a statement."""
    environment = {key: value for key, value in os.environ.items() if not key.startswith(("SPECLIB_", "COVERAGE_"))}
    environment["PYTHONPATH"] = str(Path(speclib.__file__).parents[1])
    done = subprocess.run(
        [sys.executable, "-c", PROBE.format(statement=statement)],
        capture_output=True,
        text=True,
        env=environment,
        timeout=60,
        check=False,
    )
    assert done.returncode == 0, done.stderr
    return set(json.loads(done.stderr.strip().splitlines()[-1]))


def test_importing_the_package_loads_nothing_from_outside() -> None:
    assert loaded_from_outside("import speclib") == set()


@pytest.mark.parametrize("module", ["errors", "units", "clock", "progress"])
def test_the_base_loads_nothing_from_outside(module: str) -> None:
    assert loaded_from_outside(f"import speclib.{module}") == set()


def test_the_command_line_loads_only_click() -> None:
    assert loaded_from_outside("import speclib.cli.main") <= ALLOWED_FOR_HELP


@pytest.mark.parametrize(
    "arguments", [["--help"], ["--version"], *([name, "--help"] for name in COMMANDS)], ids=" ".join
)
def test_help_loads_only_click(arguments: list[str]) -> None:
    statement = f"from speclib.cli.main import run; status = run({arguments!r}); assert status == 0, status"
    assert loaded_from_outside(statement) <= ALLOWED_FOR_HELP


def test_a_heavy_import_would_be_seen() -> None:
    assert "numpy" in loaded_from_outside("import speclib.model.spectrum")


@pytest.mark.parametrize(
    "module",
    [
        "speclib.chemistry.molecule",
        "speclib.chemistry.unit_mass",
        "speclib.similarity.scores",
        "speclib.cleaning.nominal",
        "speclib.search.exact",
        "speclib.store.library",
        "speclib.workflows.search",
        "speclib.workflows.intake",
    ],
)
def test_no_module_loads_a_heavy_package_with_it(module: str) -> None:
    assert loaded_from_outside(f"import {module}") <= {"numpy"}
