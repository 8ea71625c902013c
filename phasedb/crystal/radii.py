"""Published atomic radii in Å: metallic, covalent, ionic."""

from __future__ import annotations

from typing import Final


def _table(text: str) -> dict[str, float]:
    return {
        symbol: float(radius)
        for symbol, radius in (item.split() for item in text.replace("\n", "|").split("|") if item.strip())
    }


# Metallic radii for twelve neighbours: Goldschmidt, Z. phys. Chem. 133 (1928) 397, with later additions as in
# Wells, Structural Inorganic Chemistry, 5th ed. (1984), table 29.4 (from memory). Polonium: half its contact.
METALLIC: Final = _table("""
Li 1.57 | Be 1.12 | Na 1.91 | Mg 1.60 | Al 1.43 | K 2.35 | Ca 1.97 | Sc 1.64 | Ti 1.47 | V 1.35 | Cr 1.29
Mn 1.37 | Fe 1.26 | Co 1.25 | Ni 1.25 | Cu 1.28 | Zn 1.37 | Ga 1.53 | Rb 2.50 | Sr 2.15 | Y 1.82 | Zr 1.60
Nb 1.47 | Mo 1.40 | Tc 1.35 | Ru 1.34 | Rh 1.34 | Pd 1.37 | Ag 1.44 | Cd 1.52 | In 1.67 | Sn 1.58 | Cs 2.72
Ba 2.24 | La 1.88 | Ce 1.82 | Pr 1.83 | Nd 1.82 | Sm 1.80 | Eu 2.04 | Gd 1.80 | Tb 1.78 | Dy 1.77 | Ho 1.77
Er 1.76 | Tm 1.75 | Yb 1.94 | Lu 1.73 | Hf 1.59 | Ta 1.47 | W 1.41 | Re 1.37 | Os 1.35 | Ir 1.36 | Pt 1.39
Au 1.44 | Hg 1.55 | Tl 1.71 | Pb 1.75 | Bi 1.82 | Po 1.68 | Ac 1.88 | Th 1.80 | Pa 1.63 | U 1.56 | Np 1.56
Pu 1.64 | Am 1.73
""")

# Covalent radii: Cordero et al., Dalton Trans. (2008) 2832, as kept by gemmi 0.7 (carbon sp2; low spin).
COVALENT: Final = _table("""
H 0.31 | He 0.28 | Li 1.28 | Be 0.96 | B 0.84 | C 0.73 | N 0.71 | O 0.66 | F 0.57 | Ne 0.58
Na 1.66 | Mg 1.41 | Al 1.21 | Si 1.11 | P 1.07 | S 1.05 | Cl 1.02 | Ar 1.06 | K 2.03 | Ca 1.76
Sc 1.70 | Ti 1.60 | V 1.53 | Cr 1.39 | Mn 1.39 | Fe 1.32 | Co 1.26 | Ni 1.24 | Cu 1.32 | Zn 1.22
Ga 1.22 | Ge 1.20 | As 1.19 | Se 1.20 | Br 1.20 | Kr 1.16 | Rb 2.20 | Sr 1.95 | Y 1.90 | Zr 1.75
Nb 1.64 | Mo 1.54 | Tc 1.47 | Ru 1.46 | Rh 1.42 | Pd 1.39 | Ag 1.45 | Cd 1.44 | In 1.42 | Sn 1.39
Sb 1.39 | Te 1.38 | I 1.39 | Xe 1.40 | Cs 2.44 | Ba 2.15 | La 2.07 | Ce 2.04 | Pr 2.03 | Nd 2.01
Pm 1.99 | Sm 1.98 | Eu 1.98 | Gd 1.96 | Tb 1.94 | Dy 1.92 | Ho 1.92 | Er 1.89 | Tm 1.90 | Yb 1.87
Lu 1.75 | Hf 1.87 | Ta 1.70 | W 1.62 | Re 1.51 | Os 1.44 | Ir 1.41 | Pt 1.36 | Au 1.36 | Hg 1.32
Tl 1.45 | Pb 1.46 | Bi 1.48 | Po 1.40 | At 1.50 | Rn 1.50 | Fr 2.60 | Ra 2.21 | Ac 2.15 | Th 2.06
Pa 2.00 | U 1.96 | Np 1.90 | Pu 1.87 | Am 1.80 | Cm 1.69 | Bk 1.68 | Cf 1.68 | Es 1.65 | Fm 1.67
Md 1.73 | No 1.76 | Lr 1.61
""")

# Ionic radii for six neighbours, by element and charge: Shannon, Acta Cryst. A32 (1976) 751 (from memory;
# high spin where there is a choice).
IONIC: Final[dict[tuple[str, int], float]] = {
    (symbol, charge): radius
    for charge, radii in {
        1: "Li 0.76 | Na 1.02 | K 1.38 | Rb 1.52 | Cs 1.67 | Cu 0.77 | Ag 1.15 | Tl 1.50",
        2: "Mg 0.72 | Ca 1.00 | Sr 1.18 | Ba 1.35 | Mn 0.83 | Fe 0.78 | Co 0.745 | Ni 0.69 | Cu 0.73 "
        "| Zn 0.74 | Cd 0.95 | Hg 1.02 | Pb 1.19 | Eu 1.17",
        3: "Al 0.535 | Sc 0.745 | Ti 0.67 | V 0.64 | Cr 0.615 | Mn 0.645 | Fe 0.645 | Co 0.61 | Ga 0.62 "
        "| Y 0.90 | In 0.80 | La 1.032 | Ce 1.01 | Sm 0.958 | Gd 0.938 | Lu 0.861 | Tl 0.885 | Bi 1.03",
        4: "Si 0.40 | Ti 0.605 | Ge 0.53 | Zr 0.72 | Sn 0.69 | Ce 0.87 | Hf 0.71 | Pb 0.775 | Th 0.94 "
        "| U 0.89 | Np 0.87 | Pu 0.86",
        -1: "F 1.33 | Cl 1.81 | Br 1.96 | I 2.20",
        -2: "O 1.40 | S 1.84 | Se 1.98 | Te 2.21",
    }.items()
    for symbol, radius in _table(radii).items()
}
