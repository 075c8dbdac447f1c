"""Bad input: one clear sentence, exit 1, the library unchanged."""

from __future__ import annotations

import hashlib
import os
import sqlite3
from pathlib import Path
from typing import Any

import pytest

L = ("-L", "lab.sqlite")
BY = ("--by", "A. Analyst")


def digest(path: Path) -> str:
    return hashlib.sha256(path.read_bytes()).hexdigest()


def refused(outcome: Any, *words: str) -> None:
    """Exit 1, nothing on stdout, one line of reason on stderr that holds the words, no traceback."""
    assert outcome.status == 1, outcome
    lines = [line for line in outcome.err.splitlines() if line.strip()]
    assert len(lines) == 1, outcome.err
    assert lines[0].startswith("speclib: ")
    assert "Traceback" not in outcome.err
    for word in words:
        assert word in lines[0], lines[0]


FILES: dict[str, bytes] = {
    "empty.txt": b"",
    "blank.txt": b"\n  \n",
    "junk.bin": bytes(range(256)) * 8,
    "words.txt": b"this is a letter and no spectrum\nat all\n",
    "nan.txt": b"43\tnan\n58\t10\n",
    "inf.txt": b"43\tinf\n58\t10\n",
    "negative.txt": b"43\t-5\n58\t10\n",
    "negative_mz.txt": b"-43\t5\n58\t10\n",
    "twice.txt": b"43\t5\n43\t6\n",
    "one_column.txt": b"43\n58\n",
    "zeros.txt": b"43\t0\n58\t0\n",
    "entities.xml": b'<?xml version="1.0"?><!DOCTYPE x [<!ENTITY a "b">]><mzML>&a;</mzML>',
}


@pytest.mark.parametrize("name", FILES)
@pytest.mark.parametrize("command", ["search", "carry", "intake"])
def test_a_file_that_is_no_spectrum_is_named_and_changes_nothing(
    speclib: Any, library: Path, name: str, command: str
) -> None:
    Path(name).write_bytes(FILES[name])
    before = digest(library)
    outcome = speclib(*L, command, name, *(() if command == "search" else BY))
    if command == "intake":
        assert outcome.status == 1
        assert f"skipped {name}: " in outcome.err
        assert outcome.err.count("\n") == 1
    else:
        refused(outcome, name)
    assert digest(library) == before


def test_a_missing_file_and_a_folder_are_named(speclib: Any, library: Path) -> None:
    assert library.exists()
    Path("folder").mkdir()
    refused(speclib(*L, "search", "nowhere.txt"), "nowhere.txt", "does not exist")
    refused(speclib(*L, "search", "folder"), "folder")
    refused(speclib(*L, "intake", "--manifest", "nowhere.csv", *BY), "nowhere.csv", "does not exist")
    refused(speclib(*L, "assign", "--from", "folder", *BY), "folder")


