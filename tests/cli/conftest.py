"""The command line in process, on a small invented library with a set clock and counted uids."""

from __future__ import annotations

import json
from collections.abc import Callable
from dataclasses import dataclass
from datetime import UTC, datetime, timedelta
from pathlib import Path
from typing import Any

import pytest

from speclib.cli.main import run
from speclib.store.library import Library

SPECTRA: dict[str, dict[int, int]] = {
    "hexanone_1.txt": {27: 120, 29: 150, 41: 148, 43: 1000, 57: 170, 58: 550, 59: 20, 71: 55, 85: 70, 100: 80, 101: 6},
    "hexanone_2.txt": {27: 140, 29: 160, 41: 140, 43: 1000, 57: 160, 58: 570, 59: 22, 71: 50, 85: 66, 100: 90, 101: 7},
    "heptanone.txt": {27: 90, 29: 80, 41: 130, 43: 1000, 58: 600, 59: 40, 71: 140, 85: 20, 99: 30, 114: 60},
    "butylbenzene.txt": {39: 80, 51: 60, 65: 120, 77: 50, 91: 1000, 92: 560, 93: 45, 105: 90, 134: 250, 135: 28},
    "unknown.txt": {27: 100, 29: 100, 41: 150, 43: 1000, 57: 60, 58: 750, 59: 60, 71: 120, 85: 50, 113: 40, 128: 50},
    "stranger.txt": {95: 60, 142: 300, 178: 600, 180: 580, 213: 1000, 215: 990, 217: 320},
}
"""Invented intensities."""

MANIFEST = """file,compound,smiles,classes,status,standard,ri,phase,mz_from,mz_to,note
hexanone_1.txt,2-hexanone,CCCCC(C)=O,ketone;2-alkanone,confirmed,invented standard lot 1,790,5% phenyl,25,300,
hexanone_2.txt,2-hexanone,CCCCC(C)=O,ketone,provisional,,791,5% phenyl,25,300,second day
heptanone.txt,2-heptanone,CCCCCC(C)=O,ketone,confirmed,invented standard lot 2,890,5% phenyl,25,300,
butylbenzene.txt,butylbenzene,CCCCc1ccccc1,aromatic,provisional,,,,25,300,
"""

ASSIGNMENTS = """file,mz,formula,neutral_loss,mechanism,note
hexanone_1.txt,43,C2H3O,C4H9,alpha-cleavage,
hexanone_1.txt,58,C3H6O,C3H6,McLafferty rearrangement,enol of acetone
hexanone_1.txt,85,C5H9O,CH3,alpha-cleavage,
hexanone_1.txt,100,C6H12O,,molecular ion,
heptanone.txt,43,C2H3O,C5H11,alpha-cleavage,
heptanone.txt,58,C3H6O,C4H8,McLafferty rearrangement,
heptanone.txt,99,C6H11O,CH3,alpha-cleavage,
heptanone.txt,114,C7H14O,,molecular ion,
"""


@dataclass
class Outcome:
    """What a command did."""

    status: int
    out: str
    err: str

    @property
    def document(self) -> Any:
        return json.loads(self.out)


Speclib = Callable[..., Outcome]


@pytest.fixture
def speclib(tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]) -> Speclib:
    """Run `speclib ARGS` in an empty folder; time moves on by a second a look and uids count up."""
    monkeypatch.chdir(tmp_path)
    monkeypatch.delenv("SPECLIB_LIBRARY", raising=False)
    monkeypatch.delenv("SPECLIB_ANALYST", raising=False)
    looks = iter(range(1_000_000))
    made = iter(range(1, 1_000_000))

    def clock() -> datetime:
        return datetime(2026, 1, 1, 8, 0, tzinfo=UTC) + timedelta(seconds=next(looks))

    for function in (Library.__init__, Library.create.__func__):  # type: ignore[attr-defined]
        defaults: dict[str, Any] = function.__kwdefaults__ or {}
        monkeypatch.setitem(defaults, "clock", clock)
        monkeypatch.setitem(defaults, "new_uid", lambda: f"{next(made):032x}")

    def call(*args: object) -> Outcome:
        capsys.readouterr()
        status = run([str(a) for a in args])
        captured = capsys.readouterr()
        return Outcome(status, captured.out, captured.err)

    return call


@pytest.fixture
def files(tmp_path: Path) -> Path:
    """The invented spectra, manifest and assignments, as files in the working folder."""
    for name, peaks in SPECTRA.items():
        lines = ["# mass_accuracy: unit", "# mz_from: 25", "# mz_to: 300"]
        lines += [f"{mz}\t{height}" for mz, height in peaks.items()]
        (tmp_path / name).write_text("\n".join(lines) + "\n", encoding="utf-8")
    (tmp_path / "manifest.csv").write_text(MANIFEST, encoding="utf-8")
    (tmp_path / "assignments.csv").write_text(ASSIGNMENTS, encoding="utf-8")
    return tmp_path


@pytest.fixture
def library(speclib: Speclib, files: Path) -> Path:
    """A library of three compounds with assignments."""
    path = files / "lab.sqlite"
    for args in (
        ("init", "lab.sqlite"),
        ("-L", "lab.sqlite", "intake", "--manifest", "manifest.csv", "--by", "A. Analyst"),
        ("-L", "lab.sqlite", "assign", "--from", "assignments.csv", "--by", "A. Analyst"),
    ):
        outcome = speclib(*args)
        assert outcome.status == 0, outcome.err
    return path
