"""The trail: recomputed here from its written form, and every kind of tampering is found and named."""

from __future__ import annotations

import hashlib
import json
import sqlite3
import struct
from collections.abc import Iterator
from contextlib import closing
from pathlib import Path
from typing import TYPE_CHECKING

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from speclib.model.entry import Status
from speclib.store.canonical import canonical_json
from speclib.store.compounds import insert_compound
from speclib.store.library import Library
from speclib.store.spectra import get_spectrum, insert_findings, sign
from speclib.store.verifying import Verification, verify_library

if TYPE_CHECKING:
    from tests.store.conftest import Build


def verified(path: Path) -> Verification:
    with Library(path) as library, library.reading() as connection:
        return verify_library(connection)


def chain_by_hand(path: Path) -> list[str]:
    """Hashes of all events from the written form: sorted keys, no blanks, UTF-8, the changes in order of entry."""
    hashes, previous = [], "0" * 64
    with closing(sqlite3.connect(path)) as connection:
        connection.row_factory = sqlite3.Row
        for event in connection.execute("SELECT * FROM events ORDER BY seq").fetchall():
            changes = connection.execute(
                "SELECT table_name, row_uid, before, after FROM event_changes WHERE event_id = ? ORDER BY id",
                (event["id"],),
            ).fetchall()
            record = {
                "canonical": 1,
                "previous_hash": previous,
                "detail": json.loads(event["detail"]),
                "changes": [list(change) for change in changes],
                **{k: event[k] for k in ("library_uid", "seq", "at", "analyst", "action", "reason")},
            }
            text = json.dumps(record, sort_keys=True, separators=(",", ":"), ensure_ascii=False)
            previous = hashlib.sha256(text.encode("utf-8")).hexdigest()
            hashes.append(previous)
    return hashes


def test_the_chain_can_be_recomputed_by_hand_and_its_head_is_the_library_state(filled: Library) -> None:
    by_hand = chain_by_hand(filled.path)
    with filled.reading() as connection:
        stored = [row["hash"] for row in connection.execute("SELECT hash FROM events ORDER BY seq")]
        result = verify_library(connection)
    assert stored == by_hand
    assert filled.state() == result.chain_head == by_hand[-1]
    assert (result.intact, result.differences, result.events) == (True, (), 7)
    assert result.rows > 20
    assert result.spectra == 2


def test_a_row_record_names_rows_by_key_and_blobs_by_hash(filled: Library) -> None:
    with filled.reading() as connection:
        row = connection.execute("SELECT * FROM spectra WHERE id = 1").fetchone()
        after = connection.execute(
            "SELECT after FROM event_changes WHERE table_name = 'spectra' AND row_uid = ? ORDER BY id", (row["uid"],)
        ).fetchone()[0]
        compound = connection.execute("SELECT uid FROM compounds WHERE id = 1").fetchone()[0]
    record = json.loads(after)
    assert record["compound_id"] == compound
    assert record["source_id"] == "0" * 64 + "|invented.txt"
    assert record["phase_id"] == "5% phenyl"
    assert record["mz"] == f"sha256:{hashlib.sha256(struct.pack('<3d', 43, 58, 100)).hexdigest()}"
    assert record["molecular_mass"] == 100
    assert "id" not in record
    assert canonical_json(record) == after


def test_canonical_json_is_this_text() -> None:
    value = {"b": [1, 1.0, -0.5, 1e22, 1e-7, True, None], "a": {"ß": '☃\u2028\n"', "B": "/"}, "é": 0.1 + 0.2}
    golden = '{"a":{"B":"/","ß":"☃\u2028\\n\\""},"b":[1,1.0,-0.5,1e+22,1e-07,true,null],"é":0.30000000000000004}'
    assert canonical_json(value) == golden
    assert canonical_json(json.loads(golden)) == golden


@pytest.mark.parametrize("number", [float("nan"), float("inf"), float("-inf")])
def test_canonical_json_refuses_what_json_does_not_know(number: float) -> None:
    with pytest.raises(ValueError, match="JSON"):
        canonical_json({"x": [number]})