@pytest.mark.parametrize(
    ("args", "words"),
    [
        (("compound", "show", "2-hexanon"), ("2-hexanon", "did you mean 2-hexanone")),
        (("compound", "show", "99"), ("99", "compound list")),
        (("search", "999"), ("spectrum 999",)),
        (("carry", "999", "--no-save"), ("spectrum 999",)),
        (("search", "unknown.txt", "--exclude-compound", "nobody"), ("nobody",)),
        (("search", "unknown.txt", "--index", "2"), ("unknown.txt", "no spectrum 2")),
        (("search", "unknown.txt", "--weights", "magic"), ("magic", "square-root")),
        (("search", "unknown.txt", "--mass", "heavy"), ("heavy", "molecular mass")),
        (("search", "unknown.txt", "--mass", "562.642"), ("562.642", "--formula")),
        (("search", "unknown.txt", "--formula", "C6H12Q"), ("C6H12Q",)),
        (("search", "unknown.txt", "--mass", "100", "--formula", "C8H16O"), ("100", "C8H16O", "disagree")),
        (("search", "unknown.txt", "--tolerance-da", "-1"), ("tolerance",)),
        (("case", "show", "7"), ("case 7",)),
        (("history", "--spectrum", "77"), ("spectrum 77",)),
        (("history", "--spectrum", "1", "--compound", "1"), ("one thing",)),
        (("confirm", "99", "--standard", "lot 9", *BY), ("spectrum 99",)),
        (("confirm", "1", "--standard", "lot 9", *BY), ("confirmed already",)),
        (("confirm", "2", "--standard", "  ", *BY), ("standard",)),
        (("review", "9", "--accept", "1", *BY), ("case 9",)),
        (("review", "1", *BY), ("--accept",)),
        (("assign", "1", "--mz", "44", "--formula", "C2H4O", "--mechanism", "x", *BY), ("no peak at m/z 44",)),
        (("assign", "99", "--mz", "44", "--formula", "C2H4O", "--mechanism", "x", *BY), ("spectrum 99",)),
        (("compound", "add", "twin", "--smiles", "CCCCC(=O)C", *BY), ("held already", "2-hexanone")),
        (("compound", "add", "2-Hexanone", "--smiles", "CCO", *BY), ("2-hexanone", "another name")),
        (("compound", "add", "odd", "--smiles", "C1CC", *BY), ("C1CC", "SMILES")),
        (("compound", "add", "odd", "--smiles", "CCO", "--cas", "64-17-6", *BY), ("64-17-6", "CAS")),
        (("compound", "add", "odd", "--smiles", "CCO", "--formula", "CH4", *BY), ("CH4", "C2H6O")),
        (("compound", "add", "odd", *BY), ("odd", "--smiles")),
        (("compound", "add", "", "--smiles", "CCO", *BY), ("called",)),
        (("compound", "add", "odd", "--smiles", "CCO.O", *BY), ("several components",)),
        (("compound", "add", "odd", "--smiles", "CCO", "--derivative-of", "nobody", *BY), ("nobody",)),
    ],
)
def test_a_value_that_cannot_be_used_is_said_in_one_sentence(
    speclib: Any, library: Path, args: tuple[str, ...], words: tuple[str, ...]
) -> None:
    before = digest(library)
    refused(speclib(*L, *args), *words)
    assert digest(library) == before


