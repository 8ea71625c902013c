"""Free parameters of a structure type as sources print them: ``O(0.26,0.26,0.26)``, ``x=.3912, y=.1558``.

Sources use their own origin and choice of axes; the coordinates are brought to those of the type.
"""

from __future__ import annotations

import re
from dataclasses import dataclass
from functools import lru_cache
from typing import Final

import numpy as np
from numpy.typing import NDArray

from phasedb.crystal.elements import ELEMENTS
from phasedb.crystal.structure import orbit, space_group
from phasedb.errors import InputError

FloatArray = NDArray[np.float64]
Position = tuple[float, float, float]

NEAR_TYPICAL: Final = 0.06
"""A published coordinate lies within this fraction of a of the typical one of its type (common practice)."""

_NUMBER: Final = r"[-+]?(?:\d+/\d+|\d+\.?\d*|\.\d+)"
_PLACED: Final = re.compile(
    rf"(?P<label>[^=]*?)\(\s*(?P<x>{_NUMBER})\s*,\s*(?P<y>{_NUMBER})\s*,\s*(?P<z>{_NUMBER})\s*\)\s*(?:\[[^\]]*\])?",
    re.ASCII,
)
_NAMED: Final = re.compile(rf"(?P<name>[A-Za-z]+\d?)\s*=\s*(?P<value>{_NUMBER})", re.ASCII)
_SPARE_WORDS: Final = {"Wat": "O", "Ow": "O"}

# Inversion centre of origin choice 1, which choice 2 puts at 0: International Tables A (2016), chapter 2.3.
_CENTRE_OF_CHOICE_1: Final = {201: 1 / 4, 203: 1 / 8, 222: 1 / 4, 224: 1 / 4, 227: 1 / 8, 228: 3 / 8}


@dataclass(frozen=True, slots=True)
class Placed:
    """A published coordinate: the label of its atom, the element it names, and the position."""

    label: str
    symbol: str
    position: Position


def _value(text: str) -> float:
    top, _, bottom = text.partition("/")
    if bottom and int(bottom) == 0:
        raise InputError(f"{text!r} is not a number", where="free parameters")
    return float(top) / float(bottom) if bottom else float(text)


def _symbol_of(label: str) -> str:
    for word, symbol in _SPARE_WORDS.items():
        if label.startswith(word):
            return symbol
    for size in (2, 1):
        if label[:size] in ELEMENTS and label[:size].isalpha():
            return label[:size]
    raise InputError(
        f"the atom label {label!r} names no element",
        where="free parameters",
        hint="write them like 'O(0.2617,0.2617,0.2617)' or 'u=0.2617'",
    )


def parse_parameters(text: str) -> tuple[tuple[Placed, ...], dict[str, float]]:
    """Return the coordinates with a label and the named values of a free-parameter text.

    Raises
    ------
    InputError
        If a part can be read as neither.
    """
    placed: list[Placed] = []
    named: dict[str, float] = {}
    for part in filter(None, (piece.strip() for piece in text.split(";"))):
        match = _PLACED.fullmatch(part)
        if match is not None:
            label = match["label"].strip()
            x, y, z = (_value(match[axis]) for axis in "xyz")
            placed.append(Placed(label, _symbol_of(label), (x, y, z)))
            continue
        values = list(_NAMED.finditer(part))
        if not values:
            raise InputError(
                f"{part!r} is not read",
                where="free parameters",
                hint="write them like 'O(0.2617,0.2617,0.2617)' or 'u=0.2617', separated by semicolons",
            )
        named.update({value["name"]: _value(value["value"]) for value in values})
    return tuple(placed), named


def evaluate(template: tuple[str, str, str], values: dict[str, float]) -> Position:
    """Return the position of a type's site with those parameter values: ``('1/8', 'y', 'y+1/4')``."""

    def one(text: str) -> float:
        total = 0.0
        for sign, term in re.findall(r"([+-]?)([^+-]+)", text):
            size = values[term] if term[0].isalpha() else _value(term)
            total += -size if sign == "-" else size
        return total

    x, y, z = (one(text) for text in template)
    return x, y, z


@dataclass(frozen=True, slots=True, eq=False)
class Setting:
    """A change of axes and origin, r' = rotation r + shift, that turns a source's setting into the type's."""

    rotation: FloatArray
    shift: FloatArray

    def apply(self, position: Position) -> FloatArray:
        result: FloatArray = self.rotation @ np.asarray(position) + self.shift
        return result


def _operation_keys(
    rotations: FloatArray, translations: FloatArray, centring: FloatArray
) -> set[tuple[int, ...]]:
    moved = np.round(48 * (translations[:, None, :] + centring[None, :, :])).astype(int) % 48
    turned = np.round(rotations).astype(int).reshape(len(rotations), -1)
    return {
        (*(int(value) for value in turned[index]), *(int(value) for value in moved[index, shift]))
        for index in range(len(rotations))
        for shift in range(len(centring))
    }


@lru_cache(maxsize=64)
def equivalent_settings(name: str) -> tuple[Setting, ...]:
    """Return other settings of a space group: inverted, two axes exchanged, shifted along the diagonal.

    Only those that turn the group into itself, so that the same coordinates describe the same structure.
    """
    group = space_group(name)
    own = _operation_keys(group.rotations, group.translations, group.centring)
    exchange = np.array([[0.0, 1.0, 0.0], [1.0, 0.0, 0.0], [0.0, 0.0, 1.0]])
    found = []
    for eighth in range(8):
        for turn in (np.eye(3), exchange):
            for sign in (1.0, -1.0):
                rotation, shift = sign * turn, np.full(3, eighth / 8)
                inverse = rotation.T
                rotations = rotation @ group.rotations @ inverse
                translations = group.translations @ rotation.T + shift - rotations @ shift
                if _operation_keys(rotations, translations, group.centring @ rotation.T) == own:
                    found.append(Setting(rotation, shift))
    return tuple(found)


def source_settings(name: str) -> tuple[Setting, ...]:
    """Return the type's own setting and, where the group has two origins, the one of origin choice 1."""
    settings = [Setting(np.eye(3), np.zeros(3))]
    centre = _CENTRE_OF_CHOICE_1.get(space_group(name).number)
    if centre is not None and name.endswith(":2"):
        settings.append(Setting(np.eye(3), np.full(3, -centre)))
    return tuple(settings)


def nearest_image(name: str, point: FloatArray, typical: Position) -> tuple[float, Position]:
    """Return how far the nearest image of `point` lies from `typical` (fraction of a), and that image."""
    images = orbit(name, point.tolist())
    difference = images - np.asarray(typical)
    difference -= np.round(difference)
    distance = np.sqrt((difference**2).sum(axis=1))
    best = int(np.argmin(np.round(distance, 9)))
    x, y, z = (round(float(value), 10) for value in np.asarray(typical) + difference[best])
    return float(distance[best]), (x, y, z)
