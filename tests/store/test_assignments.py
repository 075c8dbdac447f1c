"""Assignments and cases come back as they went in, with their lineage."""

from __future__ import annotations

from dataclasses import asdict, replace
from typing import TYPE_CHECKING

import pytest

from speclib.errors import EntryNotFoundError, LibraryError
from speclib.model.assignment import Assignment, AssignmentOrigin, AssignmentState, Parity, Route
from speclib.model.entry import Status
from speclib.store.assignments import accepted_assignments, assignments_of
from speclib.store.cases import get_case, insert_case, list_cases, open_cases_of
from speclib.store.library import Library
from speclib.store.spectra import get_spectrum, sign
from speclib.store.verifying import verify_library

if TYPE_CHECKING:
    from tests.store.conftest import Build


def test_an_assignment_by_hand_comes_back_whole(filled: Library) -> None:
    with filled.reading() as connection:
        first, second = assignments_of(connection, 1)
    assert first == Assignment(
        id=1,
        uid=first.uid,
        spectrum_id=1,
        peak=0,
        mz=43.0,
        formula="C2H3O",
        neutral_loss="C4H9",
        mechanism="alpha-cleavage",
        parity=Parity.EE,
        origin=AssignmentOrigin.MANUAL,
        state=AssignmentState.ACCEPTED,
        reason="by hand",
        accepted_how="individually",
    )
    assert (second.mz, second.parity) == (58.0, Parity.OE)


def test_the_same_assignment_twice_is_refused_and_one_at_another_peak_is_not(filled: Library, build: Build) -> None:
    with pytest.raises(LibraryError, match="refuses the change"), filled.writing("assign", analyst="A") as transaction:
        build.assignment(transaction, 1)
    with filled.writing("assign", analyst="A") as transaction:
        build.assignment(transaction, 1, peak=2)
    with filled.reading() as connection:
        assert [a.peak for a in assignments_of(connection, 1)] == [0, 1, 2]


def test_assignments_of_withdrawn_references_are_not_carried_any_more(filled: Library) -> None:
    with filled.reading() as connection:
        assert [a.id for a in accepted_assignments(connection, 1)] == [1, 2]
        assert assignments_of(connection, 1, []) == []
    with filled.writing("withdraw", analyst="A") as transaction:
        sign(transaction, get_spectrum(transaction.connection, 1), Status.WITHDRAWN, analyst="A")
    with filled.reading() as connection:
        assert accepted_assignments(connection, 1) == []


def test_a_case_comes_back_with_neighbours_proposals_and_lineage(filled: Library, build: Build) -> None:
    with filled.reading() as connection:
        case = get_case(connection, 1)
        held = get_spectrum(connection, 1)
        donor = assignments_of(connection, 1)[0]
        rows = connection.execute("SELECT donor_uid, donor_id, route, weight FROM lineage ORDER BY id").fetchall()
    assert held.compound is not None
    expected = build.carry_result(held.compound, 1, donor.id, donor.uid)
    (proposal,), (refused,) = case.proposals, case.refused
    assert proposal == replace(expected.proposals[0], id=3, state="accepted", rev=2)
    assert refused == replace(expected.refused[0], id=4, state="refused", rev=1)
    assert proposal.donors == expected.proposals[0].donors
    assert [tuple(row) for row in rows] == [(donor.uid, donor.id, Route.SAME_ION.value, 0.6)] * 2
    assert (case.status, case.spectrum.id, case.library_state, case.settings) == (
        "open", 2, "state", {"min_similarity": 0.3},
    )  # fmt: skip
    (neighbour,) = case.neighbours
    assert (neighbour.rank, neighbour.spectrum_id, neighbour.compound_name) == (1, 1, "2-hexanone")
    assert neighbour.similarity == 0.75
    assert neighbour.to_json()["disagreements"] == ["unknown has m/z 97"]


def test_cases_are_listed_with_how_far_they_are(filled: Library) -> None:
    with filled.reading() as connection:
        assert open_cases_of(connection, 2) == [1]
        assert open_cases_of(connection, 1) == []
        (line,) = list_cases(connection)
    assert (line["case_id"], line["undecided"], line["accepted"], line["rejected"]) == (1, 0, 1, 0)


@pytest.mark.parametrize("number", [0, -1, 2, 2**63, 10**30])
def test_a_number_that_no_case_has_is_named(filled: Library, number: int) -> None:
    with filled.reading() as connection, pytest.raises(EntryNotFoundError, match=f"no case {number}"):
        get_case(connection, number)


def test_one_donor_votes_once_by_each_route(filled: Library, build: Build) -> None:
    with filled.reading() as connection:
        held = get_spectrum(connection, 1)
        donor = assignments_of(connection, 1)[0]
    assert held.compound is not None
    result = build.carry_result(held.compound, 1, donor.id, donor.uid)
    vote = result.proposals[0].donors[0]
    twice = replace(result, proposals=(replace(result.proposals[0], donors=(vote, vote)),), refused=())
    with pytest.raises(LibraryError), filled.writing("carry", analyst="A") as transaction:
        insert_case(transaction, twice, spectrum_id=2, settings={}, rules_version=1)
    other = replace(vote, route=Route.SAME_LOSS)
    both = replace(twice, proposals=(replace(result.proposals[0], donors=(vote, other)),))
    with filled.writing("carry", analyst="A") as transaction:
        number = insert_case(transaction, both, spectrum_id=2, settings={}, rules_version=1)
    with filled.reading() as connection:
        assert {v.route for v in get_case(connection, number).proposals[0].donors} == {Route.SAME_ION, Route.SAME_LOSS}
        assert verify_library(connection).intact


def test_a_case_as_plain_values_is_json(filled: Library) -> None:
    import json

    with filled.reading() as connection:
        case = get_case(connection, 1)
    assert json.loads(json.dumps(case.to_json()))["case_id"] == 1
    assert asdict(case.proposals[0])["route"] == "same-ion"
