"""The source tables of the demo library: formulas, isotope patterns, reading, and what must be true of every row.

Standard library only. `make_demo_library.py` computes the files from what is read here.
"""

from __future__ import annotations

import csv
import re
from collections.abc import Collection, Iterable
from dataclasses import dataclass
from pathlib import Path

MZ_FROM, MZ_TO = 33, 400
"""The range that the invented instrument scans."""

ISOTOPES: dict[str, tuple[int, dict[int, float]]] = {
    "H": (1, {0: 0.999885, 1: 0.000115}),
    "C": (12, {0: 0.9893, 1: 0.0107}),
    "N": (14, {0: 0.99636, 1: 0.00364}),
    "O": (16, {0: 0.99757, 1: 0.00038, 2: 0.00205}),
    "F": (19, {0: 1.0}),
    "Si": (28, {0: 0.92223, 1: 0.04685, 2: 0.03092}),
    "P": (31, {0: 1.0}),
    "S": (32, {0: 0.9499, 1: 0.0075, 2: 0.0425, 4: 0.0001}),
    "Cl": (35, {0: 0.7576, 2: 0.2424}),
    "Br": (79, {0: 0.5069, 2: 0.4931}),
}
"""Mass number of the lightest isotope and abundances by offset from it (IUPAC 2013 tables, rounded)."""


Composition = dict[str, int]


class TableError(Exception):
    """What is wrong in the tables, one line each."""


@dataclass(frozen=True)
class Peak:
    """One fragment ion of the table: the peak of its lightest isotopes, relative to the others of the compound."""

    line: int
    compound: str
    mz: int
    height: float
    ion: str
    loss: str
    mechanism: str
    note: str


@dataclass(frozen=True)
class Subject:
    """A compound or an unknown as the tables describe it; `layout` is the spelling of its files."""

    name: str
    formula: str
    smiles: str
    cas: str
    classes: str
    rt_min: float
    ri: int
    status: str
    standard: str
    layout: str

    @property
    def stem(self) -> str:
        """The name as the beginning of a file name."""
        return re.sub(r"[^A-Za-z0-9]+", "_", self.name).strip("_")


# Formulas and isotopes


def parse_formula(text: str) -> Composition:
    """Read a plain formula such as C7H21O4Si4.

    Raises:
        ValueError: it holds anything else than known element symbols and counts.
    """
    if not re.fullmatch(r"([A-Z][a-z]?[0-9]*)*", text):
        raise ValueError(f"{text!r} is not a plain formula")
    composition: Composition = {}
    for symbol, count in re.findall(r"([A-Z][a-z]?)([0-9]*)", text):
        if symbol not in ISOTOPES:
            raise ValueError(f"{text}: no isotopes are listed for {symbol!r}")
        composition[symbol] = composition.get(symbol, 0) + int(count or 1)
    return composition


def hill_order(composition: Composition) -> str:
    """Write a formula in Hill order."""
    first = ("C", "H") if "C" in composition else ()
    symbols = [*(s for s in first if s in composition), *sorted(s for s in composition if s not in first)]
    return "".join(f"{s}{composition[s] if composition[s] > 1 else ''}" for s in symbols if composition[s])


def nominal_mass(composition: Composition) -> int:
    """The sum of the mass numbers of the lightest isotopes."""
    return sum(ISOTOPES[symbol][0] * count for symbol, count in composition.items())


def isotope_pattern(composition: Composition) -> list[float]:
    """Heights by mass offset, relative to the composition of the lightest isotopes = 1, by plain convolution."""
    pattern = [1.0]
    for symbol, count in sorted(composition.items()):
        shares = ISOTOPES[symbol][1]
        for _ in range(count):
            grown = [0.0] * (len(pattern) + max(shares))
            for offset, height in enumerate(pattern):
                for step, share in shares.items():
                    grown[offset + step] += height * share
            pattern = grown
        while len(pattern) > 1 and pattern[-1] < pattern[0] * 1e-6:
            pattern.pop()
    return [height / pattern[0] for height in pattern]


def is_valid_cas(text: str) -> bool:
    """Whether form and check digit are those of a CAS Registry Number."""
    match = re.fullmatch(r"([1-9][0-9]{1,6})-([0-9]{2})-([0-9])", text)
    if match is None:
        return False
    digits = reversed(match[1] + match[2])
    return sum(place * int(digit) for place, digit in enumerate(digits, start=1)) % 10 == int(match[3])


# Tables


