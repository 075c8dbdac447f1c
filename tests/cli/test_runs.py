"""Spectra taken from chromatographic runs. The run is invented and written by scipy."""

from __future__ import annotations

import importlib.util
import sys
from pathlib import Path
from typing import Any

import pytest

L = ("-L", "lab.sqlite")


@pytest.fixture
def run_file(tmp_path: Path) -> Path:
    """The invented run of the reader's own tests."""
    source = Path(__file__).parents[1] / "formats" / "test_andi.py"
    spec = importlib.util.spec_from_file_location("andi_run_builder", source)
    assert spec is not None
    assert spec.loader is not None
    module = importlib.util.module_from_spec(spec)
    sys.modules[spec.name] = module
    spec.loader.exec_module(module)
    path = tmp_path / "run.cdf"
    module.write_run(path)
    return path


def test_a_run_is_listed_and_searched_at_a_time(speclib: Any, library: Path, run_file: Path) -> None:
    assert library.exists()
    shown = speclib("run", "show", run_file.name, "--json")
    assert shown.status == 0, shown.err
    scans = shown.document["scans"]
    top = max(scans, key=lambda s: s["total_ion_current"])
    assert shown.document["peaks"]
    assert speclib("run", "show", run_file.name).status == 0
    at = ("--at", top["time_min"])
    found = speclib(*L, "search", run_file.name, *at, "--min-peaks", "1", "--json")
    assert found.status == 0, found.err
    assert found.document["query"]["mz_from"] is not None
    taken = speclib(*L, "intake", run_file.name, *at, "--by", "A", "--json")
    assert taken.status == 0, taken.err
    assert speclib(*L, "verify").status == 0


def test_a_run_without_a_time_and_a_time_without_a_run_are_said(speclib: Any, library: Path, run_file: Path) -> None:
    assert library.exists()
    for args, words in (
        (("search", run_file.name), "--at MINUTES"),
        (("search", "unknown.txt", "--at", "4"), "no chromatographic run"),
        (("search", run_file.name, "--at", "9999"), "min"),
        (("search", run_file.name, "--at", "1", "--background", "4-5"), "4.10..4.25"),
        (("search", run_file.name, "--width", "1"), "--at"),
    ):
        outcome = speclib(*L, *args)
        assert outcome.status == 1, args
        assert words in outcome.err, outcome.err
    assert "no ANDI-MS run" in speclib("run", "show", "unknown.txt").err
    assert "does not exist" in speclib("run", "show", "nowhere.cdf").err
