"""Structure types of elements, alloys and simple compounds.

Space groups, sites and typical parameters are from memory of the usual collections (Strukturbericht; Wyckoff,
Crystal Structures, 2nd ed., 1963; Pearson's handbook). Each type is checked in tests/outside: densities, bond
lengths, and the published coordinates of the starter library.
"""

from __future__ import annotations

from typing import Final

from phasedb.crystal.structure_type import StructureType, structure_type

_INTERSTITIAL: Final = frozenset({"H", "D", "B", "C", "N", "O"})
_HALOGEN: Final = frozenset({"F", "Cl", "Br", "I"})
_HYDROGEN: Final = frozenset({"H", "D", "T"})
_FD3M: Final = "F d -3 m:2"

METALS_AND_SIMPLE: Final[tuple[StructureType, ...]] = (
    # one atom, or a disordered alloy, on each site; small atoms between them
    structure_type("Ah", "Po", "P m -3 m", "M 1 0 0 0", filling="solution", never_mixed=_INTERSTITIAL),
    structure_type(
        "A1",
        "Cu with small atoms in octahedral gaps (austenite)",
        "F m -3 m",
        "M 4 0 0 0; I 4 1/2 1/2 1/2",
        filling="solution",
        only={"I": _INTERSTITIAL},
        never={"M": _INTERSTITIAL},
        most_fill={"I": 0.6},
    ),
    structure_type("A1", "Cu", "F m -3 m", "M 4 0 0 0", filling="solution", never_mixed=_INTERSTITIAL),
    structure_type(
        "A2",
        "W with small atoms in octahedral gaps (ferrite)",
        "I m -3 m",
        "M 2 0 0 0; I 6 1/2 0 0",
        filling="solution",
        only={"I": _INTERSTITIAL},
        never={"M": _INTERSTITIAL},
        most_fill={"I": 0.1},
    ),
    structure_type("A2", "W", "I m -3 m", "M 2 0 0 0", filling="solution", never_mixed=_INTERSTITIAL),
    structure_type("A4", "diamond", _FD3M, "M 8 1/8 1/8 1/8", filling="solution"),
    structure_type(
        "A12",
        "alpha-Mn",
        "I -4 3 m",
        "M 2 0 0 0; M 8 x2 x2 x2; M 24 x3 x3 z3; M 24 x4 x4 z4",
        filling="solution",
        x2=0.316,
        x3=0.356,
        z3=0.034,
        x4=0.089,
        z4=0.282,
    ),
    structure_type(
        "A13",
        "beta-Mn",
        "P 41 3 2",
        "M 8 x x x; M 12 1/8 y y+1/4",
        filling="solution",
        x=0.0636,
        y=0.2022,
    ),
    # AB
    structure_type("B1", "NaCl", "F m -3 m", "A 4 0 0 0; X 4 1/2 1/2 1/2"),
    structure_type("B2", "CsCl", "P m -3 m", "A 1 0 0 0; X 1 1/2 1/2 1/2", filling="alloy"),
    structure_type(
        "B2",
        "NH4Cl, hydrogen in two orientations",
        "P m -3 m",
        "H 4 x x x; N 1 0 0 0; X 1 1/2 1/2 1/2",
        only={"H": _HYDROGEN, "N": frozenset("N"), "X": _HALOGEN},
        x=0.153,
    ),
    structure_type("B3", "ZnS", "F -4 3 m", "A 4 0 0 0; X 4 1/4 1/4 1/4"),
    structure_type("B20", "FeSi", "P 21 3", "A 4 xa xa xa; X 4 xx xx xx", xa=0.137, xx=0.842),
    structure_type("B32", "NaTl", _FD3M, "A 8 1/8 1/8 1/8; X 8 3/8 3/8 3/8", filling="alloy"),
    structure_type("B_a", "UCo", "I 21 3", "A 8 xa xa xa; X 8 xx xx xx", xa=0.0347, xx=0.294),
    structure_type("NbO type", "NbO", "P m -3 m", "A 3 0 1/2 1/2; X 3 1/2 0 0"),
    # AB2 and A2B
    structure_type("C1", "CaF2", "F m -3 m", "A 4 0 0 0; X 8 1/4 1/4 1/4"),
    structure_type("C1 (anti)", "Li2O", "F m -3 m", "A 8 1/4 1/4 1/4; X 4 0 0 0"),
    structure_type(
        "C1_b", "MgAgAs", "F -4 3 m", "A 4 1/2 1/2 1/2; B 4 1/4 1/4 1/4; X 4 0 0 0", filling="alloy"
    ),
    structure_type("C2", "FeS2", "P a -3", "A 4 0 0 0; X 8 x x x", x=0.385),
    structure_type("C3", "Cu2O", "P n -3 m:2", "A 4 0 0 0; X 2 1/4 1/4 1/4"),
    structure_type("C15", "MgCu2", _FD3M, "A 8 1/8 1/8 1/8; B 16 1/2 1/2 1/2", filling="alloy"),
    structure_type(
        "F0_1", "NiAsS", "P 21 3", "A 4 xa xa xa; P 4 xp xp xp; X 4 xx xx xx", xa=-0.006, xp=0.618, xx=0.385
    ),
    # AB3 and relatives
    structure_type("D0_2", "CoAs3", "I m -3", "A 8 1/4 1/4 1/4; X 24 0 y z", y=0.343, z=0.154),
    structure_type(
        "D0_3", "BiF3 or Fe3Al", "F m -3 m", "M 4 1/2 1/2 1/2; M 8 1/4 1/4 1/4; X 4 0 0 0", filling="alloy"
    ),
    structure_type("L1_2", "Cu3Au", "P m -3 m", "A 1 0 0 0; B 3 0 1/2 1/2", filling="alloy"),
    structure_type(
        "L2_1",
        "Cu2MnAl",
        "F m -3 m",
        "X 8 1/4 1/4 1/4; Y 4 1/2 1/2 1/2; Z 4 0 0 0",
        filling="alloy",
    ),
    structure_type("A15", "Cr3Si", "P m -3 n", "A 6 1/4 0 1/2; B 2 0 0 0", filling="alloy"),
    structure_type("L'1 (Fe4N)", "Fe4N", "P m -3 m", "M 1 0 0 0; M 3 0 1/2 1/2; N 1 1/2 1/2 1/2"),
    # boride, carbide and other metal-rich types
    structure_type("D2_1", "CaB6", "P m -3 m", "A 1 0 0 0; X 6 x 1/2 1/2", x=0.2),
    structure_type("D2_f", "UB12", "F m -3 m", "A 4 0 0 0; X 48 1/2 x x", x=0.167),
    structure_type(
        "D2_3", "NaZn13", "F m -3 c", "A 8 1/4 1/4 1/4; X 8 0 0 0; X 96 0 y z", y=0.1151, z=0.1765
    ),
    structure_type("D5_c", "Pu2C3", "I -4 3 d", "A 16 xa xa xa; X 24 x 0 1/4", xa=0.05, x=0.28),
    structure_type(
        "D8_2",
        "Cu5Zn8",
        "I -4 3 m",
        "A 8 x1 x1 x1; A 12 x2 0 0; B 8 x3 x3 x3; B 24 x4 x4 z4",
        filling="alloy",
        x1=0.828,
        x2=0.3558,
        x3=0.1089,
        x4=0.3128,
        z4=0.0366,
    ),
    structure_type(
        "D8_4",
        "Cr23C6",
        "F m -3 m",
        "M 4 0 0 0; M 8 1/4 1/4 1/4; M 32 x1 x1 x1; M 48 0 y y; X 24 x2 0 0",
        x1=0.382,
        y=0.169,
        x2=0.276,
    ),
    structure_type(
        "D8_9",
        "Co9S8",
        "F m -3 m",
        "M 4 1/2 1/2 1/2; M 32 x x x; X 8 1/4 1/4 1/4; X 24 x2 0 0",
        x=0.126,
        x2=0.2625,
    ),
    structure_type("Al12W type", "Al12W", "I m -3", "A 24 0 y z; B 2 0 0 0", y=0.184, z=0.309),
    structure_type(
        "Ni3Ga4 type", "Ni3Ga4", "I a -3 d", "A 48 1/8 y 1/4-y; B 16 0 0 0; B 48 x 0 1/4", y=0.625, x=0.0
    ),
    structure_type(
        "beta-UH3", "beta-UH3", "P m -3 n", "A 2 0 0 0; A 6 1/4 0 1/2; H 24 0 y z", y=0.155, z=0.303
    ),
    structure_type(
        "Pd16S7 type",
        "Pd16S7",
        "I -4 3 m",
        "A 8 x1 x1 x1; A 24 x2 x2 z2; X 6 0 1/2 1/2; X 8 x3 x3 x3",
        x1=0.8829,
        x2=0.3302,
        z2=0.0851,
        x3=0.153,
    ),
)
