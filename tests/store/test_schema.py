# ruff: noqa: PT012 (what is done before it raises is the point of these blocks)
"""The tables hold what they promise, also against a program that knows nothing of speclib."""

from __future__ import annotations

import sqlite3
from collections.abc import Iterator
from contextlib import closing
from pathlib import Path
from typing import Any

import pytest

from speclib.store.library import Library
from speclib.store.schema import TABLES, trigger_names

COLUMNS: dict[str, str] = {
    "library": "uid created four_eyes",
    "events": "library_uid seq at analyst action reason detail previous_hash hash",
    "event_changes": "table_name row_uid event_id before after",
    "structures": "smiles inchikey skeleton formula nominal_mass exact_mass",
    "compounds": "uid name cas structure_id parent_id derivative rev",
    "compound_names": "compound_id kind name",
    "sources": "file_name sha256 reader read_at",
    "phases": "name chemistry",
    "methods": "uid name instrument column_name phase_id programme rev",
    "ladders": "uid method_id valid_from kind rev",
    "ladder_points": "ladder_id carbon_number time_s",
    "spectra": "uid role status compound_id source_id source_index mz intensity peak_count content_hash mass_accuracy "
    "mz_from mz_to molecular_mass retention_time_s retention_index phase_id method_id ladder_id acquisition raw_fields "
    "rev",
    "consensus_members": "consensus_id spectrum_id used",
    "sign_offs": "spectrum_id decision analyst standard reason imported event_id",
    "findings": "spectrum_id check_name severity peaks reason source fingerprint answer answered_event",
    "assignments": "uid spectrum_id peak case_id structure_id formula neutral_loss mechanism parity atoms steps "
    "isotope_of origin state accepted_how route confidence calibration_id rules_version checks reason superseded_by "
    "rev",
    "lineage": "assignment_id donor_uid donor_id route weight",
    "cases": "uid spectrum_id status resolution identification_level settings library_state rev",
    "case_neighbours": "case_id rank spectrum_id similarity probability detail",
    "flags": "subject_uid cause_uid reason opened_event closed_event",
    "releases": "number uid manifest_hash chain_head event_id",
    "release_rows": "release_id kind row_uid record record_hash",
    "calibrations": "kind measure method_version library_state settings model reliability brier trials compounds "
    "event_id",
    "tune_checks": "instrument at criteria verdict detail event_id",
    "changes": "generation spectrum_id operation",
}
"""The tables of the reference `store.md` (`column` is spelled `column_name`, because it is a word of SQL)."""

