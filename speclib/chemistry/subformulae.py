"""Sub-formulas of a molecular formula near a mass: what an ion of the molecule can be made of.

Limits: at most the atoms of the parent, RDBE of at least -0.5 (McLafferty & Turecek 1993; Senior, Am. J. Math. 1951,
73, 663).
"""

from __future__ import annotations

from collections.abc import Iterator

from speclib.chemistry.elements import ELECTRON_MASS, ELEMENTS
from speclib.chemistry.formula import Formula

LOWEST_RDBE = -0.5
MOST_RDBE_GAINED = 1.5
LONE_PAIRS = ("N", "O", "P", "S", "Se", "F", "Cl", "Br", "I")


def can_be_an_ion(composition: Formula) -> bool:
    """Whether a composition leaves its atoms enough bonds to be a singly charged ion.

    Below RDBE 0 an ion is a protonated saturated molecule, so it needs an atom with a lone pair: CH6N+, but not C2H7+.
    """
    if composition.rdbe < LOWEST_RDBE:
        return False
    return composition.rdbe >= 0 or any(composition[symbol] for symbol in LONE_PAIRS)


def subformulae_near_mz(parent: Formula, mz: float, tolerance_da: float) -> list[Formula]:
    """Compositions of singly charged ions of `parent` whose m/z lies within `tolerance_da` of `mz`, by mass error.

    The parent itself is included when it fits.
    """
    target = mz + ELECTRON_MASS
    found = [f for f in _walk(parent, target, tolerance_da) if f.rdbe >= LOWEST_RDBE]
    return sorted(found, key=lambda f: (abs(f.exact_mass - target), f))


def subformulae_of_nominal_mz(parent: Formula, nominal_mz: int) -> list[Formula]:
    """Compositions of singly charged ions of `parent` with the given nominal m/z, the parent included, in Hill order.

    Above m/z 250 the mass defect of a composition lies within 2 per mille of its mass (Br2 -1.0, alkanes up to
    1.2), below within 0.5, so that window is searched and the nominal mass then decides.
    """
    wanted = float(nominal_mz)
    found = _walk(parent, wanted, max(0.5, 2e-3 * wanted))
    return sorted(f for f in found if f.nominal_mass == nominal_mz and f.rdbe >= LOWEST_RDBE)


def plausible_ions(molecule: Formula, nominal_mz: int) -> list[Formula]:
    """Sub-formulas of a molecule at a nominal m/z that can be ions and are not far more unsaturated than it.

    Fragments gain little unsaturation: toluene (RDBE 4) reaches C7H5+ (5.5), hence the limit; common practice, no
    source.
    """
    found = subformulae_of_nominal_mz(molecule, nominal_mz)
    return [f for f in found if can_be_an_ion(f) and f.rdbe <= molecule.rdbe + MOST_RDBE_GAINED]


def _walk(parent: Formula, target: float, tolerance: float) -> Iterator[Formula]:
    """All sub-formulas within `tolerance` of `target`; heavy elements are chosen first, hydrogen follows from the
    rest.
    """
    heavy = sorted(
        ((symbol, count) for symbol, count in parent if symbol != "H"),
        key=lambda item: -ELEMENTS[item[0]].exact_mass,
    )
    hydrogen, h_max = ELEMENTS["H"].exact_mass, parent["H"]
    room = [0.0] * (len(heavy) + 1)
    room[-1] = h_max * hydrogen
    for i in range(len(heavy) - 1, -1, -1):
        room[i] = room[i + 1] + heavy[i][1] * ELEMENTS[heavy[i][0]].exact_mass

    def descend(level: int, chosen: dict[str, int], left: float) -> Iterator[Formula]:
        if left < -tolerance or left > room[level] + tolerance:
            return
        if level == len(heavy):
            lowest = max(0, round((left - tolerance) / hydrogen - 0.5))
            for count in range(lowest, min(h_max, int((left + tolerance) / hydrogen)) + 1):
                if abs(left - count * hydrogen) <= tolerance and (count or any(chosen.values())):
                    yield Formula.of({**chosen, "H": count})
            return
        symbol, most = heavy[level]
        mass = ELEMENTS[symbol].exact_mass
        for count in range(min(most, int((left + tolerance) / mass)) + 1):
            yield from descend(level + 1, {**chosen, symbol: count}, left - count * mass)

    yield from descend(0, {}, target)
