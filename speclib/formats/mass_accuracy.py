"""Unit or accurate mass: the option, else the file's label, else what the written decimals allow.

The project's own rule: whole m/z are unit mass, one or two decimals are unit mass with a note, three or more may be
either and are asked about. Decimals are those of the shortest text that reads back to the same float64, so `43.000`
has none.
"""

from __future__ import annotations

from collections.abc import Iterable
from decimal import Decimal

from speclib.model.spectrum import MassAccuracy

MOST_DECIMALS_OF_UNIT_MASS = 2


class MassAccuracyUnknownError(ValueError):
    """Nothing says whether m/z are unit or accurate mass; the text is the reason."""


ADVICE = "say it with --mass-accuracy unit or --mass-accuracy accurate"


def written_decimals(mz: float) -> int:
    """Decimals of the shortest text that reads back to the same number."""
    text = repr(mz)
    if "e" not in text:
        decimals = text.partition(".")[2]
        return 0 if decimals == "0" else len(decimals)
    exponent = Decimal(text).normalize().as_tuple().exponent
    return max(0, -exponent) if isinstance(exponent, int) else 0


def decide_mass_accuracy(
    mz: Iterable[float], option: MassAccuracy | None, label: MassAccuracy | None
) -> tuple[MassAccuracy, str]:
    """The mass accuracy of a spectrum and a note ("" when there is nothing to remark).

    Raises:
        MassAccuracyUnknownError: neither option nor label, and three or more decimals.
    """
    if option is not None:
        differs = label is not None and label is not option
        return option, f"the file says {label} mass, read as {option} mass as asked" if differs else ""
    if label is not None:
        return label, ""
    decimals, example = max(((written_decimals(value), value) for value in mz), default=(0, 0.0))
    if decimals == 0:
        return MassAccuracy.UNIT, ""
    if decimals <= MOST_DECIMALS_OF_UNIT_MASS:
        note = (
            f"m/z are written to {decimals} decimal{'s' if decimals > 1 else ''} and were taken as unit mass; "
            "--mass-accuracy accurate reads them otherwise"
        )
        return MassAccuracy.UNIT, note
    raise MassAccuracyUnknownError(
        f"m/z are written to {decimals} decimals ({example!r}), which may be unit or accurate mass"
    )
