"""Isotope patterns against check values and an independent convolution with the tables of two packages."""

from __future__ import annotations

import json
import math
import random
from functools import reduce
from pathlib import Path
from typing import Any

import molmass
import numpy as np
import pytest
from pyteomics import mass as pyteomics_mass

from speclib.chemistry.elements import ELEMENTS
from speclib.chemistry.formula import MAX_ATOMS, Formula, parse_formula
from speclib.chemistry.isotopes import isotope_pattern

GOLDEN = Path(__file__).parents[1] / "golden"


def golden(name: str) -> list[dict[str, Any]]:
    values: list[dict[str, Any]] = json.loads((GOLDEN / name).read_text(encoding="utf-8"))["values"]
    return values


@pytest.mark.parametrize("row", golden("isotope_patterns.json"), ids=lambda row: row["formula"])
def test_patterns_equal_the_check_values(row: dict[str, Any]) -> None:
    pattern = isotope_pattern(parse_formula(row["formula"]))
    for offset, relative in row["peaks"]:
        assert pattern[offset] == pytest.approx(relative, abs=max(0.15, 0.015 * relative))
    assert max(pattern, key=lambda offset: pattern[offset]) == row["most_intense_offset"]


@pytest.mark.parametrize("row", golden("isotope_patterns_reference_isotope.json"), ids=lambda row: row["formula"])
def test_patterns_with_satellites_on_both_sides_equal_the_check_values(row: dict[str, Any]) -> None:
    formula = parse_formula(row["formula"])
    pattern = isotope_pattern(formula)
    assert formula.nominal_mass == row["nominal"]
    for offset, relative in row["peaks"]:
        assert pattern[offset] == pytest.approx(relative, abs=max(0.25, 0.02 * relative))
    assert max(pattern, key=lambda offset: pattern[offset]) == row["most_intense_offset"]


def convolved(formula: Formula, table: dict[str, dict[int, float]]) -> dict[int, float]:
    """Pattern by numpy's convolution of dense arrays, relative to the reference composition = 100."""
    parts = []
    start = 0
    for symbol, count in formula:
        lightest = min(table[symbol])
        dense = np.zeros(max(table[symbol]) - lightest + 1)
        for number, abundance in table[symbol].items():
            dense[number - lightest] = abundance
        parts.extend([dense] * count)
        start += lightest * count
    whole = reduce(np.convolve, parts)
    reference = formula.nominal_mass - start
    return {i - reference: 100.0 * float(height / whole[reference]) for i, height in enumerate(whole)}


MOLMASS = {
    symbol: {number: isotope.abundance for number, isotope in molmass.ELEMENTS[symbol].isotopes.items()}
    for symbol in ELEMENTS
    if symbol != "D"
}
PYTEOMICS = {
    symbol: {n: share for n, (_, share) in pyteomics_mass.nist_mass[symbol].items() if n and share > 0}
    for symbol in ELEMENTS
    if symbol != "D"
}


@pytest.mark.parametrize("table", [MOLMASS, PYTEOMICS], ids=["molmass", "pyteomics"])
def test_patterns_equal_an_independent_convolution_with_another_table(table: dict[str, dict[int, float]]) -> None:
    rng = random.Random(11)
    symbols = [symbol for symbol in table if symbol != "Ge"]  # revised in 2013; both packages are older
    for _ in range(150):
        counts = {"C": rng.randint(1, 40), "H": rng.randint(0, 80)}
        counts |= {s: rng.randint(1, 6) for s in rng.sample(symbols, rng.randint(0, 3)) if s not in counts}
        formula = Formula.of(counts)
        ours, theirs = isotope_pattern(formula), convolved(formula, table)
        assert ours.keys() <= theirs.keys()
        for offset, relative in theirs.items():
            # What is left out is at most 0.0001; the tables are the same, so nothing else may differ.
            assert ours.get(offset, 0.0) == pytest.approx(relative, rel=1e-5, abs=1.01e-4)


def test_the_reference_composition_is_always_100_and_listed_in_order() -> None:
    for text in ("C6Br6", "C16H36Sn", "Hg2", "C10H22", "D2O", "F"):
        pattern = isotope_pattern(parse_formula(text))
        assert pattern[0] == 100.0
        assert list(pattern) == sorted(pattern)
    assert isotope_pattern(Formula()) == {0: 100.0}


def test_heights_that_nothing_can_show_are_left_out() -> None:
    assert all(height >= 1e-4 for height in isotope_pattern(parse_formula("C40H82")).values())


def test_deuterium_labels_have_no_satellite_of_their_own() -> None:
    assert isotope_pattern(parse_formula("D6")) == {0: 100.0}


@pytest.mark.parametrize("symbol", [symbol for symbol in ELEMENTS if symbol != "D"])
def test_patterns_stay_finite_up_to_the_largest_formula_that_is_read(symbol: str) -> None:
    pattern = isotope_pattern(parse_formula(f"{symbol}{MAX_ATOMS}"))
    assert all(math.isfinite(height) for height in pattern.values())


def test_a_pattern_given_out_can_be_changed_without_harm() -> None:
    pattern = isotope_pattern(parse_formula("CH4"))
    pattern[0] = 0.0
    assert isotope_pattern(parse_formula("CH4"))[0] == 100.0
