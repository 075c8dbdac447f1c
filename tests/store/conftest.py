"""A small invented library with a row in every table that the public functions fill, and helpers to disturb it."""

from __future__ import annotations

import os
import shutil
import sqlite3
import subprocess
import sys
from collections.abc import Callable, Iterator
from contextlib import closing
from dataclasses import dataclass, replace
from datetime import UTC, datetime, timedelta
from hashlib import sha256
from itertools import count
from pathlib import Path
from typing import Any

import pytest

from speclib.model.assignment import Parity, Route
from speclib.model.compound import Compound, Structure
from speclib.model.entry import Role, Status
from speclib.model.finding import Finding, Severity
from speclib.model.results import CarryResult, Check, Difference, DonorVote, Estimate, Neighbour, Proposal, Query
from speclib.model.spectrum import Measurement, SourceFile, SourceSpectrum, Spectrum
from speclib.store.assignments import insert_manual
from speclib.store.cases import insert_case
from speclib.store.compounds import insert_compound
from speclib.store.library import Library
from speclib.store.spectra import get_spectrum, insert_findings, insert_source, insert_spectrum, sign
from speclib.store.writing import WriteTransaction

ANALYST = "A. Analyst"
HEXANONE = Structure("CCCCC(C)=O", "QQZOPKMRPOGIEB-UHFFFAOYSA-N", "QQZOPKMRPOGIEB", "C6H12O", 100, 100.088815)


@dataclass(frozen=True)
class Build:
    """Invented records and the calls that store them."""

    hexanone: Structure = HEXANONE
    analyst: str = ANALYST

    def found(
        self, peaks: dict[float, float], *, index: int = 1, measurement: Measurement | None = None, **raw: str
    ) -> SourceSpectrum:
        spectrum = Spectrum.of(list(peaks), list(peaks.values()), measurement=measurement)
        return SourceSpectrum("invented.txt", index, replace(spectrum, raw_fields=raw))

    def compound(self, transaction: WriteTransaction, name: str, **values: Any) -> int:
        return insert_compound(
            transaction,
            name=name,
            structure=values.pop("structure", None),
            formula=values.pop("formula", None),
            **values,
        )

    def spectrum(
        self, transaction: WriteTransaction, found: SourceSpectrum, compound_id: int | None, **values: Any
    ) -> int:
        return insert_spectrum(
            transaction,
            found,
            role=Role.REFERENCE if compound_id else Role.UNKNOWN,
            status=Status.PROVISIONAL if compound_id else None,
            compound_id=compound_id,
            source_id=values.get("source_id"),
            molecular_mass=values.get("molecular_mass"),
        )

    def assignment(self, transaction: WriteTransaction, spectrum_id: int, **values: Any) -> int:
        given: dict[str, Any] = {
            "structure_id": None,
            "peak": 0,
            "formula": "C2H3O",
            "neutral_loss": "C4H9",
            "mechanism": "alpha-cleavage",
            "parity": Parity.EE,
            "note": "by hand",
        }
        return insert_manual(transaction, spectrum_id=spectrum_id, **(given | values))

    def finding(self, reason: str = "invented", severity: Severity = Severity.DOUBT) -> Finding:
        return Finding("invented check", severity, reason, "invented source", (43.0, 58.5))

    def carry_result(self, compound: Compound, spectrum_id: int, donor_id: int, donor_uid: str) -> CarryResult:
        vote = DonorVote(donor_id, donor_uid, spectrum_id, compound.name, Route.SAME_ION, 0.75, 0.6)
        proposal = Proposal(
            peak=0,
            mz=43.0,
            formula="C2H3O",
            neutral_loss=None,
            mechanism="alpha-cleavage",
            parity=Parity.EE,
            route=Route.SAME_ION,
            donors=(vote,),
            checks=(Check("mass", True, "fits"), Check("formula", None, "not known")),
            confidence=0.5,
            confidence_basis="prior",
            reason="a donor has it",
        )
        refused = replace(
            proposal,
            peak=1,
            mz=58.0,
            formula="C3H6O",
            checks=(Check("parity", False, "odd", refuses=True),),
            refused_by="parity",
        )
        neighbour = Neighbour(
            1, spectrum_id, "uid", Status.CONFIRMED, compound, 0.75, 0.8, 5, 14, None, ("unknown has m/z 97",)
        )
        query = Query("unknown", None, "unknown.txt", 1, 3, 43.0, None, None)
        nothing = Estimate(None, "not known")
        return CarryResult(query, "state", nothing, nothing, (neighbour,), (proposal,), (refused,), Difference(14))

    def fill(self, library: Library) -> None:
        """Seven events: compounds, a reference with source and findings, sign-off, assignments, a case, edits."""
        with library.writing("compound add", analyst=ANALYST, reason="wanted") as transaction:
            first = self.compound(
                transaction,
                "2-hexanone",
                structure=self.hexanone,
                cas="591-78-6",
                synonyms=["MBK", "butyl methyl ketone"],
                classes=["ketone"],
            )
            self.compound(transaction, "2-hexanone oxime", formula="C6H13NO", parent_id=first, derivative="oxime")
        reference = self.found(
            {43: 1000.0, 58: 550.25, 100: 80.0},
            measurement=Measurement(mz_from=25, mz_to=300, phase="5% phenyl", method="screen", instrument="GC 1"),
            COMMENT="µg \u2028 \x00 ☃",
        )
        source = SourceFile("invented.txt", "0" * 64, "invented reader", (reference,))
        with library.writing("intake", analyst=ANALYST) as transaction:
            source_id = insert_source(transaction, source, "2026-01-01T00:00:00.000Z")
            spectrum_id = self.spectrum(transaction, reference, first, source_id=source_id, molecular_mass=100)
            insert_findings(transaction, spectrum_id, [self.finding(), self.finding("other", Severity.NOTE)])
            transaction.detail = {"spectra": [spectrum_id]}
        with library.writing("confirm", analyst=ANALYST) as transaction:
            entry = get_spectrum(transaction.connection, spectrum_id)
            sign(transaction, entry, Status.CONFIRMED, analyst=ANALYST, standard="lot 1")
        with library.writing("assign", analyst=ANALYST) as transaction:
            donor_id = self.assignment(transaction, spectrum_id, structure_id=1)
            self.assignment(transaction, spectrum_id, peak=1, formula="C3H6O", parity=Parity.OE)
        with library.writing("carry", analyst=ANALYST) as transaction:
            unknown_id = self.spectrum(transaction, self.found({43: 900.0, 58: 600.0, 114: 5.5}), None)
            held = get_spectrum(transaction.connection, spectrum_id)
            assert held.compound is not None
            uid = transaction.connection.execute("SELECT uid FROM assignments WHERE id = ?", (donor_id,)).fetchone()[0]
            result = self.carry_result(held.compound, spectrum_id, donor_id, uid)
            insert_case(transaction, result, spectrum_id=unknown_id, settings={"min_similarity": 0.3}, rules_version=1)
        with library.writing("review", analyst=ANALYST, reason="agreed") as transaction:
            proposal = transaction.connection.execute("SELECT id FROM assignments WHERE state = 'proposed'").fetchone()[
                0
            ]
            transaction.update("assignments", proposal, state="accepted", accepted_how="individually", expected_rev=1)