MZ = b"\x00" * 16
ROWS: dict[str, dict[str, Any]] = {
    "events": {
        "library_uid": "o",
        "seq": 1,
        "at": "t",
        "action": "a",
        "detail": "{}",
        "previous_hash": "0",
        "hash": "1",
    },
    "event_changes": {"event_id": 1, "table_name": "phases", "row_uid": "x", "after": "{}"},
    "structures": {"smiles": "C", "formula": "CH4", "nominal_mass": 16, "exact_mass": 16.03},
    "compounds": {"uid": "c", "name": "methane", "structure_id": 1},
    "compound_names": {"compound_id": 1, "kind": "synonym", "name": "marsh gas"},
    "sources": {"file_name": "f", "sha256": "0" * 64, "reader": "r", "read_at": "t"},
    "phases": {"name": "p", "chemistry": "other"},
    "methods": {"uid": "m", "name": "screen", "phase_id": 1},
    "ladders": {"uid": "l", "method_id": 1, "valid_from": "t", "kind": "n-alkanes"},
    "ladder_points": {"ladder_id": 1, "carbon_number": 10, "time_s": 60.5},
    "spectra": {
        "uid": "s",
        "role": "reference",
        "status": "provisional",
        "compound_id": 1,
        "mz": MZ,
        "intensity": MZ,
        "peak_count": 2,
        "content_hash": "0" * 64,
        "mass_accuracy": "unit",
        "acquisition": "{}",
        "raw_fields": "{}",
    },
    "consensus_members": {"consensus_id": 1, "spectrum_id": 1, "used": 1},
    "sign_offs": {"uid": "z", "spectrum_id": 1, "decision": "confirmed", "analyst": "A", "imported": 0, "event_id": 1},
    "findings": {
        "spectrum_id": 1,
        "check_name": "n",
        "severity": "note",
        "peaks": "[]",
        "reason": "r",
        "source": "s",
        "fingerprint": "f",
    },
    "cases": {"uid": "k", "spectrum_id": 1, "status": "open", "settings": "{}", "library_state": ""},
    "calibrations": {
        "uid": "q",
        "kind": "search",
        "measure": "cosine",
        "method_version": "1",
        "library_state": "",
        "settings": "{}",
        "model": "{}",
        "reliability": "{}",
        "trials": 1,
        "compounds": 1,
        "event_id": 1,
    },
    "assignments": {
        "uid": "a",
        "spectrum_id": 1,
        "peak": 0,
        "formula": "CH4",
        "mechanism": "molecular ion",
        "parity": "OE",
        "atoms": "[]",
        "steps": "[]",
        "origin": "explained",
        "state": "proposed",
        "rules_version": 1,
        "checks": "[]",
        "reason": "",
    },
    "lineage": {"assignment_id": 1, "donor_uid": "d", "route": "same-ion", "weight": 1.0},
    "case_neighbours": {"case_id": 1, "rank": 1, "spectrum_id": 1, "similarity": 0.5, "detail": "{}"},
    "flags": {"uid": "g", "subject_uid": "a", "cause_uid": "b", "reason": "r", "opened_event": 1},
    "releases": {"number": 1, "uid": "r", "manifest_hash": "h", "chain_head": "h", "event_id": 1},
    "release_rows": {"release_id": 1, "kind": "compound", "row_uid": "c", "record": "{}", "record_hash": "h"},
    "tune_checks": {
        "uid": "t",
        "instrument": "i",
        "at": "t",
        "criteria": "c",
        "verdict": "v",
        "detail": "{}",
        "event_id": 1,
    },
}
"""One row that each table takes, in an order in which their references exist."""

REFUSED: list[tuple[str, dict[str, Any]]] = [
    ("events", {"seq": 0}),
    ("events", {"detail": "no json"}),
    ("event_changes", {"after": "no json"}),
    ("structures", {"smiles": "CC", "nominal_mass": 0}),
    ("structures", {"smiles": "CC", "exact_mass": -1.0}),
    ("structures", {}),
    ("compounds", {"uid": "c2", "name": ""}),
    ("compounds", {"name": "another of the same uid"}),
    ("compound_names", {"kind": "nickname"}),
    ("compound_names", {"name": "MARSH gas"}),
    ("sources", {"sha256": "1"}),
    ("sources", {"reader": "the same file again"}),
    ("phases", {}),
    ("methods", {"uid": "m2", "name": "SCREEN"}),
    ("ladder_points", {"time_s": 1.0}),
    ("ladder_points", {"carbon_number": 0}),
    ("ladder_points", {"carbon_number": 11, "time_s": -1.0}),
    ("spectra", {"role": "query"}),
    ("spectra", {"status": "draft"}),
    ("spectra", {"status": None}),
    ("spectra", {"compound_id": None}),
    ("spectra", {"role": "unknown", "status": None}),
    ("spectra", {"role": "unknown", "compound_id": None}),
    ("spectra", {"role": "consensus"}),
    ("spectra", {"role": "consensus", "status": None, "compound_id": None}),
    ("spectra", {"mz": MZ[:-1]}),
    ("spectra", {"intensity": MZ + MZ}),
    ("spectra", {"peak_count": 1}),
    ("spectra", {"peak_count": 0, "mz": b"", "intensity": b""}),
    ("spectra", {"content_hash": "0"}),
    ("spectra", {"mass_accuracy": "low"}),
    ("spectra", {"source_index": 0}),
    ("spectra", {"acquisition": "no json"}),
    ("spectra", {"raw_fields": "no json"}),
    ("spectra", {"mz": "a text of 16 let"}),
    ("consensus_members", {"used": 0}),
    ("consensus_members", {"consensus_id": 2, "used": 2}),
    ("sign_offs", {"uid": "z2", "decision": "perhaps"}),
    ("sign_offs", {"uid": "z2", "imported": 2}),
    ("findings", {"reason": "the same fingerprint"}),
    ("findings", {"fingerprint": "f2", "severity": "fatal"}),
    ("cases", {"uid": "k2", "status": "closed"}),
    ("cases", {"uid": "k2", "identification_level": 5}),
    ("calibrations", {"uid": "q2", "kind": "guess"}),
    ("assignments", {"uid": "a2", "peak": 1, "peak_": -1}),
    ("assignments", {"uid": "a2", "peak": 1, "parity": "odd"}),
    ("assignments", {"uid": "a2", "peak": 1, "state": "maybe"}),
    ("assignments", {"uid": "a2", "peak": 1, "origin": "guessed"}),
    ("assignments", {"uid": "a2", "peak": 1, "origin": "carried"}),
    ("assignments", {"uid": "a2", "peak": 1, "route": "same-ion"}),
    ("assignments", {"uid": "a2", "peak": 1, "origin": "carried", "route": "by bus"}),
    ("assignments", {"uid": "a2", "peak": 1, "state": "accepted"}),
    ("assignments", {"uid": "a2", "peak": 1, "accepted_how": "individually"}),
    ("assignments", {"uid": "a2", "peak": 1, "state": "accepted", "accepted_how": "in bulk"}),
    ("assignments", {"uid": "a2", "peak": 1, "confidence": 1.01}),
    ("assignments", {"uid": "a2"}),
    ("assignments", {"uid": "a2", "state": "accepted", "accepted_how": "by rule"}),
    ("lineage", {"weight": 0.5}),
    ("lineage", {"donor_uid": "e", "weight": -0.5}),
    ("lineage", {"donor_uid": "e", "route": "by bus"}),
    ("case_neighbours", {"similarity": 0.1}),
    ("case_neighbours", {"rank": 0}),
    ("releases", {"uid": "r2"}),
    ("release_rows", {"record_hash": "the same row again"}),
    ("release_rows", {"row_uid": "x", "kind": "case"}),
]


