"""Chemical formulas: from text to composition, molar mass and a key that compares compositions.

Own parser, since the composition decides masses, densities and which entries count as the same compound.
"""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction
from functools import lru_cache
from math import gcd, lcm
from typing import Final, NoReturn

from phasedb.crystal.elements import ELEMENTS, suggest_symbol
from phasedb.errors import InputError

MAX_TEXT: Final = 200
MAX_DEPTH: Final = 12
MAX_COUNT: Final = 100_000

_OPENING: Final = {"(": ")", "[": "]", "{": "}"}
_SEPARATORS: Final = "·•∙⋅*"
_NUMBER: Final = re.compile(r"\d{1,9}(?:\.\d{1,9})?|\.\d{1,9}", re.ASCII)
_SYMBOL: Final = re.compile(r"[A-Z][a-z]?")
# '.12H2O' after a count reads as twelve waters, never as the decimals of that count: 'KAl(SO4)2.12H2O'.
_WATER: Final = re.compile(r"\.(?P<count>\d{0,4}(?:\.\d{1,6})?)(?P<water>[HDT]2O)(?![a-z\d.])", re.ASCII)
_PLAIN: Final = str.maketrans("₀₁₂₃₄₅₆₇₈₉", "0123456789")


@dataclass(frozen=True, slots=True)
class Formula:
    """A parsed formula.

    Attributes
    ----------
    text : str
        As it was given, without surrounding blanks.
    composition : dict of str to float
        Atoms of each element in one formula unit, in the order of the text.
    reduced : str
        Canonical key: smallest whole-number composition, carbon and hydrogen first, then by symbol; equal for
        equal compositions whatever their order or factor (``Fe4O6`` and ``Fe2O3``).
    notes : tuple of str
        How ambiguous parts were read: equal shares of a mix, a hydrate after a dot.
    """

    text: str
    composition: dict[str, float]
    reduced: str
    notes: tuple[str, ...] = ()

    @property
    def elements(self) -> tuple[str, ...]:
        """Symbols in the order of the text, each once."""
        return tuple(self.composition)

    @property
    def atoms(self) -> float:
        """Atoms in one formula unit."""
        return sum(self.composition.values())

    @property
    def molar_mass_g_mol(self) -> float:
        """Mass of one mole of formula units, g/mol, from standard atomic weights."""
        return sum(count * ELEMENTS[symbol].weight_g_mol for symbol, count in self.composition.items())


Counts = dict[str, Fraction]


def _add(total: Counts, part: Counts, factor: Fraction = Fraction(1)) -> None:
    for symbol, count in part.items():
        total[symbol] = total.get(symbol, Fraction(0)) + factor * count


class _Parser:
    """Recursive descent over the text; keeps the position for the caret of an error."""

    def __init__(self, text: str) -> None:
        self.shown = text
        self.text = text.translate(_PLAIN)
        self.position = 0
        self.notes: list[str] = []

    def fail(self, what: str, *, at: int | None = None, hint: str = "") -> NoReturn:
        column = self.position if at is None else at
        where = f"column {column + 1}:\n    {self.shown}\n    {' ' * column}^ "
        raise InputError(f"formula {self.shown!r}: {what}", where=where, hint=hint)

    def skip_blanks(self) -> None:
        while self.position < len(self.text) and self.text[self.position].isspace():
            self.position += 1

    def peek(self) -> str:
        return self.text[self.position] if self.position < len(self.text) else ""

    def whole(self) -> Counts:
        total: Counts = {}
        while True:
            factor = self.number()
            _add(total, self.group(depth=0, closing=""), factor)
            if not self.peek():
                return total
            self.position += 1  # the separator before the next part of an addition compound
            self.skip_blanks()

    def number(self, *, allow_water: bool = False) -> Fraction:
        """Read a count, 1 if there is none; a hydrate's dot (`allow_water`) ends it."""
        start = self.position
        match = _NUMBER.match(self.text, start)
        if match is None:
            return Fraction(1)
        end = match.end()
        dot = match.group().find(".")
        if allow_water and dot >= 0 and match.group()[:dot].strip("0"):
            water = _WATER.match(self.text, start + dot)
            if water is not None:
                end = start + dot
                self.notes.append(f"{water.group()!r} was read as {water['count'] or '1'} {water['water']}")
        if end == start:  # the text starts with '.5H2O': a separator, not a count
            return Fraction(1)
        if _NUMBER.match(self.text, end) and end == match.end():
            self.fail("a count has two decimal points or too many digits", at=end)
        value = Fraction(self.text[start:end])
        if value <= 0:
            self.fail("a count must be above 0", at=start)
        if value > MAX_COUNT:
            self.fail(f"a count above {MAX_COUNT} is not plausible", at=start)
        self.position = end
        return value

    def at_separator(self) -> bool:
        here = self.peek()
        if here and here in _SEPARATORS:
            return True
        follows = self.text[self.position + 1 : self.position + 2]
        return here == "." and (
            follows.isupper()
            or follows in _OPENING
            or (follows.isspace() and bool(self.text[self.position + 1 :].strip()))
            or bool(_WATER.match(self.text, self.position))
        )

    def group(self, *, depth: int, closing: str) -> Counts:
        """Read units up to `closing` (or a separator at the top level); a comma makes a mix."""
        if depth > MAX_DEPTH:
            self.fail(f"brackets are nested deeper than {MAX_DEPTH}")
        opened_at = self.position
        parts: list[Counts] = [{}]
        counted = False
        while True:
            self.skip_blanks()
            here = self.peek()
            if not here:
                if closing:
                    self.fail(f"bracket is not closed: {closing!r} is missing", at=opened_at - 1)
                break
            if here == closing:
                self.position += 1
                break
            if depth == 0 and parts[-1] and self.at_separator():
                break
            if here == "," and depth and parts[-1]:
                self.position += 1
                parts.append({})
                continue
            part, explicit = self.unit(depth)
            counted = counted or explicit
            _add(parts[-1], part)
        if not parts[-1]:
            self.fail("an element was expected here", at=max(self.position - bool(closing), 0))
        total: Counts = {}
        share = Fraction(1)
        if len(parts) > 1 and not counted:
            share = Fraction(1, len(parts))
            self.notes.append(f"{self.text[opened_at - 1 : self.position]} was read as a mix in equal shares")
        for part in parts:
            _add(total, part, share)
        return total

    def unit(self, depth: int) -> tuple[Counts, bool]:
        """Read one element or bracket with its count; say whether a count was written."""
        here = self.peek()
        if here in _OPENING:
            self.position += 1
            inner = self.group(depth=depth + 1, closing=_OPENING[here])
        else:
            inner = {self.symbol(): Fraction(1)}
        before = self.position
        factor = self.number(allow_water=depth == 0)
        result: Counts = {}
        _add(result, inner, factor)
        return result, self.position > before

    def symbol(self) -> str:
        match = _SYMBOL.match(self.text, self.position)
        if match is None:
            self.unexpected()
        found = match.group()
        if found not in ELEMENTS:
            self.unknown(found)
        self.position = match.end()
        return found

    def unknown(self, found: str) -> NoReturn:
        if self.position and self.text[self.position - 1].isupper():
            joined = (self.text[self.position - 1] + found[0]).capitalize()
            if joined in ELEMENTS:
                self.fail(f"unknown element {found!r}", hint=f"did you mean {joined}?")
        self.fail(f"unknown element {found!r}", hint=suggest_symbol(found))

    def unexpected(self) -> NoReturn:
        here = self.peek()
        if here in ")]}":
            self.fail(f"{here!r} closes a bracket that is not open")
        if here in "+-−⁺⁻^":
            self.fail(f"unexpected {here!r}", hint="write the formula without charges, for example Fe3O4")
        if here.islower():
            self.fail(f"unexpected {here!r}", hint="symbols start with a capital letter, for example Fe2O3")
        self.fail(f"unexpected {here!r}", hint="expected symbols, counts and brackets, for example Fe2O3")