def _clock() -> Callable[[], datetime]:
    ticks = count()
    return lambda: datetime(2026, 1, 1, tzinfo=UTC) + timedelta(seconds=next(ticks))


@pytest.fixture(scope="session")
def build() -> Build:
    return Build()


@pytest.fixture(scope="session")
def template(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """An empty library file; copies of it are quicker than new ones."""
    path = tmp_path_factory.mktemp("store") / "empty.sqlite"
    Library.create(path, clock=_clock()).close()
    return path


@pytest.fixture(scope="session")
def filled_template(template: Path, build: Build) -> Path:
    path = template.with_name("filled.sqlite")
    shutil.copy(template, path)
    with Library(path, clock=_clock()) as library:
        build.fill(library)
    return path


@pytest.fixture
def path(template: Path, tmp_path: Path) -> Path:
    """An empty library file."""
    return Path(shutil.copy(template, tmp_path / "lab.sqlite"))


@pytest.fixture
def filled_path(filled_template: Path, tmp_path: Path) -> Path:
    """A library file with a few rows in most tables."""
    return Path(shutil.copy(filled_template, tmp_path / "lab.sqlite"))


@pytest.fixture
def library(path: Path) -> Iterator[Library]:
    with Library(path) as opened:
        yield opened


@pytest.fixture
def filled(filled_path: Path) -> Iterator[Library]:
    with Library(filled_path) as opened:
        yield opened


@pytest.fixture
def raw(filled_path: Path) -> Iterator[sqlite3.Connection]:
    """The filled library as any other program opens it: no pragma set."""
    with closing(sqlite3.connect(filled_path, isolation_level=None)) as connection:
        yield connection


def file_hash(path: Path) -> str:
    return sha256(path.read_bytes()).hexdigest()


@pytest.fixture(scope="session")
def digest() -> Callable[[Path], str]:
    return file_hash


Start = Callable[..., "subprocess.Popen[str]"]


@pytest.fixture
def start() -> Iterator[Start]:
    """Start Python code in another process; what still runs at the end is killed."""
    started: list[subprocess.Popen[str]] = []

    def run(code: str, *args: object, nobody: bool = False) -> subprocess.Popen[str]:
        # Somebody else may not be able to read the interpreter's files: everything is imported before.
        head = (
            "import os, sys, signal, resource, time\nfrom pathlib import Path\n"
            "import speclib.store.cases, encodings.idna\n"
            "from speclib.errors import *\nfrom speclib.store.library import Library\n"
            "from speclib.store.verifying import verify_library\n"
            "def say(text):\n    print(text, flush=True)\n"
            "path = Path(sys.argv[1])\n"
        )
        drop = "import sqlite_utils.migrations\n" if nobody else ""
        drop += "os.setgid(65534); os.setuid(65534)\n" if nobody and os.geteuid() == 0 else ""
        process = subprocess.Popen(
            [sys.executable, "-c", head + drop + code, *map(str, args)],
            stdout=subprocess.PIPE,
            stderr=subprocess.PIPE,
            text=True,
            env={**os.environ, "PYTHONPATH": os.pathsep.join(p for p in sys.path if p)},
        )
        started.append(process)
        return process

    yield run
    for process in started:
        process.kill()
        process.communicate()
