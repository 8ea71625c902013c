"""A match read back from its document, so that a saved identification is shown as it was found."""

from __future__ import annotations

from typing import Any, NoReturn

from phasedb.errors import InputError
from phasedb.identify.result import (
    AxisCurve,
    Claim,
    LedgerLine,
    Match,
    MeasurementInfo,
    MeritF,
    MeritM,
    PhaseResult,
    Shift,
    Unlisted,
    UnlistedCandidate,
)
from phasedb.report.document import SCHEMA

_HINT = "expected a document that match --json or a saved identification gave"


def _refuse(what: str) -> NoReturn:
    raise InputError(what, hint=_HINT)


def _merit(document: dict[str, Any]) -> tuple[MeritF | None, MeritM | None]:
    f, m = document["F"], document["M"]
    return (MeritF(**f) if f else None, MeritM(**m) if m else None)


def _phase(document: dict[str, Any]) -> PhaseResult:
    values = dict(document)
    merit_f, merit_m = _merit(values.pop("merit"))
    values["look_alikes"] = tuple(values["look_alikes"])
    values["separated_by"] = tuple(values["separated_by"])
    return PhaseResult(**values, merit_f=merit_f, merit_m=merit_m)


def _candidate(document: dict[str, Any]) -> UnlistedCandidate:
    values = dict(document)
    merit_f, merit_m = _merit(values.pop("merit"))
    values["nearest"] = tuple((near["name"], near["relative_difference"]) for near in values["nearest"])
    return UnlistedCandidate(**values, merit_f=merit_f, merit_m=merit_m)


def _unlisted(document: dict[str, Any]) -> Unlisted:
    values = dict(document)
    probability = values.pop("probability")
    others = tuple(_candidate(other) for other in values.pop("others"))
    values["probability"] = values.pop("best_probability")
    best = None if values["lattice_type"] is None else _candidate(values)
    return Unlisted(probability=probability, best=best, others=others)


def _shift(document: dict[str, Any]) -> Shift:
    values = dict(document)
    for key in ("at_lines_deg", "at_lines_esd_deg"):
        values[key] = None if values[key] is None else tuple(values[key])
    return Shift(**values)


def _line(document: dict[str, Any]) -> LedgerLine:
    values = dict(document)
    values["claims"] = tuple(
        Claim(**{**claim, "hkl": tuple(tuple(hkl) for hkl in claim["hkl"])}) for claim in values["claims"]
    )
    return LedgerLine(**values)


def match_from_document(document: dict[str, Any]) -> Match:
    """Return the match that a ``phasedb.match/1`` document holds (its numbers as rounded there).

    Raises
    ------
    InputError
        If the document has another schema, or lacks something.
    """
    if document.get("schema") != SCHEMA:
        _refuse(f"a document of schema {document.get('schema')!r} is not a match ({SCHEMA})")
    try:
        measurement = dict(document["measurement"])
        measurement["range_low"], measurement["range_high"] = measurement.pop("range")
        return Match(
            program_version=document["program_version"],
            settings=dict(document["settings"]),
            measurement=MeasurementInfo(**measurement),
            library_phase_count=document["library"]["phase_count"],
            library_fingerprint=document["library"]["fingerprint"],
            phases=tuple(_phase(phase) for phase in document["phases"]),
            unlisted=_unlisted(document["unlisted"]),
            nothing_cubic=document["nothing_cubic"],
            shift=_shift(document["shift"]),
            ledger=tuple(_line(line) for line in document["ledger"]),
            cautions=tuple(document["cautions"]),
            axis=tuple(
                AxisCurve(curve["lattice_type"], tuple(curve["ln_a"]), tuple(curve["log_evidence"]))
                for curve in document.get("axis", ())
            ),
        )
    except (KeyError, TypeError, ValueError) as error:
        if isinstance(error, InputError):
            raise
        _refuse(f"the document of a match is incomplete: {type(error).__name__}: {error}")
