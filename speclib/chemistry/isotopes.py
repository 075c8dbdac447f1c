"""Isotope patterns at unit resolution, with the composition of reference isotopes as 100.

Method: repeated convolution of the element patterns (Yergey, Int. J. Mass Spectrom. Ion Phys. 1983, 52, 337; Kubinyi,
Anal. Chim. Acta 1991, 247, 107). Satellites may lie on both sides of the reference peak (B, Se, Ge, Sn, Hg, Fe, Pb).
"""

from __future__ import annotations

from functools import lru_cache

from speclib.chemistry.elements import ELEMENTS
from speclib.chemistry.formula import Formula

_NEGLIGIBLE = 1e-6
Pattern = dict[int, float]


def isotope_pattern(formula: Formula) -> Pattern:
    """Return {offset from the reference composition in mass units: height relative to it = 100}.

    Heights below 0.0001 are left out. An empty formula gives {0: 100}.
    """
    return {offset: 100.0 * share for offset, share in _pattern(formula) if share >= _NEGLIGIBLE}


@lru_cache(maxsize=4096)
def _pattern(formula: Formula) -> tuple[tuple[int, float], ...]:
    total: Pattern = {0: 1.0}
    for symbol, count in formula:
        total = _convolve(total, _power(symbol, count))
    reference = total[0]
    return tuple(sorted((offset, share / reference) for offset, share in total.items()))


@lru_cache(maxsize=1024)
def _element_power(symbol: str, count: int) -> tuple[tuple[int, float], ...]:
    if count == 1:
        number, _, abundance = ELEMENTS[symbol].reference
        return tuple((mass - number, share / abundance) for mass, _, share in ELEMENTS[symbol].isotopes)
    half = dict(_element_power(symbol, count // 2))
    square = _convolve(half, half)
    return tuple((_convolve(square, _power(symbol, 1)) if count % 2 else square).items())


def _power(symbol: str, count: int) -> Pattern:
    return dict(_element_power(symbol, count))


def _convolve(a: Pattern, b: Pattern) -> Pattern:
    out: Pattern = {}
    for i, x in a.items():
        for j, y in b.items():
            out[i + j] = out.get(i + j, 0.0) + x * y
    # Offset 0 stays whatever its height: it is the reference of Sn10 as much as of C1.
    return {offset: share for offset, share in out.items() if share >= _NEGLIGIBLE * 1e-4 or offset == 0}
