"""The starter library: real phases, each with its source, from seed_data/starter.csv."""

from __future__ import annotations

import csv
from collections.abc import Iterator
from dataclasses import replace
from typing import Final

from phasedb.library.entry import Draft
from phasedb.library.intake import draft_from_fields
from phasedb.library.migrate import shipped

STARTER_AUTHOR: Final = "starter library"
STARTER_TAG: Final = "starter"


def starter_drafts() -> Iterator[Draft]:
    """Yield the drafts of the starter library."""
    with (shipped("seed_data") / "starter.csv").open(encoding="utf-8", newline="") as stream:
        for row in csv.DictReader(stream):
            draft = draft_from_fields(row)
            yield replace(draft, tags=(*draft.tags, STARTER_TAG))
