"""Run the study, from ``tests/``: ``python -m study.run --set reporting --lists 200 --jobs 2 -o study.json``.

Prints the table of figures (Markdown) with bootstrap intervals, the rivals' figures on the same lists, and
the reliability diagram; ``-o`` keeps everything, one row for each list, for diagnosis. ``--failures``
prints the lists with a wrong claim or a missed phase. The same command gives the same table.
"""

from __future__ import annotations

import argparse
import json
import sys
import time
import traceback
from collections.abc import Sequence
from concurrent.futures import ProcessPoolExecutor
from dataclasses import asdict, dataclass
from functools import partial
from pathlib import Path

from phasedb.identify import match
from phasedb.identify.settings import MatchSettings
from study.library import starter_table
from study.metrics import ListScore, score
from study.oracle import judge
from study.rivals import RIVALS
from study.sets import SETS, make_case
from study.tables import figures_text, honesty_text, reliability_text, rivals_text
from study.truth import Case


@dataclass(frozen=True, slots=True)
class RivalScore:
    """What one rival made of one list."""

    found_strict: int
    found_alike: int
    wrong: int


@dataclass(frozen=True, slots=True)
class Row:
    """One list: its figures, the rivals' figures, and a description for diagnosis."""

    set_name: str
    number: int
    score: ListScore
    rivals: dict[str, RivalScore]
    truth: str


def study_one(task: tuple[str, str, int], *, with_rivals: bool) -> Row:
    """Simulate one list, match it, judge it."""
    set_name, kind, number = task
    case = make_case(set_name, kind, number)
    verdicts = [judge(case, starter_table(), phase) for phase in case.truth.phases]
    start = time.process_time()
    try:
        found = match(case.peaks, case.table, MatchSettings())
        result = score(case, found, verdicts, time.process_time() - start)
    except Exception:  # a fault of the matcher is a finding of the study, not its end
        result = ListScore.failed(case, traceback.format_exc(limit=-3))
    return Row(set_name, number, result, _rivals(case, verdicts) if with_rivals else {}, describe(case))


def _rivals(case: Case, verdicts: Sequence) -> dict[str, RivalScore]:
    from study.metrics import found_with_look_alikes

    listed = [(phase, v) for phase, v in zip(case.truth.phases, verdicts, strict=True) if not phase.removed]
    alike = set().union(*(verdict.look_alikes for verdict in verdicts)) | {
        phase.name for phase in case.truth.phases
    }
    scores = {}
    for name, rival in RIVALS.items():
        answer = rival(case.peaks, case.table)
        top = set(answer.ranking[: len(listed)])
        scores[name] = RivalScore(
            sum(phase.name in top for phase, _ in listed),
            found_with_look_alikes(answer.ranking, listed),
            sum(claim not in alike for claim in answer.claimed),
        )
    return scores


def describe(case: Case) -> str:
    """Return the truth of a list on one line."""
    truth, setting = case.truth, case.truth.setting
    phases = "; ".join(
        f"{p.name} {p.lattice_type} {p.a_true:.4f} ({100 * p.drift:+.3f} % {p.drift_class}) w={p.share:.2f} "
        f"seen={p.lines_seen}{' REMOVED' if p.removed else ''}"
        for p in truth.phases
    )
    radiation = case.peaks.radiation.name if case.peaks.radiation else "none"
    return (
        f"[{phases or truth.note}] {radiation} {case.peaks.unit} n={len(case.peaks)} "
        f"noise={setting.noise_deg:.3f} z={setting.zero_deg:+.3f} s={setting.displacement_mm:+.3f} "
        f"floor={setting.floor:.3f} "
        f"fwhm={setting.fwhm_deg:.2f}{' I' if case.peaks.intensity is not None else ''}"
        f"{' range?' if case.peaks.range_assumed else ''}"
    )


def run(
    kind: str,
    lists: int,
    *,
    jobs: int = 1,
    only: Sequence[str] = (),
    first: int = 0,
    with_rivals: bool = True,
) -> list[Row]:
    """Return one row for each list of the chosen sets, in a fixed order."""
    names = [one.name for one in SETS if not only or one.name in only]
    tasks = [(name, kind, number) for name in names for number in range(first, first + lists)]
    work = partial(study_one, with_rivals=with_rivals)
    starter_table()
    if jobs == 1:
        return [work(task) for task in tasks]
    with ProcessPoolExecutor(jobs) as pool:
        return list(pool.map(work, tasks, chunksize=4))


def main(arguments: Sequence[str] | None = None) -> int:
    """Command line of the study."""
    parser = argparse.ArgumentParser(prog="python -m study.run", description=__doc__)
    parser.add_argument("--set", dest="kind", choices=("tuning", "reporting"), default="tuning")
    parser.add_argument("--lists", type=int, default=60, help="lists of each set")
    parser.add_argument("--first", type=int, default=0, help="number of the first list")
    parser.add_argument("--jobs", type=int, default=1)
    parser.add_argument(
        "--only", action="append", default=[], choices=[one.name for one in SETS], help="this set only"
    )
    parser.add_argument("--no-rivals", action="store_true")
    parser.add_argument(
        "--failures", action="store_true", help="print lists with a wrong claim or a missed phase"
    )
    parser.add_argument("-o", dest="output", type=Path, help="JSON of everything")
    options = parser.parse_args(arguments)
    rows = run(options.kind, options.lists, jobs=options.jobs, only=options.only, first=options.first,
               with_rivals=not options.no_rivals)  # fmt: skip
    text = "\n\n".join(
        part
        for part in (figures_text(rows), honesty_text(rows), rivals_text(rows), reliability_text(rows))
        if part
    )
    if options.failures:
        print_failures(rows)
    print(text)
    if options.output:
        document = {
            "set": options.kind,
            "lists": options.lists,
            "rows": [asdict(row) for row in rows],
            "table": text,
        }
        options.output.write_text(json.dumps(document, indent=1), encoding="utf-8")
    return 1 if any(row.score.fault for row in rows) else 0


def print_failures(rows: Sequence[Row]) -> None:
    """Print each list with a wrong claim, a missed phase or a fault: truth, then what was claimed."""
    for row in rows:
        one = row.score
        short = one.found_alike < one.n_listed
        if not (one.wrong_claims or one.missed or short or one.fault):
            continue
        print(f"{row.set_name} {row.number}: {row.truth}")
        for label, values in (
            ("wrong", one.wrong_claims),
            ("missed", one.missed),
            ("right", one.right_claims),
        ):
            if values:
                print(f"    {label}: {', '.join(values)}")
        if short:
            print(f"    in the top n: {one.found_alike} of {one.n_listed}")
        if one.fault:
            print("    " + one.fault.replace("\n", "\n    "))
    print()


if __name__ == "__main__":
    sys.exit(main())
