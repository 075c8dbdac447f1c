"""The main job as a person types it: library, sign-off, assignments, search, carry, decisions, trail."""

from __future__ import annotations

import json
import sqlite3
from pathlib import Path
from typing import Any

import pytest

from speclib.cli.main import COMMANDS
from speclib.cli.output import WIDTH
from speclib.similarity.scores import Measure

L = ("-L", "lab.sqlite")
BY = ("--by", "A. Analyst")
CARRY = (*L, "carry", "unknown.txt", "--mass", "128", "--formula", "C8H16O")


def ok(outcome: Any) -> Any:
    assert outcome.status == 0, outcome.err
    return outcome


def document(outcome: Any) -> Any:
    return json.loads(ok(outcome).out)


def test_the_same_peaks_are_stored_once_and_reported_with_the_first_id(speclib: Any, library: Path) -> None:
    assert library.exists()
    again = document(speclib(*L, "intake", "--manifest", "manifest.csv", *BY, "--json"))
    assert [(s["spectrum_id"], s["already_held"]) for s in again["spectra"]] == [(i, True) for i in (1, 2, 3, 4)]
    state = document(speclib(*L, "verify", "--json"))["chain_head"]
    assert again["library_state"] == state
    twice = document(speclib(*L, "intake", "hexanone_1.txt", "--compound", "2-hexanone", "--replicate", *BY, "--json"))
    assert (twice["spectra"][0]["spectrum_id"], twice["spectra"][0]["already_held"]) == (5, False)


def test_identical_peaks_under_another_compound_are_kept_with_a_doubt(speclib: Any, library: Path) -> None:
    assert library.exists()
    Path("twin.csv").write_text("file,compound,smiles\nheptanone.txt,3-heptanone,CCCCC(=O)CC\n", encoding="utf-8")
    taken = document(speclib(*L, "intake", "--manifest", "twin.csv", *BY, "--json"))["spectra"][0]
    assert taken["spectrum_id"] == 5
    assert [f["severity"] for f in taken["findings"]] == ["doubt"]
    assert "2-heptanone" in taken["findings"][0]["reason"]


def test_a_bad_row_of_a_manifest_does_not_stop_the_others(speclib: Any, library: Path) -> None:
    assert library.exists()
    Path("more.csv").write_text(
        "file;compound;smiles;status;standard;cas;ri;phase\n"
        "stranger.txt;trichloroanisole;COc1c(Cl)cc(Cl)cc1Cl;confirmed;lot 4;87-40-1;1340,5;5%-phenyl\n"
        "nowhere.txt;x;CCO;;;;;\n"
        "unknown.txt;2-octanone;CCCCCCC(C)=O;confirmed;;;;\n"
        "unknown.txt;2-octanone;CCCCCCC(C)=O;approved;;;;\n"
        "unknown.txt;2-octanone;CCCCCCC(C)=O;;;111-13-7;;\n"
        "unknown.txt;2-hexanone;CCCCCCC(C)=O;;;;;\n"
        "unknown.txt;2-octanone;CCCCCCC(C)=O;;;;;wax\n",
        encoding="utf-8",
    )
    outcome = speclib(*L, "intake", "--manifest", "more.csv", *BY, "--json")
    assert outcome.status == 1
    found = outcome.document
    assert [(s["file"], s["status"]) for s in found["spectra"]] == [
        ("stranger.txt", "confirmed"),
        ("unknown.txt", "provisional"),
    ]
    reasons = " | ".join(s["reason"] for s in found["skipped"])
    for words in ("line 3", "line 4", "without its standard", "approved", "2-hexanone is held already", "wax"):
        assert words in reasons, (words, reasons)
    shown = document(speclib(*L, "compound", "show", "trichloroanisole", "--json"))
    assert shown["spectra"][0]["measurement"] == {
        "mz_from": 25.0,
        "mz_to": 300.0,
        "phase": "5% phenyl",
        "retention_index": 1340.5,
    }
    assert ok(speclib(*L, "verify")).status == 0


def test_a_skipped_row_leaves_no_compound_behind(speclib: Any, library: Path) -> None:
    assert library.exists()
    Path("gate.csv").write_text(
        "file,compound,smiles,status\nunknown.txt,2-octanone,CCCCCCC(C)=O,confirmed\n", encoding="utf-8"
    )
    before = document(speclib(*L, "compound", "list", "--json"))
    assert speclib(*L, "intake", "--manifest", "gate.csv", *BY).status == 1
    assert document(speclib(*L, "compound", "list", "--json")) == before


