"""One full JSON document per command, kept as a golden file.

SPECLIB_UPDATE_GOLDEN=1 writes them anew: look at the diff.
"""

from __future__ import annotations

import json
import os
from pathlib import Path
from typing import Any

import pytest

GOLDEN = Path(__file__).parents[1] / "golden" / "json"
L = ("-L", "lab.sqlite")
BY = ("--by", "A. Analyst")
CARRY = (*L, "carry", "unknown.txt", "--mass", "128", "--formula", "C8H16O")

COMMANDS: dict[str, tuple[tuple[str, ...], ...]] = {
    "init": (("init", "other.sqlite", *BY),),
    "compound_add": ((*L, "compound", "add", "2-nonanone", "--smiles", "CCCCCCCC(C)=O", "--cas", "821-55-6",
                      "--synonym", "heptyl methyl ketone", "--class", "ketone", *BY),),
    "compound_add_from": ((*L, "compound", "add", "--from", "more.csv", *BY),),
    "compound_list": ((*L, "compound", "list"),),
    "compound_show": ((*L, "compound", "show", "2-hexanone"),),
    "intake": ((*L, "intake", "unknown.txt", "missing.txt", *BY),),
    "assign": ((*L, "assign", "2", "--mz", "58", "--formula", "C3H6O", "--mechanism",
                "McLafferty rearrangement", *BY),),
    "confirm": ((*L, "confirm", "2", "--standard", "invented standard lot 3", *BY),),
    "withdraw": ((*CARRY, *BY), (*L, "withdraw", "1", "--reason", "another lot was run", *BY)),
    "search": ((*L, "search", "unknown.txt", "--mass", "128", "--measure", "shifted"),),
    "carry": ((*CARRY, *BY),),
    "case_list": ((*CARRY, *BY), (*L, "case", "list")),
    "case_show": ((*CARRY, *BY), (*L, "case", "show", "1")),
    "review": ((*CARRY, *BY), (*L, "review", "1", "--accept", "9", "--reject", "10", "--reason", "checked", *BY)),
    "history": ((*L, "history"),),
    "verify": ((*L, "verify"),),
}  # fmt: skip


@pytest.mark.parametrize("name", COMMANDS)
def test_the_json_of_a_command_is_the_golden_one(speclib: Any, library: Path, name: str) -> None:
    (library.parent / "more.csv").write_text(
        "compound;smiles;cas;classes\n2-nonanone;CCCCCCCC(C)=O;821-55-6;ketone\nbroken;C1CC;;\n", encoding="utf-8"
    )
    for args in COMMANDS[name]:
        outcome = speclib(*args, "--json")
        # Two examples hold something that cannot be used: part of the batch skipped is exit 1.
        assert outcome.status == (1 if name in ("intake", "compound_add_from") else 0), outcome.err
    path = GOLDEN / f"{name}.json"
    if os.environ.get("SPECLIB_UPDATE_GOLDEN"):
        path.parent.mkdir(parents=True, exist_ok=True)
        path.write_text(outcome.out, encoding="utf-8")
    assert json.loads(path.read_text(encoding="utf-8")) == outcome.document


def test_every_golden_file_has_its_command() -> None:
    assert {path.stem for path in GOLDEN.glob("*.json")} == set(COMMANDS)


PROMISED: dict[str, set[str]] = {
    "search": {"query", "measure", "library_state", "release", "neighbours", "presence", "molecular_mass",
               "molecular_formula"},
    "search.neighbours": {"rank", "set", "spectrum_id", "compound", "similarity", "reverse_similarity", "matched_peaks",
                          "mass_difference", "ri_difference", "probability", "disagreements"},
    "search.neighbours.compound": {"id", "name", "formula", "inchikey", "smiles"},
    "search.presence": {"probability", "basis", "reason"},
    "search.molecular_mass": {"value", "origin", "alternatives"},
    "carry": {"case_id", "unknown", "library_state", "molecular_mass", "molecular_formula", "donors", "proposals",
              "refused", "difference"},
    "carry.proposals": {"id", "mz", "formula", "neutral_loss", "mechanism", "parity", "route", "donors", "checks",
                        "confidence", "confidence_basis", "reason"},
    "carry.proposals.donors": {"assignment_id", "spectrum_id", "route", "similarity"},
    "carry.proposals.checks": {"name", "passed", "detail"},
    "carry.difference": {"mass", "formulas", "interpretation", "atoms"},
    "intake": {"spectra", "skipped"},
    "intake.spectra": {"file", "index", "spectrum_id", "compound_id", "findings"},
    "intake.skipped": {"file", "reason"},
}  # fmt: skip
"""Keys that others rely on (DESIGN section 8)."""


@pytest.mark.parametrize("place", PROMISED)
def test_the_promised_keys_are_there(place: str) -> None:
    name, *steps = place.split(".")
    node: Any = json.loads((GOLDEN / f"{name}.json").read_text(encoding="utf-8"))
    for step in steps:
        node = node[step]
        if isinstance(node, list):
            assert node, f"the golden example shows no {step}"
            node = node[0]
    assert PROMISED[place] <= set(node)