def add(connection: sqlite3.Connection, table: str, values: dict[str, Any], verb: str = "INSERT") -> None:
    marks = ", ".join("?" * len(values))
    connection.execute(f"{verb} INTO {table} ({', '.join(values)}) VALUES ({marks})", tuple(values.values()))


@pytest.fixture
def rows(path: Path) -> Iterator[sqlite3.Connection]:
    """A library with one more row in every table, in an open transaction of a raw connection."""
    with closing(sqlite3.connect(path, isolation_level=None)) as connection:
        connection.execute("PRAGMA foreign_keys = ON")
        connection.execute("BEGIN")
        for table, values in ROWS.items():
            first = connection.execute(f"SELECT ifnull(max(id), 0) FROM {table}").fetchone()[0]
            add(connection, table, values if first else {"id": 1, **values})
        yield connection


@pytest.mark.parametrize("table", COLUMNS)
def test_every_table_of_the_reference_exists_strict_with_its_columns(path: Path, table: str) -> None:
    with closing(sqlite3.connect(path)) as connection:
        strict = {row[1]: row[5] for row in connection.execute("PRAGMA table_list")}
        held = {row[1] for row in connection.execute(f"PRAGMA table_info({table})")}
    assert strict[table] == 1
    assert set(COLUMNS[table].split()) <= held


def test_every_table_but_the_trail_and_the_counter_is_audited_in_all_its_columns(path: Path) -> None:
    assert set(TABLES) == set(COLUMNS) - {"events", "event_changes", "changes"}
    with closing(sqlite3.connect(path)) as connection:
        for table, described in TABLES.items():
            held = [row[1] for row in connection.execute(f"PRAGMA table_info({table})")]
            assert list(described.columns) == held
            points = {row[3]: row[2] for row in connection.execute(f"PRAGMA foreign_key_list({table})")}
            assert described.references == points