def test_corrections_in_a_second_manifest_are_not_lost_in_silence(speclib: Any, library: Path) -> None:
    assert library.exists()
    Path("again.csv").write_text(
        "file,compound,status,standard,ri\nhexanone_2.txt,2-hexanone,confirmed,lot 9,795\n", encoding="utf-8"
    )
    taken = document(speclib(*L, "intake", "--manifest", "again.csv", *BY, "--json"))["spectra"][0]
    assert (taken["already_held"], taken["status"]) == (True, "provisional")
    assert "NOT taken over: status confirmed (use `speclib confirm 2`), retention_index" in taken["remark"]


def test_peaks_above_the_given_mass_are_said_to_contradict_it(speclib: Any, library: Path) -> None:
    assert library.exists()
    found = document(speclib(*L, "search", "unknown.txt", "--mass", "100", "--measure", "shifted", "--json"))
    assert any("contradict" in remark and "128" in remark for remark in found["remarks"])


def test_a_formula_of_no_neutral_molecule_is_refused(speclib: Any, library: Path) -> None:
    assert library.exists()
    for formula in ("C9H17O2", "C2H9"):
        outcome = speclib(*L, "carry", "unknown.txt", "--formula", formula, "--no-save")
        assert outcome.status == 1
        assert formula in outcome.err


def test_a_sign_off_from_a_manifest_says_so(speclib: Any, library: Path) -> None:
    assert library.exists()
    events = document(speclib(*L, "history", "--spectrum", "1", "--json"))["events"]
    signed = [c["after"] for e in events for c in e["changes"] if c["table"] == "sign_offs"]
    assert [(s["imported"], s["reason"], s["standard"]) for s in signed] == [
        (1, "sign-off imported", "invented standard lot 1")
    ]


def test_confirm_is_all_or_none(speclib: Any, library: Path) -> None:
    assert library.exists()
    assert speclib(*L, "confirm", "2", "99", "--standard", "lot 9", *BY).status == 1
    shown = document(speclib(*L, "compound", "show", "2-hexanone", "--json"))
    assert [s["status"] for s in shown["spectra"]] == ["confirmed", "provisional"]
    ok(speclib(*L, "confirm", "2", "--standard", "lot 9", *BY))
    assert document(speclib(*L, "compound", "list", "--json"))["compounds"][0]["confirmed"] == 2


def test_what_a_person_assigns_is_accepted_individually(speclib: Any, library: Path) -> None:
    assert library.exists()
    args = ("assign", "2", "--mz", "43", "--formula", "C2H3O+", "--mechanism", "alpha-cleavage", *BY)
    made = document(speclib(*L, *args, "--json"))["assignments"][0]
    assert (made["origin"], made["state"], made["accepted_how"]) == ("manual", "accepted", "individually")
    assert (made["formula"], made["neutral_loss"], made["parity"]) == ("C2H3O", "C4H9", "EE")
    again = document(speclib(*L, *args, "--json"))
    assert (again["assignments"], again["already_held"]) == ([], 1)


def test_bad_rows_of_assignments_are_skipped_with_line_and_reason(speclib: Any, library: Path) -> None:
    assert library.exists()
    ok(speclib(*L, "intake", "hexanone_1.txt", "--compound", "2-hexanone", "--replicate", *BY))
    Path("rows.csv").write_text(
        "file,spectrum_id,index,mz,formula,neutral_loss,mechanism,note\n"
        "hexanone_2.txt,,,58,C3H6O,C3H6,McLafferty rearrangement,\n"
        "hexanone_2.txt,,,58,C3H8N,,x,\n"
        "hexanone_1.txt,,,58,C3H6O,,McLafferty rearrangement,\n"
        ",2,,59,C3H7O,,,\n"
        "elsewhere.txt,,,58,C3H6O,,x,\n"
        ",,,58,C3H6O,,x,\n"
        "heptanone.txt,2,,58,C3H6O,,x,\n",
        encoding="utf-8",
    )
    outcome = speclib(*L, "assign", "--from", "rows.csv", *BY, "--json")
    assert outcome.status == 1
    assert len(outcome.document["assignments"]) == 1
    reasons = [s["reason"] for s in outcome.document["skipped"]]
    assert [r.split(":")[0] for r in sorted(reasons)] == [f"rows.csv, line {n}" for n in range(3, 9)]
    assert any("means several spectra: 1 " in r for r in reasons)


