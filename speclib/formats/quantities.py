"""Values of labelled lines: numbers with units, whole numbers, ranges, ionisation, shared by all readers."""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass
from decimal import Decimal

from speclib.formats.number_text import NumberTextError, parse_number
from speclib.formats.options import DecimalMark
from speclib.model.spectrum import MassAccuracy, PhaseChemistry

_QUANTITY = re.compile(r"([+-]?[0-9.,]+(?:[eE][+-]?[0-9]{1,3})?) ?([^0-9].*)?")
_ONE_COMMA_THREE_DIGITS = re.compile(r"[+-]?[1-9][0-9]{0,2}[.,][0-9]{3}")
_RANGE = re.compile(r"([0-9.]+) ?(?:,|;|-|:|\.\.+|to| ) ?([0-9.]+) ?(?:m/z|da|amu|u)?", re.IGNORECASE)
MAX_VALUE_LENGTH = 200


class ValueTextError(ValueError):
    """A value of a labelled line that cannot be read; the text is the reason."""


@dataclass(frozen=True)
class Unit:
    """Spellings of units with their factors to the unit kept; `bare` is that of a number without a unit, or None.

    `signed` says that a value below 0 can be.
    """

    factors: Mapping[str, Decimal]
    advice: str
    bare: Decimal | None = None
    signed: bool = False


_ONE, _SIXTY = Decimal(1), Decimal(60)
TIME = Unit(
    {"s": _ONE, "sec": _ONE, "second": _ONE, "seconds": _ONE, "min": _SIXTY, "minute": _SIXTY, "minutes": _SIXTY},
    "write the unit, s or min",
)
SECONDS = Unit(TIME.factors, TIME.advice, bare=_ONE)
ENERGY = Unit({"ev": _ONE, "electronvolt": _ONE, "electron volts": _ONE}, "write it in eV", bare=_ONE)
TEMPERATURE = Unit({"c": _ONE, "degc": _ONE, "deg c": _ONE, "celsius": _ONE}, "write it in C", signed=True)
AMOUNT = Unit(
    {"ng": _ONE, "pg": Decimal("0.001"), "ug": Decimal(1000), "\u00b5g": Decimal(1000), "\u03bcg": Decimal(1000)},
    "write the unit, pg, ng or ug",
)
RATE = Unit({"hz": _ONE, "1/s": _ONE, "scans/s": _ONE, "scans/sec": _ONE, "spectra/s": _ONE}, "write it in Hz")
NO_UNIT = Unit({}, "write a number without a unit", bare=_ONE)
MZ = Unit({"m/z": _ONE, "da": _ONE, "amu": _ONE, "u": _ONE}, "write a number", bare=_ONE)


def kept_unit(unit: Unit) -> Unit:
    """The same unit for a label that names the kept unit already, as `retention_time_s`."""
    same = {name: factor for name, factor in unit.factors.items() if factor == 1}
    return Unit(same, "the label already names another unit", bare=_ONE, signed=unit.signed)


MINUTES = Unit(
    {name: factor for name, factor in TIME.factors.items() if factor == _SIXTY},
    "the label already names another unit",
    bare=_SIXTY,
)


def squeezed(text: str) -> str:
    """The text with every run of blanks as one, none at the ends."""
    return " ".join(text.split())


def parse_quantity(text: str, unit: Unit, decimal: DecimalMark | None = "point") -> float:
    """Read a number, of 0 or more unless the unit is signed, with or without its unit.

    `decimal` is the mark of the file, None when nothing is known of it; then a point is a decimal mark, and so is a
    comma unless three digits follow it.

    Raises:
        ValueTextError: not a number, an unknown or missing unit, negative, or an ambiguous mark.
    """
    value = squeezed(text)
    match = _QUANTITY.fullmatch(value) if len(value) <= MAX_VALUE_LENGTH else None
    if match is None:
        raise ValueTextError("is not a number")
    number, name = match[1], (match[2] or "").strip().lower().lstrip("\u00b0").rstrip(".").strip()
    factor = unit.factors.get(name) if name else unit.bare
    if factor is None:
        raise ValueTextError(f"has the unknown unit {name!r}; {unit.advice}" if name else f"has no unit; {unit.advice}")
    try:
        read = parse_number(number, _mark_of(number, decimal), factor=factor)
    except NumberTextError as error:
        raise ValueTextError(f"is not readable: {error}") from error
    if read < 0 and not unit.signed:
        raise ValueTextError("is negative")
    return read


