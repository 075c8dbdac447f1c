"""Sub-formulas: check values and brute force."""

from __future__ import annotations

import itertools
import json
import random
from pathlib import Path
from typing import Any

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from speclib.chemistry.elements import ELECTRON_MASS
from speclib.chemistry.formula import Formula, parse_formula
from speclib.chemistry.subformulae import LOWEST_RDBE, subformulae_near_mz, subformulae_of_nominal_mz

VALUES: list[dict[str, Any]] = json.loads(
    (Path(__file__).parents[1] / "golden" / "subformulae.json").read_text(encoding="utf-8")
)["values"]


def all_subformulae(parent: Formula) -> list[Formula]:
    """Every composition within `parent` that an ion can have, by counting through all of them."""
    ranges = [range(count + 1) for _, count in parent]
    symbols = [symbol for symbol, _ in parent]
    every = (Formula.of(dict(zip(symbols, counts, strict=True))) for counts in itertools.product(*ranges))
    return [formula for formula in every if formula and formula.rdbe >= LOWEST_RDBE]


@pytest.mark.parametrize("row", VALUES, ids=lambda row: f"{row['parent']}-{row['nominal_mz']}")
def test_check_values(row: dict[str, Any]) -> None:
    parent = parse_formula(row["parent"])
    # The check values list proper sub-formulas only.
    found = [f for f in subformulae_of_nominal_mz(parent, row["nominal_mz"]) if f != parent]
    expected = {text: (parity, rdbe, mz, loss) for text, parity, rdbe, mz, loss in row["subformulae"]}
    assert {str(formula) for formula in found} == set(expected)
    for formula in found:
        parity, rdbe, mz, loss = expected[str(formula)]
        assert (formula.ion_parity, formula.rdbe) == (parity, rdbe)
        assert formula.ion_mz() == pytest.approx(mz, abs=1e-4)
        assert str(parent - formula) == loss


def test_the_parent_is_one_of_its_sub_formulas() -> None:
    parent = parse_formula("C6H5Cl")
    assert subformulae_of_nominal_mz(parent, 112) == [parent]
    assert subformulae_near_mz(parent, parent.ion_mz(), 1e-4) == [parent]


@settings(deadline=None)
@given(
    st.dictionaries(
        st.sampled_from(["C", "H", "D", "N", "O", "F", "Si", "S", "Cl", "Br", "I", "B", "Se", "Sn"]),
        st.integers(1, 6),
        min_size=1,
        max_size=4,
    ),
    st.data(),
)
def test_nominal_search_equals_brute_force(counts: dict[str, int], data: st.DataObject) -> None:
    parent = Formula.of(counts)
    nominal = data.draw(st.integers(1, parent.nominal_mass))
    expected = [formula for formula in all_subformulae(parent) if formula.nominal_mass == nominal]
    assert subformulae_of_nominal_mz(parent, nominal) == sorted(expected)


@pytest.mark.parametrize(
    "text", ["C12H10O2Cl2", "C8H18OSi2", "C6H3Br3O", "C9H12N2O2S", "C6Br6", "CHI3", "C20H42", "C2H6Se", "C8H20Sn"]
)
def test_search_by_mz_equals_brute_force_in_order_of_mass_error(text: str) -> None:
    parent = parse_formula(text)
    everything = all_subformulae(parent)
    rng = random.Random(3)
    for _ in range(40):
        mz = rng.uniform(12.0, parent.exact_mass + 1.0)
        tolerance = rng.choice([0.001, 0.01, 0.15, 0.5])
        expected = [f for f in everything if abs(f.exact_mass - (mz + ELECTRON_MASS)) <= tolerance]
        found = subformulae_near_mz(parent, mz, tolerance)
        assert found == sorted(expected, key=lambda f: (abs(f.exact_mass - (mz + ELECTRON_MASS)), f))


def test_every_nominal_mass_of_a_large_molecule_equals_brute_force() -> None:
    # Hydrogen-rich at the top of the range, where mass defects near 1 would slip out of a narrow window.
    parent = parse_formula("C60H122")
    everything = all_subformulae(parent)
    for nominal in (15, 57, 282, 562, 786, 842):
        expected = sorted(f for f in everything if f.nominal_mass == nominal)
        assert subformulae_of_nominal_mz(parent, nominal) == expected
    parent = parse_formula("C12Br10O")
    everything = all_subformulae(parent)
    for nominal in (79, 238, 400, 640, 798, 950):
        expected = sorted(f for f in everything if f.nominal_mass == nominal)
        assert subformulae_of_nominal_mz(parent, nominal) == expected


def test_nothing_fits_outside_the_molecule() -> None:
    parent = parse_formula("C6H12O")
    assert subformulae_of_nominal_mz(parent, 101) == []
    assert subformulae_of_nominal_mz(parent, 0) == []
    assert subformulae_near_mz(parent, -5.0, 0.1) == []