def test_search_leaves_out_compounds_and_provisional_references(speclib: Any, library: Path) -> None:
    assert library.exists()
    search = (*L, "search", "unknown.txt", "--mass", "128", "--measure", "shifted", "--min-peaks", "1", "--json")

    def names(*extra: str) -> list[str]:
        return [n["compound"]["name"] for n in document(speclib(*search, *extra))["neighbours"]]

    assert names()[:2] == ["2-heptanone", "2-hexanone"]
    for alias in ("2-heptanone", "2", "CATSNJVOTSVZJV-UHFFFAOYSA-N"):
        assert names("--exclude-compound", alias)[0] == "2-hexanone"
    assert "butylbenzene" not in names("--confirmed-only")
    every = document(speclib(*search, "--all-replicates"))["neighbours"]
    assert [n["spectrum_id"] for n in every][:3] == [3, 2, 1] or [n["spectrum_id"] for n in every][:3] == [3, 1, 2]


def test_a_stored_reference_does_not_find_itself(speclib: Any, library: Path) -> None:
    assert library.exists()
    found = document(speclib(*L, "search", "1", "--json"))
    assert found["neighbours"][0]["spectrum_id"] == 2
    assert found["molecular_mass"] == {"value": 100, "origin": "compound of the reference", "alternatives": []}


def test_a_mass_given_once_is_remembered_with_the_unknown(speclib: Any, library: Path) -> None:
    assert library.exists()
    ok(speclib(*CARRY, *BY))
    found = document(speclib(*L, "search", "5", "--measure", "shifted", "--json"))
    assert (found["molecular_mass"]["value"], found["molecular_mass"]["origin"]) == (128, "recorded with the unknown")
    assert found["neighbours"][0]["compound"]["name"] == "2-heptanone"


def test_a_mass_given_later_is_remembered_with_an_unknown_held_already(speclib: Any, library: Path) -> None:
    assert library.exists()
    ok(speclib(*L, "intake", "unknown.txt", *BY))
    ok(speclib(*CARRY, *BY))
    found = document(speclib(*L, "search", "5", "--json"))
    assert (found["molecular_mass"]["value"], found["molecular_mass"]["origin"]) == (128, "recorded with the unknown")
    assert ok(speclib(*L, "verify")).status == 0


def test_nothing_is_invented_where_nothing_is_computed_yet(speclib: Any, library: Path) -> None:
    assert library.exists()
    found = document(speclib(*L, "search", "unknown.txt", "--json"))
    assert found["release"] is None
    assert found["presence"]["probability"] is None
    assert {n["probability"] for n in found["neighbours"]} == {None}
    assert found["molecular_mass"]["origin"] == "highest plausible cluster of the spectrum"
    assert found["molecular_formula"]["value"] is None


def test_carry_without_save_changes_nothing_and_needs_no_name(speclib: Any, library: Path) -> None:
    before = library.read_bytes()
    found = document(speclib(*CARRY, "--no-save", "--json"))
    assert (found["case_id"], [p["id"] for p in found["proposals"]]) == (None, [None] * len(found["proposals"]))
    assert library.read_bytes() == before


def test_a_saved_case_tells_what_carry_told(speclib: Any, library: Path) -> None:
    assert library.exists()
    bare = document(speclib(*CARRY, "--no-save", "--json"))
    saved = document(speclib(*CARRY, *BY, "--json"))
    shown = document(speclib(*L, "case", "show", str(saved["case_id"]), "--json"))

    def told(proposals: Any) -> Any:
        bare_of_ids = [{key: value for key, value in p.items() if key != "id"} for p in proposals]
        for p in bare_of_ids:
            p["donors"] = sorted(p["donors"], key=lambda d: (d["assignment_id"], d["route"]))
        return sorted(bare_of_ids, key=lambda p: (p["mz"], p["formula"]))

    assert told(bare["proposals"]) == told(saved["proposals"]) == told(shown["proposals"])
    assert told(bare["refused"]) == told(saved["refused"]) == told(shown["refused"])
    assert bare["difference"] == {"mass": 14, "formulas": ["+CH2"], "interpretation": None, "atoms": []}