OTHER_PEAKS = struct.pack("<3d", 43, 58, 101)
OTHER_HASH = hashlib.sha256(OTHER_PEAKS + struct.pack("<3d", 1000, 550.25, 80)).hexdigest()
TAMPERED: dict[str, tuple[str, str]] = {
    "a peak": (f"UPDATE spectra SET mz = x'{OTHER_PEAKS.hex()}' WHERE id = 1", "the peaks of spectrum 1"),
    "an intensity": (f"UPDATE spectra SET intensity = x'{OTHER_PEAKS.hex()}' WHERE id = 2", "the peaks of spectrum 2"),
    "a peak and its hash": (
        f"UPDATE spectra SET mz = x'{OTHER_PEAKS.hex()}', content_hash = '{OTHER_HASH}' WHERE id = 1",
        "row 1 of spectra is not what the events say",
    ),
    "a compound name": ("UPDATE compounds SET name = 'other' WHERE id = 2", "row 2 of compounds is not"),
    "the case of a name": ("UPDATE compounds SET name = upper(name) WHERE id = 2", "row 2 of compounds is not"),
    "a synonym": (
        "UPDATE compound_names SET name = 'x' WHERE id = 1",
        "row 1 of compound_names stands in the library but",
    ),
    "a structure": ("UPDATE structures SET exact_mass = exact_mass + 1e-9", "row 1 of structures is not"),
    "a status": ("UPDATE spectra SET status = 'provisional' WHERE id = 1", "row 1 of spectra is not"),
    "a molecular mass": ("UPDATE spectra SET molecular_mass = 101 WHERE id = 1", "row 1 of spectra is not"),
    "an assignment state": (
        "UPDATE assignments SET state = 'rejected', accepted_how = NULL WHERE id = 1",
        "row 1 of assignments is not",
    ),
    "a confidence": ("UPDATE assignments SET confidence = 0.9 WHERE id = 3", "row 3 of assignments is not"),
    "a lineage": ("UPDATE lineage SET weight = 0.61 WHERE id = 1", "row 1 of lineage is not"),
    "a sign-off": ("UPDATE sign_offs SET analyst = 'B'", "row 1 of sign_offs is not"),
    "an infinite number": ("UPDATE case_neighbours SET similarity = 9e999", "row 1 of case_neighbours is not"),
    "the library's own row": ("UPDATE library SET four_eyes = 1", "row 1 of library is not"),
    "a deleted row": ("DELETE FROM findings WHERE id = 2", "the events made a row of findings"),
    "a deleted compound": ("DELETE FROM compounds WHERE id = 1", "a row of compound"),
    "an added row": (
        "INSERT INTO phases (name, chemistry) VALUES ('new', 'other')",
        "row 2 of phases stands in the library but no event made it",
    ),
    "two ids exchanged": (
        "UPDATE compounds SET id = 99 WHERE id = 1; UPDATE compounds SET id = 1 WHERE id = 2; "
        "UPDATE compounds SET id = 2 WHERE id = 99",
        "is not what the events say",
    ),
    "an event's reason": ("UPDATE events SET reason = 'other' WHERE seq = 7", "event 7 (review, "),
    "an event's signer": ("UPDATE events SET analyst = 'B' WHERE seq = 4", "event 4 (confirm, "),
    "an event's time": (
        "UPDATE events SET at = '2020' WHERE seq = 4",
        "event 4 (confirm, 2020) does not give the hash",
    ),
    "an event's detail": ("UPDATE events SET detail = '{}' WHERE seq = 3", "event 3 (intake, "),
    "a detail that is no JSON": ("UPDATE events SET detail = 'x' WHERE seq = 3", "event 3 (intake, "),
    "a removed event": (
        "DELETE FROM event_changes WHERE event_id = 4; DELETE FROM events WHERE id = 4",
        "event 4 is missing",
    ),
    "the newest event removed": (
        "DELETE FROM event_changes WHERE event_id = 7; DELETE FROM events WHERE id = 7",
        "row 3 of assignments is not",
    ),
    "an event without its changes": ("DELETE FROM event_changes WHERE event_id = 7", "event 7 (review, "),
    "changes without their event": (
        "DELETE FROM events WHERE id = 7",
        "a row of event_changes points to a row of events",
    ),
    "two events exchanged": (
        "UPDATE events SET seq = 99 WHERE seq = 4; UPDATE events SET seq = 4 WHERE seq = 5; "
        "UPDATE events SET seq = 5 WHERE seq = 99",
        "event 4 is missing before event 5",
    ),
    "a change before": (
        "UPDATE event_changes SET before = NULL WHERE before IS NOT NULL AND event_id = 7",
        "event 7 (",
    ),
    "a change after": (
        "UPDATE event_changes SET after = json_set(after, '$.cas', '1') "
        "WHERE table_name = 'compounds' AND event_id = 2",
        "event 2 (compound add, ",
    ),
    "a change added": (
        "INSERT INTO event_changes (event_id, table_name, row_uid, after) VALUES (7, 'phases', 'x', '{}')",
        "event 7 (review, ",
    ),
    "an event forged at the end": (
        "INSERT INTO events SELECT 8, library_uid, 8, at, analyst, action, reason, detail, hash, 'forged' "
        "FROM events WHERE id = 7",
        "event 8 (review, ",
    ),
}