def _rows(path: Path) -> list[tuple[int, dict[str, str]]]:
    with path.open(encoding="utf-8", newline="") as handle:
        return [
            (number, {k: v.strip() for k, v in row.items()}) for number, row in enumerate(csv.DictReader(handle), 2)
        ]


def read_compounds(tables: Path) -> list[Subject]:
    """The compounds of the library, in the order of the table."""
    return [
        Subject(
            row["name"],
            row["formula"],
            row["smiles"],
            row["cas"],
            row["classes"],
            float(row["rt_min"]),
            int(row["ri"]),
            row["status"],
            row["standard"],
            row["layout"],
        )
        for _, row in _rows(tables / "compounds.csv")
    ]


def read_unknowns(tables: Path) -> list[Subject]:
    """The unknowns; their `name` is that of the file, so that it never gives the answer away."""
    return [
        Subject(
            row["file"], row["formula"], row["smiles"], "", "", float(row["rt_min"]), int(row["ri"]), "", "", "text"
        )
        for _, row in _rows(tables / "unknowns.csv")
    ]


def read_peaks(tables: Path) -> list[Peak]:
    """All fragment ions, in the order of the table."""
    return [
        Peak(
            line,
            row["compound"],
            int(row["mz"]),
            float(row["relative_intensity"]),
            row["ion_formula"],
            row["neutral_loss"],
            row["mechanism"],
            row["note"],
        )
        for line, row in _rows(tables / "peaks.csv")
    ]


def read_mechanisms(tables: Path) -> frozenset[str]:
    """The names that a mechanism may have, as textbooks use them: a slip of the pen is caught by them."""
    return frozenset((tables / "mechanisms.txt").read_text(encoding="utf-8").splitlines())


def check_tables(subjects: Iterable[Subject], peaks: Iterable[Peak], mechanisms: Collection[str]) -> None:
    """Hold every row against what must be true of it.

    Raises:
        TableError: everything that is wrong.
    """
    by_name = {subject.name: subject for subject in subjects}
    wrong = [
        f"compounds.csv: {s.name}: {s.cas} has a wrong check digit"
        for s in by_name.values()
        if s.cas and not is_valid_cas(s.cas)
    ]
    wrong += [
        f"compounds.csv: {s.name}: status {s.status!r} with standard {s.standard!r}"
        for s in by_name.values()
        if (s.status == "confirmed") != bool(s.standard)
    ]
    seen: set[tuple[str, int, str]] = set()
    for peak in peaks:
        place = f"peaks.csv, line {peak.line}: {peak.compound} m/z {peak.mz}"
        if peak.compound not in by_name:
            wrong.append(f"{place}: no such compound")
            continue
        wrong += [f"{place}: {reason}" for reason in _wrong_with(peak, by_name[peak.compound].formula)]
        if peak.mechanism and peak.mechanism not in mechanisms:
            wrong.append(f"{place}: the mechanism {peak.mechanism!r} is not in mechanisms.txt")
        key = (peak.compound, peak.mz, peak.ion)
        if key in seen:
            wrong.append(f"{place}: {peak.ion} stands there twice")
        seen.add(key)
    have_peaks = {name for name, _, _ in seen}
    wrong += [f"peaks.csv: {name} has no peaks" for name in by_name if name not in have_peaks]
    if wrong:
        raise TableError("\n".join(wrong))


def _wrong_with(peak: Peak, molecule_text: str) -> list[str]:
    try:
        ion, loss, molecule = (parse_formula(text) for text in (peak.ion, peak.loss, molecule_text))
    except ValueError as error:
        return [str(error)]
    wrong = []
    total = {s: ion.get(s, 0) + loss.get(s, 0) for s in {*ion, *loss}}
    if total != molecule:
        wrong.append(f"{peak.ion} + {peak.loss or 'nothing'} is {hill_order(total)}, not {molecule_text}")
    if nominal_mass(ion) != peak.mz:
        wrong.append(f"{peak.ion} has the nominal mass {nominal_mass(ion)}")
    wrong += [
        f"{text} is {hill_order(composition)} in Hill order"
        for text, composition in ((peak.ion, ion), (peak.loss, loss))
        if text != hill_order(composition)
    ]
    if (peak.mechanism == "molecular ion") != (not peak.loss):
        wrong.append("'molecular ion' and an empty loss go together")
    if not (MZ_FROM <= peak.mz <= MZ_TO and peak.height > 0):
        wrong.append(f"m/z must lie in {MZ_FROM} to {MZ_TO} and the height above 0")
    return wrong