def test_lineage_of_every_proposal_is_stored(speclib: Any, library: Path) -> None:
    document(speclib(*CARRY, *BY, "--json"))
    with sqlite3.connect(library) as connection:
        orphans = connection.execute(
            "SELECT count(*) FROM assignments a WHERE origin = 'carried' "
            "AND NOT EXISTS (SELECT 1 FROM lineage l WHERE l.assignment_id = a.id)"
        ).fetchone()[0]
        linked = connection.execute(
            "SELECT count(*) FROM lineage l JOIN assignments d ON d.id = l.donor_id AND d.uid = l.donor_uid "
            "WHERE d.state = 'accepted'"
        ).fetchone()[0]
        total = connection.execute("SELECT count(*) FROM lineage").fetchone()[0]
    connection.close()
    assert orphans == 0
    assert linked == total > 0


def test_without_a_formula_same_loss_says_that_it_is_left_out(speclib: Any, library: Path) -> None:
    assert library.exists()
    found = document(speclib(*L, "carry", "unknown.txt", "--mass", "128", "--no-save", "--json"))
    assert {p["route"] for p in found["proposals"]} == {"same-ion"}
    assert any("same-loss is left out" in remark for remark in found["remarks"])


def test_a_stranger_gets_nothing_and_is_told(speclib: Any, library: Path) -> None:
    assert library.exists()
    found = document(speclib(*L, "carry", "stranger.txt", "--no-save", "--json"))
    assert (found["proposals"], found["refused"], found["donors"]) == ([], [], [])
    assert any("stranger" in remark for remark in found["remarks"])


def test_decisions_are_made_once_unless_revised_with_a_reason(speclib: Any, library: Path) -> None:
    assert library.exists()
    ids = [p["id"] for p in document(speclib(*CARRY, *BY, "--json"))["proposals"]]
    review = (*L, "review", "1")
    done = document(speclib(*review, "--accept", ids[0], "--reject", ids[1], "--reason", "57 is C4H9", *BY, "--json"))
    assert (done["accepted"], done["rejected"], done["undecided"]) == ([ids[0]], [ids[1]], len(ids) - 2)
    assert speclib(*review, "--reject", ids[0], "--reason", "no", *BY).status == 1
    assert speclib(*review, "--reject", ids[0], "--revise", *BY).status == 1
    ok(speclib(*review, "--reject", ids[0], "--revise", "--reason", "seen again", *BY))
    assert speclib(*review, "--reject", ids[2], *BY).status == 1
    assert speclib(*review, "--accept", ids[2], "--accept", 999, *BY).status == 1
    by_rule = document(speclib(*review, "--accept-from", "0.95", *BY, "--json"))
    shown = document(speclib(*L, "case", "show", "1", "--json"))
    states = {p["id"]: p["state"] for p in shown["proposals"]}
    assert all(states[i] == "accepted" for i in by_rule["accepted"])
    assert states[ids[0]] == states[ids[1]] == "rejected"
    with sqlite3.connect(library) as connection:
        how = dict(connection.execute("SELECT id, accepted_how FROM assignments WHERE state = 'accepted'").fetchall())
    connection.close()
    assert {how[i] for i in by_rule["accepted"]} == {"by rule"}
    assert ok(speclib(*L, "verify")).status == 0


def test_a_second_case_on_the_same_unknown_is_mentioned(speclib: Any, library: Path) -> None:
    assert library.exists()
    ok(speclib(*CARRY, *BY))
    again = document(speclib(*CARRY, *BY, "--json"))
    assert again["case_id"] == 2
    assert again["unknown"]["spectrum_id"] == 5
    assert any("case 1" in remark for remark in again["remarks"])


def test_accepted_proposals_of_an_unknown_are_no_donors(speclib: Any, library: Path) -> None:
    assert library.exists()
    first = document(speclib(*CARRY, *BY, "--json"))
    ok(speclib(*L, "review", "1", "--accept", first["proposals"][0]["id"], *BY))
    second = document(speclib(*CARRY, "--no-save", "--json"))
    donors = {d["assignment_id"] for p in second["proposals"] for d in p["donors"]}
    assert donors <= {a["id"] for a in _all_manual(speclib)}


def _all_manual(speclib: Any) -> list[Any]:
    found: list[Any] = []
    for name in ("2-hexanone", "2-heptanone"):
        found += document(speclib(*L, "compound", "show", name, "--json"))["assignments"]
    return found