@pytest.fixture
def unguarded(raw: sqlite3.Connection) -> Iterator[sqlite3.Connection]:
    raw.execute("PRAGMA ignore_check_constraints = ON")
    for (name,) in raw.execute("SELECT name FROM sqlite_master WHERE type = 'trigger'").fetchall():
        raw.execute(f"DROP TRIGGER {name}")
    yield raw
    raw.execute("PRAGMA ignore_check_constraints = OFF")


@pytest.mark.parametrize("what", TAMPERED)
def test_tampering_is_found_and_named(
    filled_path: Path, raw: sqlite3.Connection, unguarded: sqlite3.Connection, what: str
) -> None:
    statements, named = TAMPERED[what]
    for statement in statements.split("; "):
        unguarded.execute(statement)
    result = verified(filled_path)
    assert not result.intact
    assert [d for d in result.differences if named in d], result.differences
    assert len(result.to_json()["differences"]) == len(result.differences)


def test_without_tampering_only_the_guards_are_missed(filled_path: Path, unguarded: sqlite3.Connection) -> None:
    differences = verified(filled_path).differences
    assert [d.startswith("the guard ") for d in differences] == [True]


@pytest.mark.parametrize("name", ["structures_never_changed", "spectra_peaks_never_change", "events_never_deleted"])
def test_a_missing_guard_is_named(filled_path: Path, raw: sqlite3.Connection, name: str) -> None:
    raw.execute(f"DROP TRIGGER {name}")
    assert verified(filled_path).differences == (f"the guard {name} is missing from the library",)


def test_a_file_that_lost_its_last_byte_is_named(filled_path: Path) -> None:
    filled_path.write_bytes(filled_path.read_bytes()[:-1])
    assert "the file is 1 bytes too short" in verified(filled_path).differences[0]


ACTIONS = st.lists(
    st.one_of(
        st.tuples(st.just("compound"), st.text(min_size=1, max_size=8)),
        st.tuples(st.just("spectrum"), st.floats(1, 900)),
        st.tuples(st.just("assignment"), st.sampled_from(["C2H3O", "C3H6O", "CH3"])),
        st.tuples(st.just("finding"), st.text(max_size=5)),
        st.tuples(st.just("sign"), st.sampled_from([Status.CONFIRMED, Status.WITHDRAWN])),
        st.tuples(st.just("edit"), st.text(max_size=5)),
        st.tuples(st.just("commit"), st.none()),
        st.tuples(st.just("undo"), st.none()),
    ),
    max_size=30,
)


class Undone(Exception):  # noqa: N818
    """Raised to undo a step."""


@settings(max_examples=25, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(actions=ACTIONS)
def test_any_sequence_of_public_changes_verifies(
    filled_template: Path, tmp_path: Path, build: Build, actions: list[tuple[str, object]]
) -> None:
    path = tmp_path / "lab.sqlite"
    path.write_bytes(filled_template.read_bytes())
    with Library(path) as library:
        _play(library, build, list(actions))
        with library.reading() as connection:
            assert verify_library(connection).differences == ()
        assert library.state() == chain_by_hand(path)[-1]


def _play(library: Library, build: Build, actions: list[tuple[str, object]]) -> None:
    while actions:
        with library.writing("play", analyst="A") as transaction:
            while actions:
                kind, value = actions.pop(0)
                if kind == "commit":
                    break
                try:
                    with transaction.step():
                        _do(transaction, build, kind, value)
                except (Undone, sqlite3.IntegrityError):
                    pass


def _do(transaction: object, build: Build, kind: str, value: object) -> None:
    from speclib.store.writing import WriteTransaction

    assert isinstance(transaction, WriteTransaction)
    connection = transaction.connection
    newest = connection.execute("SELECT max(id) FROM spectra WHERE role = 'reference'").fetchone()[0]
    if kind == "compound":
        insert_compound(transaction, name=str(value), structure=None, formula="CH4", synonyms=[str(value), "x"])
    elif kind == "spectrum":
        assert isinstance(value, float)
        build.spectrum(transaction, build.found({value: 1.0, value + 1: value}, a=str(value)), 2)
    elif kind == "assignment":
        build.assignment(transaction, newest, formula=str(value))
    elif kind == "finding":
        insert_findings(transaction, newest, [build.finding(str(value)), build.finding("again")])
    elif kind == "sign":
        assert isinstance(value, Status)
        sign(transaction, get_spectrum(connection, newest), value, analyst="A")
    elif kind == "edit":
        transaction.update("compounds", 1, derivative=str(value))
    elif kind == "undo":
        made = build.compound(transaction, "undone", synonyms=["gone"])
        build.spectrum(transaction, build.found({43: 1.0}), made)
        raise Undone
