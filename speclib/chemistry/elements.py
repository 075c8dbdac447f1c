"""Masses, isotopes and valences of the elements that speclib reads.

Masses: AME2020 (Wang et al., Chin. Phys. C 2021, 45, 030003). Abundances: IUPAC 2013 (Meija et al., Pure Appl. Chem.
2016, 88, 293). Both from memory; `tests/chemistry/test_elements.py` holds them against molmass and pyteomics.
The *reference isotope* of an element is its most abundant one; offsets count from it.
"""

from __future__ import annotations

from dataclasses import dataclass

ELECTRON_MASS = 0.000548579909065
"""Da, CODATA 2018."""


@dataclass(frozen=True)
class Element:
    """One element: `isotopes` are (mass number, mass in Da, abundance as fraction), rising in mass number."""

    symbol: str
    valence: int
    isotopes: tuple[tuple[int, float, float], ...]

    @property
    def reference(self) -> tuple[int, float, float]:
        """The most abundant isotope."""
        return max(self.isotopes, key=lambda isotope: isotope[2])

    @property
    def nominal_mass(self) -> int:
        """Mass number of the reference isotope."""
        return self.reference[0]

    @property
    def exact_mass(self) -> float:
        """Mass of the reference isotope in Da."""
        return self.reference[1]


_TABLE: tuple[Element, ...] = (
    Element("H", 1, ((1, 1.00782503190, 0.999885), (2, 2.01410177784, 0.000115))),
    Element("D", 1, ((2, 2.01410177784, 1.0),)),
    Element("B", 3, ((10, 10.012936862, 0.199), (11, 11.009305166, 0.801))),
    Element("C", 4, ((12, 12.0, 0.9893), (13, 13.00335483534, 0.0107))),
    Element("N", 3, ((14, 14.00307400425, 0.99636), (15, 15.00010889827, 0.00364))),
    Element("O", 2, ((16, 15.99491461926, 0.99757), (17, 16.99913175595, 0.00038), (18, 17.99915961214, 0.00205))),
    Element("F", 1, ((19, 18.99840316207, 1.0),)),
    Element("Na", 1, ((23, 22.9897692820, 1.0),)),
    Element("Si", 4, ((28, 27.97692653442, 0.92223), (29, 28.97649466434, 0.04685), (30, 29.97377013740, 0.03092))),
    Element("P", 3, ((31, 30.97376199768, 1.0),)),
    Element(
        "S",
        2,
        (
            (32, 31.97207117354, 0.9499),
            (33, 32.97145890862, 0.0075),
            (34, 33.96786701100, 0.0425),
            (36, 35.96708069700, 0.0001),
        ),
    ),
    Element("Cl", 1, ((35, 34.96885269400, 0.7576), (37, 36.96590257400, 0.2424))),
    Element("K", 1, ((39, 38.96370648482, 0.932581), (40, 39.963998165, 0.000117), (41, 40.96182525611, 0.067302))),
    Element(
        "Fe",
        2,
        (
            (54, 53.939608189, 0.05845),
            (56, 55.934935537, 0.91754),
            (57, 56.935391950, 0.02119),
            (58, 57.933273575, 0.00282),
        ),
    ),
    Element(
        "Ge",
        4,
        (
            (70, 69.924248542, 0.2052),
            (72, 71.922075824, 0.2745),
            (73, 72.923458954, 0.0776),
            (74, 73.921177761, 0.3652),
            (76, 75.921402725, 0.0775),
        ),
    ),
    Element(
        "Se",
        2,
        (
            (74, 73.922475933, 0.0089),
            (76, 75.919213702, 0.0937),
            (77, 76.919914150, 0.0763),
            (78, 77.917309244, 0.2377),
            (80, 79.916521761, 0.4961),
            (82, 81.916699531, 0.0873),
        ),
    ),
    Element("Br", 1, ((79, 78.918337574, 0.5069), (81, 80.916288197, 0.4931))),
    Element(
        "Sn",
        4,
        (
            (112, 111.904824894, 0.0097),
            (114, 113.902780132, 0.0066),
            (115, 114.903344695, 0.0034),
            (116, 115.901742825, 0.1454),
            (117, 116.902954036, 0.0768),
            (118, 117.901606625, 0.2422),
            (119, 118.903311266, 0.0859),
            (120, 119.902202557, 0.3258),
            (122, 121.903444001, 0.0463),
            (124, 123.905276692, 0.0579),
        ),
    ),
    Element("I", 1, ((127, 126.904471853, 1.0),)),
    Element(
        "Hg",
        2,
        (
            (196, 195.965832700, 0.0015),
            (198, 197.966769177, 0.0997),
            (199, 198.968280994, 0.1687),
            (200, 199.968327158, 0.2310),
            (201, 200.970303146, 0.1318),
            (202, 201.970643720, 0.2986),
            (204, 203.973494037, 0.0687),
        ),
    ),
    Element(
        "Pb",
        4,
        (
            (204, 203.973043506, 0.014),
            (206, 205.974465124, 0.241),
            (207, 206.975896887, 0.221),
            (208, 207.976652005, 0.524),
        ),
    ),
)

ELEMENTS: dict[str, Element] = {element.symbol: element for element in _TABLE}
