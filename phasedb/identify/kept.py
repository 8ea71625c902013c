"""The settings of a match as plain JSON values, so that a saved match can be repeated."""

from __future__ import annotations

from dataclasses import asdict, fields
from typing import Any

import numpy as np

from phasedb.errors import InputError
from phasedb.identify.settings import MatchSettings, ShiftPrior

_TUPLES = ("elements", "unseen", "excluding")


def settings_to_json(settings: MatchSettings) -> dict[str, Any]:
    """Return `settings` as JSON values; every bit of a number is kept."""
    document = asdict(settings)
    for name in _TUPLES:
        document[name] = None if document[name] is None else list(document[name])
    foreign = document["foreign_positions"]
    document["foreign_positions"] = None if foreign is None else foreign.tolist()
    return document


def settings_from_json(document: dict[str, Any]) -> MatchSettings:
    """Return the settings of a document made by `settings_to_json`; what it lacks has its default.

    Raises
    ------
    InputError
        If it holds a setting that this program does not know.
    """
    values = dict(document)
    unknown = values.keys() - {column.name for column in fields(MatchSettings)}
    if unknown:
        raise InputError(
            f"settings that this program does not know: {', '.join(sorted(unknown))}",
            hint="repeat the match with the program version that made it",
        )
    for name in _TUPLES:
        if values.get(name) is not None:
            values[name] = tuple(values[name])
    if values.get("foreign_positions") is not None:
        values["foreign_positions"] = np.array(values["foreign_positions"], dtype=np.float64)
    if "shift_prior" in values:
        values["shift_prior"] = ShiftPrior(**values["shift_prior"])
    return MatchSettings(**values)
