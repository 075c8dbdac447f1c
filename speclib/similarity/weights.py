"""Peak weights w = (m/z)^a * intensity^b with the published exponents by name (methods: weighted cosine)."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from speclib.errors import InvalidValueError


@dataclass(frozen=True)
class Weighting:
    """Exponents of m/z and intensity, and where they come from."""

    name: str
    mz_power: float
    intensity_power: float
    source: str

    def weigh(self, mz: NDArray[np.float64], intensity: NDArray[np.float64]) -> NDArray[np.float64]:
        """Weights of peaks, same shape as the arrays given."""
        weights: NDArray[np.float64] = np.power(mz, self.mz_power) * np.power(intensity, self.intensity_power)
        return weights


WEIGHTINGS: dict[str, Weighting] = {
    weighting.name: weighting
    for weighting in (
        Weighting("plain", 0.0, 1.0, "no weighting"),
        Weighting(
            "square-root",
            0.0,
            0.5,
            "Stein & Scott, J. Am. Soc. Mass Spectrom. 1994, 5, 859 (intensity scaling)",
        ),
        Weighting("stein-scott-1994", 3.0, 0.6, "Stein & Scott, J. Am. Soc. Mass Spectrom. 1994, 5, 859"),
        Weighting("stein-1999", 1.0, 0.5, "Stein, J. Am. Soc. Mass Spectrom. 1999, 10, 770"),
        Weighting("horai-2010", 2.0, 0.5, "Horai et al., J. Mass Spectrom. 2010, 45, 703"),
        Weighting("kim-2012", 1.3, 0.53, "Kim, Koo, Wei & Zhang, Bioinformatics 2012, 28, 1158"),
    )
}
DEFAULT_WEIGHTING = WEIGHTINGS["square-root"]


def get_weighting(name: str) -> Weighting:
    """The weighting of that name.

    Raises:
        InvalidValueError: unknown name; the message lists the known ones.
    """
    try:
        return WEIGHTINGS[name]
    except KeyError:
        raise InvalidValueError(f"no weighting is called {name!r}", f"use one of {', '.join(WEIGHTINGS)}") from None