_PLAIN_FORMULA: Final = re.compile(r"(?:[A-Z][a-z]?(?:[1-9][0-9]{0,2})?)+")
_PLAIN_UNIT: Final = re.compile(r"([A-Z][a-z]?)([0-9]*)")


def _plain_counts(text: str) -> dict[str, int] | None:
    """Return the counts of a formula of symbols and whole counts only; None for any other text.

    Nearly all formulas are so plain, and large imports read a hundred thousand of them.
    """
    if not _PLAIN_FORMULA.fullmatch(text):
        return None
    counts: dict[str, int] = {}
    for symbol, count in _PLAIN_UNIT.findall(text):
        if symbol not in ELEMENTS:
            return None
        counts[symbol] = counts.get(symbol, 0) + int(count or 1)
    return counts


def _canonical(counts: Mapping[str, Fraction | int]) -> str:
    scale = lcm(*(value.denominator for value in counts.values()))
    whole = {symbol: int(value * scale) for symbol, value in counts.items()}
    divisor = gcd(*whole.values())
    first = [symbol for symbol in ("C", "H") if symbol in whole and "C" in whole]
    order = first + sorted(symbol for symbol in whole if symbol not in first)
    return "".join(
        symbol + (str(whole[symbol] // divisor) if whole[symbol] != divisor else "") for symbol in order
    )


@lru_cache(maxsize=8192)  # one entry's formula is asked for several times on its way into a library
def parse_formula(text: str) -> Formula:
    """Return the parsed formula.

    Element symbols, counts (also decimal), brackets of any kind, hydrates (``·6H2O``, ``.12H2O``), D and T,
    and mixes: ``(Mn,Fe)2O3`` is read in equal shares, ``(Mn0.4,Fe0.6)2O3`` as written.

    Raises
    ------
    InputError
        If the text cannot be read; a caret marks the place, an unknown element is named with a suggestion.

    Examples
    --------
    >>> parse_formula("Ba(NO3)2").composition
    {'Ba': 1.0, 'N': 2.0, 'O': 6.0}
    >>> parse_formula("Fe4O6").reduced == parse_formula("O3Fe2").reduced
    True
    """
    stripped = text.strip()
    if not stripped:
        raise InputError("the formula is empty", hint="expected symbols and counts, for example Fe2O3")
    if len(stripped) > MAX_TEXT:
        raise InputError(f"the formula has {len(stripped)} characters: at most {MAX_TEXT} are read")
    plain = _plain_counts(stripped)
    if plain is not None:
        whole = {symbol: float(count) for symbol, count in plain.items()}
        return Formula(stripped, whole, _canonical(plain))
    parser = _Parser(stripped)
    counts = parser.whole()
    composition = {symbol: float(count) for symbol, count in counts.items()}
    return Formula(stripped, composition, _canonical(counts), tuple(parser.notes))