def _mark_of(number: str, decimal: DecimalMark | None) -> DecimalMark:
    own: DecimalMark = "comma" if "," in number else "point"
    if "," in number and "." in number:
        raise ValueTextError("has both a point and a comma; write it with one decimal mark and no thousands marks")
    ambiguous = _ONE_COMMA_THREE_DIGITS.fullmatch(number) is not None
    if ambiguous and own != (decimal or "point"):
        raise ValueTextError(
            f"may have a decimal {own} or a thousands mark; write it with a decimal point or use --decimal"
        )
    return own


def parse_whole_number(text: str) -> int:
    """Read a whole number of 1 or more.

    Raises:
        ValueTextError: anything else.
    """
    value = text.strip()
    if not re.fullmatch(r"[0-9]{1,9}", value) or int(value) < 1:
        raise ValueTextError("is not a whole number of 1 or more")
    return int(value)


def parse_range(text: str) -> tuple[float, float]:
    """Read a range of m/z such as `50 - 550` or `550, 50`; the lower value comes first in the result.

    Raises:
        ValueTextError: not two different numbers.
    """
    value = squeezed(text)
    match = _RANGE.fullmatch(value) if len(value) <= MAX_VALUE_LENGTH else None
    if match is None:
        raise ValueTextError("is not a range such as 50-550")
    try:
        low, high = sorted((parse_number(match[1]), parse_number(match[2])))
    except NumberTextError as error:
        raise ValueTextError(f"is not a range: {error}") from error
    if low == high:
        raise ValueTextError("is an empty range")
    return low, high


_EI = ("EI", "ELECTRON IONISATION", "ELECTRON IONIZATION", "ELECTRON IMPACT", "ELECTRON IMPACT IONISATION",
       "ELECTRON IMPACT IONIZATION")  # fmt: skip
_CI = ("CI", "CHEMICAL IONISATION", "CHEMICAL IONIZATION")
_POSITIVE = re.compile(r" ?(?:\+|\(\+\)|POSITIVE|POS)", re.IGNORECASE)
_NEGATIVE = re.compile(r" ?(?:-|\(-\)|NEGATIVE|NEG)", re.IGNORECASE)


def parse_ionisation(text: str) -> str:
    """`EI`, `CI` (both positive), `EI-` or `CI-`, from a mode such as `EI+` or `electron ionization`; never assumed.

    Raises:
        ValueTextError: another ionisation, or a text that is not understood.
    """
    value = squeezed(text)
    for names, short in ((_EI, "EI"), (_CI, "CI")):
        for name in names:
            if value[: len(name)].upper() != name:
                continue
            rest = value[len(name) :]
            if not rest or _POSITIVE.fullmatch(rest):
                return short
            if _NEGATIVE.fullmatch(rest):
                return f"{short}-"
    raise ValueTextError("is neither electron ionisation (EI+) nor chemical ionisation (CI+)")


def parse_mass_accuracy_label(text: str) -> MassAccuracy:
    """Read `unit` or `accurate`.

    Raises:
        ValueTextError: anything else.
    """
    value = text.strip().lower()
    if value not in tuple(MassAccuracy):
        raise ValueTextError("is neither unit nor accurate")
    return MassAccuracy(value)


def parse_phase(text: str) -> str:
    """A stationary phase by its chemistry.

    Raises:
        ValueTextError: not one of the names that retention indices are compared by.
    """
    value = squeezed(text).lower()
    if value not in tuple(PhaseChemistry):
        names = ", ".join(PhaseChemistry)
        raise ValueTextError(f"is not a phase chemistry ({names}); the trade name belongs under column")
    return value
