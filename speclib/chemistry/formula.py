"""Molecular formulas: parsing, Hill order, exact arithmetic, masses, ion m/z, RDBE and parity.

Masses are those of the reference (most abundant) isotope of every element. The nominal mass is the sum of their mass
numbers, not the rounded exact mass (Murray et al., Pure Appl. Chem. 2013, 85, 1515).
"""

from __future__ import annotations

import re
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from functools import cached_property, lru_cache

from speclib.chemistry.elements import ELECTRON_MASS, ELEMENTS
from speclib.errors import InvalidFormulaError

_TOKEN = re.compile(r"([A-Z][a-z]?)([0-9]*)|(\()|\)([0-9]*)")
_CHARGE = re.compile(r"[\u2022.\u00b7]?[+]?[\u2022.\u00b7]?$")
MAX_FORMULA_LENGTH = 200
MAX_ATOMS = 500
"""C120H242, beyond any gas chromatograph, has 362; isotope patterns stay within float64 up to here."""


def _hill_key(symbol: str, has_carbon: bool) -> tuple[int, str]:
    if has_carbon and symbol in ("C", "H", "D"):
        return ("C", "H", "D").index(symbol), symbol
    return 3, symbol


@dataclass(frozen=True, order=True)
class Formula:
    """An immutable molecular formula.

    `counts` holds (symbol, count > 0) in Hill order: C, H (then D), then the alphabet; without C, the alphabet only.
    Build one with `parse_formula` or `Formula.of`.
    """

    counts: tuple[tuple[str, int], ...] = ()

    @classmethod
    def of(cls, counts: Mapping[str, int]) -> Formula:
        """Build a formula from element counts; zero counts are dropped.

        Raises:
            InvalidFormulaError: unknown element or negative count.
        """
        for symbol, count in counts.items():
            if symbol not in ELEMENTS:
                raise InvalidFormulaError(f"{symbol!r} is not an element that speclib knows")
            if count < 0:
                raise InvalidFormulaError(f"a formula cannot hold {count} {symbol}")
        kept = {symbol: count for symbol, count in counts.items() if count}
        order = sorted(kept, key=lambda symbol: _hill_key(symbol, "C" in kept))
        return cls(tuple((symbol, kept[symbol]) for symbol in order))

    @cached_property
    def _by_symbol(self) -> dict[str, int]:
        return dict(self.counts)

    def __getitem__(self, symbol: str) -> int:
        """Number of atoms of an element (0 when absent)."""
        return self._by_symbol.get(symbol, 0)

    def __iter__(self) -> Iterator[tuple[str, int]]:
        return iter(self.counts)

    def __bool__(self) -> bool:
        return bool(self.counts)

    def __str__(self) -> str:
        return "".join(f"{symbol}{count if count > 1 else ''}" for symbol, count in self.counts)

    def __repr__(self) -> str:
        return f"Formula({str(self)!r})"

    def __add__(self, other: Formula) -> Formula:
        return Formula.of({s: self[s] + other[s] for s in {*self._by_symbol, *other._by_symbol}})

    def __sub__(self, other: Formula) -> Formula:
        return Formula.of({s: self[s] - other[s] for s in {*self._by_symbol, *other._by_symbol}})

    def contains(self, other: Formula) -> bool:
        """Whether every atom of `other` is in this formula.

        A plain H of `other` may come from a D label here only as D itself: labels are kept apart.
        """
        return all(self[symbol] >= count for symbol, count in other.counts)

    @cached_property
    def exact_mass(self) -> float:
        """Mass of the neutral composition of reference isotopes, in Da."""
        return sum(ELEMENTS[symbol].exact_mass * count for symbol, count in self.counts)

    @cached_property
    def nominal_mass(self) -> int:
        """Sum of the mass numbers of the reference isotopes."""
        return sum(ELEMENTS[symbol].nominal_mass * count for symbol, count in self.counts)

    def ion_mz(self, charge: int = 1) -> float:
        """m/z of the positive ion of this composition: (mass - z electrons) / z."""
        if charge < 1:
            raise InvalidFormulaError(f"a charge of {charge} is not possible for an EI ion")
        return (self.exact_mass - charge * ELECTRON_MASS) / charge

    @cached_property
    def rdbe(self) -> float:
        """Rings plus double bonds: 1 + sum of n (valence - 2) / 2, lowest valences.

        McLafferty & Turecek 1993; for a cation an integer means OE, a half-integer EE.
        """
        return 1 + sum(count * (ELEMENTS[symbol].valence - 2) for symbol, count in self.counts) / 2

    @property
    def ion_parity(self) -> str:
        """`OE` (odd-electron) or `EE` (even-electron) of the singly charged cation."""
        return "OE" if float(self.rdbe).is_integer() else "EE"

    @property
    def atom_count(self) -> int:
        """All atoms, hydrogens included."""
        return sum(count for _, count in self.counts)