def test_the_indexes_of_the_reference_exist(path: Path) -> None:
    with closing(sqlite3.connect(path)) as connection:
        indexed = {
            (table, tuple(row[2] for row in connection.execute(f"PRAGMA index_info({index[1]})")))
            for table in COLUMNS
            for index in connection.execute(f"PRAGMA index_list({table})")
        }
    assert indexed >= {
        ("structures", ("inchikey",)),
        ("structures", ("skeleton", "nominal_mass")),
        ("compounds", ("structure_id",)),
        ("compounds", ("parent_id",)),
        ("compounds", ("cas",)),
        ("sources", ("file_name",)),
        ("spectra", ("content_hash",)),
        ("spectra", ("compound_id", "status")),
        ("spectra", ("source_id",)),
        ("spectra", ("molecular_mass",)),
        ("assignments", ("spectrum_id", "state")),
        ("assignments", ("case_id",)),
        ("lineage", ("donor_uid",)),
        ("lineage", ("donor_id",)),
        ("flags", ("subject_uid",)),
        ("events", ("library_uid", "seq")),
    }


@pytest.mark.parametrize(
    ("table", "values"), REFUSED, ids=lambda v: v if isinstance(v, str) else ",".join(v) or "twice"
)
def test_a_row_that_breaks_a_rule_is_refused(rows: sqlite3.Connection, table: str, values: dict[str, Any]) -> None:
    fresh = {"uid": "new", "hash": "2", "seq": 2} if table in ("spectra", "events") else {}
    wanted = {**ROWS[table], **{k: v for k, v in fresh.items() if k in ROWS[table]}, **values}
    if "peak_" in wanted:
        wanted["peak"] = wanted.pop("peak_")
    with pytest.raises(sqlite3.IntegrityError):
        add(rows, table, wanted)


def test_a_live_assignment_of_a_peak_and_formula_is_one_per_case_and_the_dead_do_not_count(
    rows: sqlite3.Connection,
) -> None:
    live = ROWS["assignments"]
    for dead in ("refused", "rejected", "superseded"):
        add(rows, "assignments", {**live, "uid": dead, "state": dead})
    add(rows, "assignments", {**live, "uid": "other peak", "peak": 1})
    add(rows, "assignments", {**live, "uid": "other formula", "formula": "CH3"})
    add(rows, "assignments", {**live, "uid": "in a case", "case_id": 1})
    for case in (None, 1):
        with pytest.raises(sqlite3.IntegrityError):
            add(rows, "assignments", {**live, "uid": f"again {case}", "case_id": case})
    with pytest.raises(sqlite3.IntegrityError):
        rows.execute("UPDATE assignments SET state = 'proposed' WHERE uid = 'rejected'")


def test_every_reference_to_a_missing_row_is_refused_at_the_commit_at_the_latest(rows: sqlite3.Connection) -> None:
    fresh = {"uid": "o", "number": 9, "smiles": "CCC", "fingerprint": "o", "name": "o", "rank": 9, "donor_uid": "o"}
    fresh |= {"peak": 9}
    tried = 0
    for table, values in ROWS.items():
        for column in [row[3] for row in rows.execute(f"PRAGMA foreign_key_list({table})").fetchall()]:
            rows.execute("SAVEPOINT one")
            with pytest.raises(sqlite3.IntegrityError, match="FOREIGN KEY"):
                add(rows, table, {**values, **{k: v for k, v in fresh.items() if k in values}, column: 999})
                rows.execute("COMMIT")
            assert rows.in_transaction, f"{table}.{column} was committed"
            rows.execute("ROLLBACK TO one")
            tried += 1
    assert tried == sum(len(described.references) for described in TABLES.values()) + 1  # that of event_changes


def test_a_text_in_a_number_column_is_refused(rows: sqlite3.Connection) -> None:
    with pytest.raises(sqlite3.IntegrityError, match="cannot store TEXT"):
        rows.execute("UPDATE spectra SET molecular_mass = 'about 100'")


@pytest.mark.parametrize("table", sorted({*TABLES, "events", "event_changes"}))
def test_no_row_of_a_guarded_table_can_be_deleted_or_replaced(rows: sqlite3.Connection, table: str) -> None:
    before = rows.execute(f"SELECT * FROM {table} ORDER BY id").fetchall()
    rows.execute("PRAGMA recursive_triggers = OFF")
    rows.execute("PRAGMA defer_foreign_keys = ON")
    with pytest.raises(sqlite3.IntegrityError, match="never deleted"):
        rows.execute(f"DELETE FROM {table}")
    row = dict(zip([c[1] for c in rows.execute(f"PRAGMA table_info({table})")], before[-1], strict=True))
    for same in (row, {k: v for k, v in row.items() if k != "id"}):
        if table == "event_changes" and "id" not in same:
            continue  # no key but the id: this is a new row
        with pytest.raises(sqlite3.IntegrityError, match="held already"):
            add(rows, table, same, "REPLACE")
    with pytest.raises(sqlite3.IntegrityError, match="never change"):
        rows.execute(f"UPDATE OR REPLACE {table} SET id = id + 1000")
    assert rows.execute(f"SELECT * FROM {table} ORDER BY id").fetchall() == before