def test_verify_names_a_change_made_outside_speclib(speclib: Any, library: Path) -> None:
    with sqlite3.connect(library) as connection:
        connection.execute("UPDATE compounds SET name = '3-hexanone' WHERE id = 1")
    connection.close()
    outcome = speclib(*L, "verify", "--json")
    assert outcome.status == 1
    assert outcome.document["intact"] is False
    assert "compounds" in outcome.document["differences"][0]


@pytest.mark.parametrize("number", range(len(COMMANDS)))
def test_every_command_explains_itself(speclib: Any, number: int) -> None:
    outcome = ok(speclib(list(COMMANDS)[number], "--help"))
    assert outcome.out.startswith("Usage: speclib ")


def test_tables_stay_within_a_hundred_columns(speclib: Any, library: Path) -> None:
    assert library.exists()
    for args in (
        (*L, "compound", "list"),
        (*L, "compound", "show", "2-hexanone"),
        (*L, "search", "unknown.txt", "--mass", "128", "--measure", "shifted"),
        (*CARRY, *BY),
        (*L, "case", "show", "1"),
        (*L, "case", "list"),
        (*L, "history"),
        (*L, "verify"),
    ):
        outcome = ok(speclib(*args))
        widest = max(outcome.out.splitlines(), key=len)
        assert len(widest) <= WIDTH, (args, widest)


def test_the_measures_offered_are_the_measures_there_are(speclib: Any) -> None:
    shown = ok(speclib("search", "--help")).out
    assert all(measure.value in shown for measure in Measure)


def test_search_and_carry_show_the_caution(speclib: Any, library: Path) -> None:
    assert library.exists()
    for args in ((*L, "search", "unknown.txt"), (*CARRY, "--no-save")):
        assert "authentic standard" in ok(speclib(*args)).err


def test_a_number_as_a_name_in_a_manifest_is_a_name_and_no_id(speclib: Any, library: Path) -> None:
    assert library.exists()
    Path("number.csv").write_text("file,compound,status,standard\nunknown.txt,1,confirmed,lot\n", encoding="utf-8")
    outcome = speclib(*L, "intake", "--manifest", "number.csv", *BY, "--json")
    assert outcome.status == 1
    assert "no compound '1'" in outcome.document["skipped"][0]["reason"]


def test_a_replicate_does_not_silence_the_doubt_about_another_compound(speclib: Any, library: Path) -> None:
    assert library.exists()
    args = ("intake", "heptanone.txt", "--compound", "3-heptanone", "--smiles", "CCCCC(=O)CC", "--replicate")
    taken = document(speclib(*L, *args, *BY, "--json"))["spectra"][0]
    assert [f["check"] for f in taken["findings"]] == ["identical peaks"]


def test_carrying_to_a_reference_takes_nothing_from_its_own_compound(speclib: Any, library: Path) -> None:
    assert library.exists()
    found = document(speclib(*L, "carry", "1", "--no-save", "--json"))
    assert {d["compound"]["name"] for d in found["donors"]} == {"2-heptanone"}


def test_a_carried_assignment_is_no_evidence_for_others(speclib: Any, library: Path) -> None:
    assert library.exists()
    case = document(speclib(*L, "carry", "2", *BY, "--json"))["case_id"]
    ok(speclib(*L, "review", case, "--accept-from", "0.5", *BY))
    found = document(speclib(*L, "carry", "3", "--no-save", "--json"))
    manual = {a["id"] for a in _all_manual(speclib) if a["origin"] == "manual"}
    assert {d["assignment_id"] for p in found["proposals"] for d in p["donors"]} <= manual


def test_accurate_spectra_find_their_relatives_with_a_nominal_mass(speclib: Any, library: Path) -> None:
    assert library.exists()
    head = "# mass_accuracy: accurate\n# mz_from: 25\n# mz_to: 300\n"
    Path("acc.txt").write_text(head + "43.0178\t900\n58.0413\t500\n71.0491\t50\n85.0648\t60\n100.0883\t80\n", "utf-8")
    Path("hom.txt").write_text(head + "43.0178\t900\n58.0413\t600\n71.0491\t60\n113.0961\t50\n128.1196\t50\n", "utf-8")
    ok(speclib(*L, "intake", "acc.txt", "--compound", "2-hexanone", *BY))
    found = document(
        speclib(*L, "search", "hom.txt", "--mass", "128", "--measure", "shifted", "--all-replicates", "--json")
    )
    assert 5 in [n["spectrum_id"] for n in found["neighbours"]]