@lru_cache(maxsize=4096)
def parse_formula(text: str) -> Formula:
    """Read a neutral formula such as `C8H10N4O2`, `Fe(C5H5)2` or `C 3 H 8 O 1` (blanks are ignored).

    Raises:
        InvalidFormulaError: empty, unknown element, stray characters, unbalanced brackets, absurd size.
    """
    packed = "".join(text.split())
    if not packed:
        raise InvalidFormulaError("an empty text is not a formula")
    if len(packed) > MAX_FORMULA_LENGTH:
        raise InvalidFormulaError(f"a formula of {len(packed)} characters is not read")
    return Formula.of(_checked_counts(text, packed))


def _checked_counts(text: str, packed: str) -> dict[str, int]:
    stack: list[dict[str, int]] = [{}]
    position = 0
    while position < len(packed):
        match = _TOKEN.match(packed, position)
        if match is None:
            raise InvalidFormulaError(f"{text!r} is not a formula: cannot read {packed[position:][:12]!r}")
        symbol, number, opening, closing_number = match.groups()
        if opening:
            stack.append({})
        elif symbol:
            if symbol not in ELEMENTS:
                raise InvalidFormulaError(f"{text!r} is not a formula: {symbol!r} is not an element speclib knows")
            _add(stack[-1], {symbol: 1}, _count(text, number))
        else:
            if len(stack) == 1:
                raise InvalidFormulaError(f"{text!r} is not a formula: a bracket closes that was not opened")
            group = stack.pop()
            if not group:
                raise InvalidFormulaError(f"{text!r} is not a formula: a pair of brackets is empty")
            _add(stack[-1], group, _count(text, closing_number))
        position = match.end()
    if len(stack) != 1:
        raise InvalidFormulaError(f"{text!r} is not a formula: a bracket is not closed")
    if sum(stack[0].values()) > MAX_ATOMS:
        raise InvalidFormulaError(f"{text!r} has more than {MAX_ATOMS} atoms")
    return stack[0]


def _add(into: dict[str, int], group: Mapping[str, int], factor: int) -> None:
    for symbol, count in group.items():
        into[symbol] = into.get(symbol, 0) + count * factor


def _count(text: str, digits: str) -> int:
    if not digits:
        return 1
    if digits.startswith("0") or len(digits) > 5:
        raise InvalidFormulaError(f"{text!r} is not a formula: {digits} is not an atom count")
    return int(digits)


def parse_ion_formula(text: str) -> Formula:
    """Read the composition of a singly charged ion, with or without its charge sign: `C2H3O`, `C2H3O+`, `C3H6O+.`.

    Raises:
        InvalidFormulaError: as `parse_formula`.
    """
    return parse_formula(_CHARGE.sub("", text.strip()))


def obeys_nitrogen_rule(formula: Formula) -> bool:
    """Whether nominal mass and nitrogen count are both odd or both even (closed-shell neutral molecules).

    McLafferty & Turecek 1993; valid for H, B (11), C, N, O, F, Si, P, S, Cl, Br, I, Ge, Se, Sn. Deuterium labels add
    one each and are taken out first.
    """
    return (formula.nominal_mass - formula["D"]) % 2 == formula["N"] % 2


def require_closed_shell(formula: Formula) -> None:
    """Refuse a formula that no closed-shell neutral molecule has.

    Raises:
        InvalidFormulaError: too many hydrogens or halogens, or an odd electron.
    """
    # RDBE counts lowest valences: SF6 lies at -2, PCl5 at -1.
    lowest = -(2 * formula["S"] + 2 * formula["Se"] + formula["P"])
    if formula.rdbe < lowest or not float(formula.rdbe).is_integer():
        raise InvalidFormulaError(
            f"{formula} is not the formula of a neutral molecule (rings plus double bonds would be {formula.rdbe:g})",
            "check the hydrogens",
        )