@pytest.mark.parametrize(
    ("table", "column"),
    [
        *(("spectra", c) for c in ("mz", "intensity", "content_hash", "peak_count")),
        *(("structures", c) for c in ("smiles", "inchikey", "skeleton", "formula", "nominal_mass", "exact_mass")),
        *(("events", c) for c in ("analyst", "at", "reason", "detail", "hash", "previous_hash", "seq")),
        *(("event_changes", c) for c in ("event_id", "table_name", "row_uid", "before", "after")),
        *(("lineage", c) for c in ("donor_uid", "donor_id", "weight")),
        *(("sign_offs", c) for c in ("analyst", "decision", "event_id")),
        ("release_rows", "record"),
        ("releases", "manifest_hash"),
    ],
)
def test_peaks_structures_events_and_decisions_never_change(rows: sqlite3.Connection, table: str, column: str) -> None:
    with pytest.raises(sqlite3.IntegrityError, match="never change"):
        rows.execute(f"UPDATE {table} SET {column} = {column}")


def test_the_key_of_a_row_never_changes_not_even_in_case(rows: sqlite3.Connection) -> None:
    rows.execute("UPDATE compounds SET uid = uid, name = 'Methane'")
    for change in ("compounds SET uid = 'other'", "compounds SET rowid = 9", "compound_names SET name = 'MARSH GAS'"):
        with pytest.raises(sqlite3.IntegrityError, match="never change"):
            rows.execute(f"UPDATE {change}")


def test_the_generation_counts_inserts_and_updates_that_a_search_can_see(rows: sqlite3.Connection) -> None:
    def news() -> list[tuple[int, str]]:
        return rows.execute("SELECT spectrum_id, operation FROM changes ORDER BY generation").fetchall()

    assert news() == [(1, "insert")]
    changes = ("status = 'confirmed'", "molecular_mass = 16", "compound_id = 1", "mz_from = 10", "mz_to = 300")
    for change in changes:
        rows.execute(f"UPDATE spectra SET {change}")
    assert news() == [(1, "insert"), *[(1, "update")] * len(changes)]
    rows.execute('UPDATE spectra SET retention_time_s = 5, raw_fields = \'{"a": "b"}\'')
    assert len(news()) == 1 + len(changes)


def test_the_generation_never_goes_back_after_rows_of_the_counter_are_gone(rows: sqlite3.Connection) -> None:
    rows.execute("DELETE FROM changes")
    rows.execute("UPDATE spectra SET molecular_mass = 17")
    assert rows.execute("SELECT generation FROM changes").fetchall() == [(2,)]


def test_foreign_keys_are_enforced_on_every_connection(path: Path) -> None:
    with Library(path) as library:

        def enforced() -> bool:
            with library.reading() as connection:
                return bool(connection.execute("PRAGMA foreign_keys").fetchone()[0])

        assert enforced()
        with library.writing("nothing", analyst="A") as transaction:
            assert transaction.connection.execute("PRAGMA foreign_keys").fetchone()[0] == 1
        assert enforced()
    with Library.create(path.with_name("new.sqlite")) as new, new.reading() as connection:
        assert connection.execute("PRAGMA foreign_keys").fetchone()[0] == 1
        assert connection.execute("PRAGMA synchronous").fetchone()[0] == 2
        assert connection.execute("PRAGMA journal_mode").fetchone()[0] == "delete"


def test_all_triggers_of_the_one_list_stand_in_a_new_library(path: Path) -> None:
    with closing(sqlite3.connect(path)) as connection:
        held = {name for (name,) in connection.execute("SELECT name FROM sqlite_master WHERE type = 'trigger'")}
    assert held == set(trigger_names())
