"""Chemical elements: symbols, atomic numbers and standard atomic weights."""

from __future__ import annotations

from dataclasses import dataclass
from difflib import get_close_matches
from typing import Final

from phasedb.errors import UnknownNameError

# IUPAC Commission on Isotopic Abundances and Atomic Weights (CIAAW), standard atomic weights 2021: Prohaska
# et al., Pure Appl. Chem. 94 (2022) 573; where an interval is given, its conventional value. A star marks an
# element without a standard weight: the mass number of a long-lived isotope. In order of atomic number.
_WEIGHTS: Final = """
H 1.008 | He 4.002602 | Li 6.94 | Be 9.0121831 | B 10.81 | C 12.011 | N 14.007 | O 15.999
F 18.998403162 | Ne 20.1797 | Na 22.98976928 | Mg 24.305 | Al 26.9815384 | Si 28.085
P 30.973761998 | S 32.06 | Cl 35.45 | Ar 39.95 | K 39.0983 | Ca 40.078 | Sc 44.955907 | Ti 47.867
V 50.9415 | Cr 51.9961 | Mn 54.938043 | Fe 55.845 | Co 58.933194 | Ni 58.6934 | Cu 63.546 | Zn 65.38
Ga 69.723 | Ge 72.63 | As 74.921595 | Se 78.971 | Br 79.904 | Kr 83.798 | Rb 85.4678 | Sr 87.62
Y 88.905838 | Zr 91.224 | Nb 92.90637 | Mo 95.95 | Tc 97* | Ru 101.07 | Rh 102.90549 | Pd 106.42
Ag 107.8682 | Cd 112.414 | In 114.818 | Sn 118.71 | Sb 121.76 | Te 127.6 | I 126.90447 | Xe 131.293
Cs 132.90545196 | Ba 137.327 | La 138.90547 | Ce 140.116 | Pr 140.90766 | Nd 144.242 | Pm 145*
Sm 150.36 | Eu 151.964 | Gd 157.25 | Tb 158.925354 | Dy 162.5 | Ho 164.930329 | Er 167.259
Tm 168.934219 | Yb 173.045 | Lu 174.9668 | Hf 178.486 | Ta 180.94788 | W 183.84 | Re 186.207
Os 190.23 | Ir 192.217 | Pt 195.084 | Au 196.96657 | Hg 200.592 | Tl 204.38 | Pb 207.2 | Bi 208.9804
Po 209* | At 210* | Rn 222* | Fr 223* | Ra 226* | Ac 227* | Th 232.0377 | Pa 231.03588 | U 238.02891
Np 237* | Pu 244* | Am 243* | Cm 247* | Bk 247* | Cf 251* | Es 252* | Fm 257* | Md 258* | No 259*
Lr 262*
"""

# Hydrogen isotopes: atomic masses, AME2020, Wang et al., Chinese Phys. C 45 (2021) 030003.
_ISOTOPES: Final = {"D": 2.01410178, "T": 3.01604928}


@dataclass(frozen=True, slots=True)
class Element:
    """One element (or the isotopes D and T of hydrogen).

    Attributes
    ----------
    symbol : str
    atomic_number : int
    weight_g_mol : float
        Standard atomic weight, g/mol.
    has_standard_weight : bool
        False where `weight_g_mol` is only the mass number of a long-lived isotope.
    """

    symbol: str
    atomic_number: int
    weight_g_mol: float
    has_standard_weight: bool = True


def _table() -> dict[str, Element]:
    table = {}
    for number, entry in enumerate(_WEIGHTS.replace("\n", " | ").strip(" |").split(" | "), start=1):
        symbol, weight = entry.split()
        table[symbol] = Element(symbol, number, float(weight.rstrip("*")), not weight.endswith("*"))
    for symbol, mass in _ISOTOPES.items():
        table[symbol] = Element(symbol, 1, mass)
    return table


ELEMENTS: Final[dict[str, Element]] = _table()
"""All elements by symbol, in order of atomic number; D and T last."""


def suggest_symbol(text: str) -> str:
    """Return a hint that names symbols near `text`; empty if none is near."""
    capitalised = text.capitalize()
    if capitalised in ELEMENTS:
        return f"did you mean {capitalised}?"
    near = get_close_matches(capitalised, ELEMENTS, n=3, cutoff=0.5)
    return f"did you mean {' or '.join(near)}?" if near else ""


def element(symbol: str) -> Element:
    """Return the element of that symbol.

    Raises
    ------
    UnknownNameError
        If there is none; the hint names symbols that look alike.

    Examples
    --------
    >>> element("Fe").atomic_number
    26
    """
    try:
        return ELEMENTS[symbol]
    except KeyError:
        raise UnknownNameError(f"no element has the symbol {symbol!r}", hint=suggest_symbol(symbol)) from None
