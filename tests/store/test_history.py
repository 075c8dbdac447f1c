"""The history of one row: its own events and those of rows that point to it, and no others."""

from __future__ import annotations

from speclib.model.compound import Structure
from speclib.store.compounds import insert_structure
from speclib.store.history import events_of_row, recent_events
from speclib.store.library import Library


def actions(library: Library, row: str) -> list[str]:
    with library.reading() as connection:
        return [entry.event.action for entry in events_of_row(connection, row)]


def uid(library: Library, table: str, number: int) -> str:
    with library.reading() as connection:
        return str(connection.execute(f"SELECT uid FROM {table} WHERE id = ?", (number,)).fetchone()[0])


def test_the_history_of_a_row_is_newest_first_with_the_rows_that_point_to_it(filled: Library) -> None:
    assert actions(filled, uid(filled, "spectra", 1)) == ["carry", "assign", "confirm", "intake"]
    assert actions(filled, uid(filled, "cases", 1)) == ["review", "carry"]
    assert actions(filled, uid(filled, "compounds", 2)) == ["compound add"]


def test_each_entry_tells_how_the_row_changed(filled: Library) -> None:
    with filled.reading() as connection:
        newest, *_ = events_of_row(connection, uid(filled, "assignments", 3))
    (change,) = newest.changes
    assert (change["before"]["state"], change["after"]["state"]) == ("proposed", "accepted")
    assert (change["before"]["rev"], change["after"]["rev"]) == (1, 2)
    assert newest.to_json()["reason"] == "agreed"


def test_a_row_that_pointed_to_another_one_before_still_belongs_to_its_history(filled: Library) -> None:
    second = uid(filled, "compounds", 2)
    first = uid(filled, "compounds", 1)
    with filled.writing("move", analyst="A") as transaction:
        transaction.update("spectra", 1, compound_id=2)
    assert actions(filled, first)[0] == "move"
    assert actions(filled, second)[0] == "move"


def test_percent_and_underscore_mean_themselves_and_quotes_and_backslashes_are_found(library: Library) -> None:
    keys = ("100%", "100x", "a_c", "abc", "F/C=C\\F", 'say "x"')
    for key in keys:
        with library.writing(f"add {key}", analyst="A") as transaction:
            phase = transaction.insert("phases", name=key, chemistry="other")
            transaction.insert("methods", name=f"method of {key}", phase_id=phase)
    for key in keys:
        with library.writing(f"again {key}", analyst="A") as transaction:
            phase = transaction.connection.execute("SELECT id FROM phases WHERE name = ?", (key,)).fetchone()[0]
            transaction.insert("methods", name=f"second method of {key}", phase_id=phase)
    for key in keys:
        assert actions(library, key) == [f"again {key}", f"add {key}"]
    assert actions(library, "%") == []


def test_a_smiles_with_backslashes_is_found_where_compounds_point_to_it(library: Library) -> None:
    smiles = "F/C=C\\F"
    structure = Structure(smiles, "WFLOTYSKFUPZQB-OWOJBTEDSA-N", "WFLOTYSKFUPZQB", "C2H2F2", 64, 64.01246)
    with library.writing("structure", analyst="A") as transaction:
        number = insert_structure(transaction, structure)
    with library.writing("compound", analyst="A") as transaction:
        transaction.insert("compounds", name="1,2-difluoroethene", structure_id=number)
    assert actions(library, smiles) == ["compound", "structure"]


def test_a_limit_cuts_the_oldest(filled: Library) -> None:
    with filled.reading() as connection:
        assert [entry.event.seq for entry in recent_events(connection, 2)] == [7, 6]
        assert [entry.event.seq for entry in recent_events(connection)] == [7, 6, 5, 4, 3, 2, 1]
        assert recent_events(connection, 0) == []
