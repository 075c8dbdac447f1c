"""Looking compounds up: by number, name, synonym, CAS number and InChIKey, and never the wrong one silently."""

from __future__ import annotations

from typing import TYPE_CHECKING

import pytest

from speclib.errors import AmbiguousEntryError, EntryNotFoundError
from speclib.store.compounds import compounds_by_id, find_by_inchikey, find_compounds, get_compound, list_compounds
from speclib.store.library import Library
from speclib.store.verifying import verify_library

if TYPE_CHECKING:
    from tests.store.conftest import Build


@pytest.fixture
def shelf(library: Library, build: Build) -> Library:
    with library.writing("compound add", analyst="A") as transaction:
        build.compound(
            transaction, "2-Hexanone", structure=build.hexanone, cas="591-78-6",
            synonyms=["MBK", "mbk", "Butyl methyl ketone"], classes=["ketone", "Ketone"],
        )  # fmt: skip
        build.compound(transaction, "Äthylacetat", formula="C4H8O2", synonyms=["Essigester", "Éthyle acétate"])
        build.compound(transaction, "100% juice_marker", formula="C2H6O")
        build.compound(transaction, "1", formula="CH4", synonyms=["1080", "shared"])
        build.compound(transaction, "second", synonyms=["shared"])
        build.compound(transaction, "derivative", formula="C9H20O", parent_id=1, derivative="TMS")
    return library


@pytest.mark.parametrize(
    ("text", "number"),
    [
        ("2-Hexanone", 1),
        ("2-hexanone", 1),
        ("  2-HEXANONE\n", 1),
        ("mbk", 1),
        ("butyl   METHYL ketone", 1),
        ("591-78-6", 1),
        ("QQZOPKMRPOGIEB-UHFFFAOYSA-N", 1),
        ("qqzopkmrpogieb-uhfffaoysa-n", 1),
        ("äthylacetat", 2),
        ("ÄTHYLACETAT", 2),
        ("éthyle ACÉTATE", 2),
        ("2", 2),
        ("002", 2),
        ("3", 3),
        ("100% juice_marker", 3),
        ("1080", 4),
        ("4", 4),
        ("derivative", 6),
    ],
)
def test_a_compound_is_found(shelf: Library, text: str, number: int) -> None:
    with shelf.reading() as connection:
        assert get_compound(connection, text).id == number


@pytest.mark.parametrize(
    "text",
    ["", " ", "%", "100%", "100_ juice%marker", "ketone", "7", "0", "-1", "1.0", "²", "٣", "9" * 30, "CCCCC(C)=O",
     "591-78-7", "QQZOPKMRPOGIEB-UHFFFAOYSA-O", "x\x00y", "\udce9"],
)  # fmt: skip
def test_what_no_compound_is_called_is_not_found(shelf: Library, text: str) -> None:
    with shelf.reading() as connection:
        assert find_compounds(connection, text) == []
        with pytest.raises(EntryNotFoundError, match="holds no compound"):
            get_compound(connection, text)


def test_a_name_that_is_the_number_of_another_compound_is_asked_about(shelf: Library) -> None:
    with shelf.reading() as connection:
        with pytest.raises(AmbiguousEntryError, match=r"4 1 \(CH4\), 1 2-Hexanone \(C6H12O\)"):
            get_compound(connection, "1")
        assert [c.id for c in find_compounds(connection, "1")] == [4]  # as a name, at intake


def test_an_ambiguous_synonym_lists_the_candidates(shelf: Library) -> None:
    with shelf.reading() as connection:
        with pytest.raises(AmbiguousEntryError, match=r"4 1 \(CH4\), 5 second \(formula unknown\); give the number"):
            get_compound(connection, "Shared")
        assert [c.id for c in find_compounds(connection, "SHARED")] == [4, 5]


@pytest.mark.parametrize(
    ("text", "near"),
    [("2-hexanon", "2-Hexanone"), ("2-HEXANOL", "2-Hexanone"), ("essigsester", "Essigester"), ("deriv.", "derivative")],
)
def test_near_names_and_synonyms_are_suggested_without_regard_to_case(shelf: Library, text: str, near: str) -> None:
    with shelf.reading() as connection, pytest.raises(EntryNotFoundError) as told:
        get_compound(connection, text)
    assert f"did you mean {near}" in str(told.value)


def test_where_nothing_is_near_the_list_is_named(shelf: Library) -> None:
    with shelf.reading() as connection, pytest.raises(EntryNotFoundError, match="see `speclib compound list`"):
        get_compound(connection, "zzzzzzzzz")


def test_a_compound_comes_back_whole_and_names_that_differ_in_case_only_are_kept_once(
    shelf: Library, build: Build
) -> None:
    with shelf.reading() as connection:
        first, *_, last = list_compounds(connection)
        assert find_by_inchikey(connection, build.hexanone.inchikey) == first
        assert find_by_inchikey(connection, "AAAAAAAAAAAAAA-AAAAAAAASA-N") is None
        assert list(compounds_by_id(connection, [6, 1, 99, 1])) == [1, 6]
        assert verify_library(connection).intact
    assert first.structure == build.hexanone
    assert (first.name, first.formula, first.cas) == ("2-Hexanone", "C6H12O", "591-78-6")
    assert (first.synonyms, first.classes) == (("MBK", "Butyl methyl ketone"), ("ketone",))
    assert (last.parent_id, last.derivative, last.structure, last.formula) == (1, "TMS", None, "C9H20O")


def test_a_structure_is_stored_once(shelf: Library, build: Build) -> None:
    with shelf.writing("compound add", analyst="A") as transaction:
        build.compound(transaction, "another name of it", structure=build.hexanone)
    with shelf.reading() as connection:
        assert connection.execute("SELECT count(*) FROM structures").fetchone()[0] == 1
        assert [c.id for c in find_compounds(connection, build.hexanone.inchikey)] == [1, 7]
