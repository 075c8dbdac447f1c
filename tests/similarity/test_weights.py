"""Peak weights by name."""

from __future__ import annotations

import numpy as np
import pytest

from speclib.errors import InvalidValueError
from speclib.similarity.weights import DEFAULT_WEIGHTING, WEIGHTINGS, get_weighting


@pytest.mark.parametrize(
    ("name", "powers"),
    [
        ("plain", (0.0, 1.0)),
        ("square-root", (0.0, 0.5)),
        ("stein-scott-1994", (3.0, 0.6)),
        ("stein-1999", (1.0, 0.5)),
        ("horai-2010", (2.0, 0.5)),
        ("kim-2012", (1.3, 0.53)),
    ],
)
def test_published_exponents(name: str, powers: tuple[float, float]) -> None:
    weighting = get_weighting(name)
    assert (weighting.mz_power, weighting.intensity_power) == powers
    assert weighting.name == name
    assert weighting.source


def test_no_weighting_is_untested_and_the_default_is_one_of_them() -> None:
    assert len(WEIGHTINGS) == 6
    assert DEFAULT_WEIGHTING is WEIGHTINGS["square-root"]


def test_a_weight_is_the_product_of_both_powers() -> None:
    weights = get_weighting("horai-2010").weigh(np.array([2.0, 10.0]), np.array([9.0, 4.0]))
    assert weights.tolist() == [12.0, 200.0]


def test_an_unknown_name_is_refused_with_the_known_ones() -> None:
    with pytest.raises(InvalidValueError, match="square-root"):
        get_weighting("squareroot")