@pytest.mark.parametrize(
    "args",
    [
        ("compound", "add", "ethanol", "--smiles", "CCO"),
        ("intake", "unknown.txt"),
        ("intake", "--manifest", "manifest.csv"),
        ("assign", "1", "--mz", "29", "--formula", "C2H5", "--mechanism", "x"),
        ("assign", "--from", "assignments.csv"),
        ("confirm", "2", "--standard", "lot 9"),
        ("carry", "unknown.txt"),
        ("review", "1", "--accept", "1"),
    ],
)
def test_a_change_that_nobody_signs_is_refused_and_a_signature_never_guessed(
    speclib: Any, library: Path, args: tuple[str, ...], monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setenv("USER", "somebody")
    before = digest(library)
    refused(speclib(*L, *args), "--by NAME")
    refused(speclib(*L, *args, "--by", "  "), "--by NAME")
    assert digest(library) == before


def test_wrong_usage_is_exit_2(speclib: Any, library: Path) -> None:
    assert library.exists()
    for args in (
        ("search",),
        ("nonsense",),
        (*L, "search", "unknown.txt", "--measure", "guess"),
        (*L, "intake", *BY),
        (*L, "intake", "unknown.txt", "--manifest", "manifest.csv", *BY),
        (*L, "assign", *BY),
        (*L, "assign", "1", *BY),
        (*L, "history", "--limit", "0"),
        ("verify",),
        (*L, "search", "unknown.txt", "--tolerance-da", "1", "--tolerance-ppm", "5"),
    ):
        outcome = speclib(*args)
        assert outcome.status == 2, (args, outcome)
        assert "Traceback" not in outcome.err


@pytest.mark.parametrize("content", [b"", b"plain text", b"SQLite format 3\x00" + b"\x13" * 600])
def test_a_file_that_is_not_a_library_is_left_alone(speclib: Any, tmp_path: Path, content: bytes) -> None:
    path = tmp_path / "other.sqlite"
    path.write_bytes(content)
    refused(speclib("-L", "other.sqlite", "verify"), "other.sqlite")
    refused(speclib("init", "other.sqlite"), "exists already")
    assert path.read_bytes() == content


def test_another_programs_database_is_left_alone(speclib: Any, tmp_path: Path) -> None:
    path = tmp_path / "other.sqlite"
    with sqlite3.connect(path) as connection:
        connection.execute("CREATE TABLE t (x)")
    connection.close()
    before = digest(path)
    refused(speclib("-L", "other.sqlite", "compound", "list"), "not a speclib library")
    assert digest(path) == before


def test_a_library_from_a_newer_version_is_refused_and_untouched(speclib: Any, library: Path) -> None:
    with sqlite3.connect(library) as connection:
        connection.execute("PRAGMA user_version = 99")
    connection.close()
    before = digest(library)
    refused(speclib(*L, "compound", "list"), "newer", "schema 99")
    assert digest(library) == before


def test_two_writers_at_once_the_second_is_told(speclib: Any, library: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    from speclib.store.library import Library

    monkeypatch.setitem(Library.__init__.__kwdefaults__ or {}, "timeout_s", 0.05)
    other = sqlite3.connect(library, isolation_level=None)
    other.execute("BEGIN IMMEDIATE")
    refused(speclib(*L, "confirm", "2", "--standard", "lot 9", *BY), "another process", "try again")
    assert speclib(*L, "compound", "list").status == 0
    other.execute("ROLLBACK")
    other.close()
    assert speclib(*L, "confirm", "2", "--standard", "lot 9", *BY).status == 0


@pytest.mark.skipif(os.name == "nt", reason="folder permissions are not POSIX here")
def test_a_read_only_folder_can_be_read_and_not_written(library: Path) -> None:
    import subprocess
    import sys

    # Root passes every permission bit, so the commands run as another user where the tests run as root. That user may
    # not be able to read the interpreter's own files: everything is imported before.
    warm = "import importlib, os, pkgutil, sys, rich.table, speclib; from speclib.cli.main import main;" + (
        "[importlib.import_module(m.name) for m in pkgutil.walk_packages(speclib.__path__, 'speclib.')];"
    )
    drop = "os.setgid(65534); os.setuid(65534);" if os.geteuid() == 0 else ""
    for folder in (library.parent, *library.parents[1:3]):
        folder.chmod(0o555 if folder == library.parent else 0o755)
    library.chmod(0o444)

    def speclib_as_nobody(*args: str) -> subprocess.CompletedProcess[str]:
        program = f"{warm}{drop}main(sys.argv[1:])"
        return subprocess.run(
            [sys.executable, "-c", program, *args],
            capture_output=True,
            text=True,
            cwd=library.parent,
            env={**os.environ, "PYTHONPATH": os.pathsep.join(p for p in sys.path if p)},
            check=False,
        )

    try:
        reading = speclib_as_nobody(*L, "compound", "list")
        assert reading.returncode == 0, reading.stderr
        writing = speclib_as_nobody(*L, "confirm", "2", "--standard", "lot 9", *BY)
        assert (writing.returncode, writing.stderr.count("\n")) == (1, 1), writing.stderr
        assert "cannot be written" in writing.stderr
        making = speclib_as_nobody("init", "new.sqlite")
        assert (making.returncode, making.stderr.count("\n")) == (1, 1), making.stderr
    finally:
        library.parent.chmod(0o755)
        library.chmod(0o644)
    assert sorted(p.name for p in library.parent.iterdir() if "sqlite" in p.name) == ["lab.sqlite"]


def test_control_characters_from_a_file_do_not_reach_the_terminal(speclib: Any, library: Path) -> None:
    assert library.exists()
    name = "evil\x1b[31m.txt"
    Path(name).write_text("43\t1\n58\t2\n85\t1\n", encoding="utf-8")
    outcome = speclib(*L, "intake", name, *BY)
    assert outcome.status == 0
    assert "\x1b" not in outcome.out + outcome.err