def test_a_reviewer_who_looked_at_an_older_state_of_the_case_is_told(speclib: Any, library: Path) -> None:
    assert library.exists()
    first, second, *_ = (p["id"] for p in document(speclib(*CARRY, *BY, "--json"))["proposals"])
    rev = document(speclib(*L, "case", "show", "1", "--json"))["rev"]
    ok(speclib(*L, "review", "1", "--accept", first, "--seen-rev", rev, *BY))
    late = speclib(*L, "review", "1", "--accept", second, "--seen-rev", rev, *BY)
    assert late.status == 1
    assert "changed by somebody else" in late.err
    ok(speclib(*L, "review", "1", "--accept", second, "--seen-rev", rev + 1, *BY))


def test_a_lock_in_the_middle_of_a_batch_leaves_a_full_account(
    speclib: Any, library: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    from speclib.errors import LibraryBusyError
    from speclib.workflows import intake

    assert library.exists()
    store = intake._intake_file

    def busy_at_the_second(library: Any, path: Path, *rest: Any) -> Any:
        if path.name == "stranger.txt":
            raise LibraryBusyError("the library is in use by another process", "try again in a moment")
        return store(library, path, *rest)

    monkeypatch.setattr(intake, "_intake_file", busy_at_the_second)
    outcome = speclib(*L, "intake", "unknown.txt", "stranger.txt", *BY, "--json")
    assert outcome.status == 1
    assert [s["file"] for s in outcome.document["spectra"]] == ["unknown.txt"]
    assert outcome.document["skipped"][0]["file"] == "stranger.txt"


def test_a_withdrawn_donor_donates_no_more_and_flags_the_cases_that_rest_on_it(speclib: Any, library: Path) -> None:
    assert library.exists()
    ok(speclib(*CARRY, *BY))
    assert speclib(*L, "withdraw", "1", *BY).status == 1
    done = document(speclib(*L, "withdraw", "1", "--reason", "another lot was run", *BY, "--json"))
    assert done["flagged_cases"] == [1]
    assert done["withdrawn"][0]["status"] == "withdrawn"
    flags = document(speclib(*L, "case", "show", "1", "--json"))["flags"]
    assert flags
    assert all("another lot was run" in flag["reason"] for flag in flags)
    assert "FLAGGED" in ok(speclib(*L, "case", "show", "1")).out
    found = document(speclib(*CARRY, "--no-save", "--json"))
    assert {d["spectrum_id"] for p in found["proposals"] for d in p["donors"]} == {3}
    assert speclib(*L, "withdraw", "1", "--reason", "again", *BY).status == 1
    assert speclib(*L, "review", "1", "--settle-flags", *BY).status == 1
    ok(speclib(*L, "review", "1", "--settle-flags", "--reason", "the other donor says the same", *BY))
    assert document(speclib(*L, "case", "show", "1", "--json"))["flags"] == []
    assert ok(speclib(*L, "verify")).status == 0


def test_a_wrong_assignment_can_be_retracted_and_made_again(speclib: Any, library: Path) -> None:
    assert library.exists()
    typo = ("assign", "2", "--mz", "43", "--formula", "C2H3O", "--mechanism", "aplha cleavage")
    made = document(speclib(*L, *typo, *BY, "--json"))["assignments"][0]["id"]
    done = document(speclib(*L, "withdraw", "--assignment", made, "--reason", "typing error", *BY, "--json"))
    assert (done["retracted"]["state"], done["flagged_cases"]) == ("rejected", [])
    ok(speclib(*L, "assign", "2", "--mz", "43", "--formula", "C2H3O", "--mechanism", "alpha-cleavage", *BY))
    assert speclib(*L, "withdraw", "--assignment", made, "--reason", "twice", *BY).status == 1
    assert speclib(*L, "withdraw", "--assignment", 999, "--reason", "none", *BY).status == 1
    assert speclib(*L, "withdraw", "1", "--assignment", made, "--reason", "both", *BY).status == 2
    assert ok(speclib(*L, "verify")).status == 0


def test_a_derivative_may_stand_above_its_parent_in_a_manifest(speclib: Any, library: Path) -> None:
    assert library.exists()
    Path("family.csv").write_text(
        "file,compound,smiles,derivative_of\nunknown.txt,octanol TMS,CCCCCCCCO[Si](C)(C)C,octanol\n"
        "stranger.txt,octanol,CCCCCCCCO,\n",
        encoding="utf-8",
    )
    ok(speclib(*L, "intake", "--manifest", "family.csv", *BY))
    parent, child = (document(speclib(*L, "compound", "show", n, "--json")) for n in ("octanol", "octanol TMS"))
    assert child["compound"]["derivative_of"] == parent["compound"]["id"]


def test_references_of_one_compound_with_different_carrier_gases_are_a_doubt(speclib: Any, library: Path) -> None:
    assert library.exists()
    for gas, height in (("helium", 90), ("helium", 91), ("hydrogen", 92)):
        lines = [
            "# mz_from: 25",
            "# mz_to: 300",
            f"# carrier_gas: {gas}",
            "27\t30",
            "41\t40",
            "43\t100",
            "58\t60",
            f"71\t{height}",
        ]
        Path(f"{gas}_{height}.txt").write_text("\n".join(lines) + "\n", encoding="utf-8")
        taken = document(speclib(*L, "intake", f"{gas}_{height}.txt", "--compound", "2-hexanone", *BY, "--json"))
        reasons = [f["reason"] for f in taken["spectra"][0]["findings"] if f["check"] == "mixed conditions"]
        assert bool(reasons) is (gas == "hydrogen"), reasons


def test_accept_from_leaves_a_peak_alone_that_has_an_accepted_ion(speclib: Any, library: Path) -> None:
    assert library.exists()
    proposals = document(speclib(*CARRY, *BY, "--json"))["proposals"]
    first = proposals[0]["id"]
    ok(speclib(*L, "review", "1", "--accept", first, *BY))
    done = document(speclib(*L, "review", "1", "--accept-from", "0.0", *BY, "--json"))
    by_peak = {p["id"]: p["mz"] for p in proposals}
    peaks = [by_peak[i] for i in [first, *done["accepted"]]]
    assert len(peaks) == len(set(peaks))


def test_a_withdrawn_neighbour_flags_the_case_though_its_replicate_has_the_assignments(
    speclib: Any, library: Path
) -> None:
    assert library.exists()
    donors = document(speclib(*CARRY, *BY, "--json"))["donors"]
    near = next(d["spectrum_id"] for d in donors if d["compound"]["name"] == "2-hexanone")
    done = document(speclib(*L, "withdraw", near, "--reason", "wrong vial", *BY, "--json"))
    assert done["flagged_cases"] == [1]
    assert len(document(speclib(*L, "case", "show", "1", "--json"))["flags"]) == 1
    late = speclib(*L, "review", "1", "--accept-from", "0.5", *BY)
    assert late.status == 1
    assert "flagged" in late.err
    assert ok(speclib(*L, "verify")).status == 0


def test_what_was_not_measured_gets_no_assignment(speclib: Any, library: Path) -> None:
    assert library.exists()
    Path("zero.txt").write_text("# mz_from: 25\n# mz_to: 300\n43\t100\n58\t0\n71\t20\n85\t20\n128\t10\n", "utf-8")
    args = ("carry", "zero.txt", "--formula", "C8H16O", "--no-save", "--min-similarity", "0.05", "--json")
    found = document(speclib(*L, *args))
    assert found["proposals"]
    assert 58.0 not in [p["mz"] for p in found["proposals"]]


def test_an_ion_far_more_unsaturated_than_the_molecule_is_refused(speclib: Any, library: Path) -> None:
    assert library.exists()
    ok(speclib(*L, "assign", "4", "--mz", "91", "--formula", "C7H7", "--mechanism", "benzylic cleavage", *BY))
    lines = "# mz_from: 25\n# mz_to: 300\n39\t30\n65\t30\n91\t100\n105\t20\n140\t10\n"
    Path("saturated.txt").write_text(lines, "utf-8")
    args = ("carry", "saturated.txt", "--formula", "C9H20O", "--no-save", "--min-similarity", "0.05", "--json")
    found = document(speclib(*L, *args))
    assert "C7H7" not in [p["formula"] for p in found["proposals"]]
    assert [p["refused_by"] for p in found["refused"] if p["formula"] == "C7H7"] == ["formula"]
