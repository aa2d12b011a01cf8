"""One row per cycle, for a spreadsheet."""

from __future__ import annotations

import csv
from collections.abc import Iterator
from datetime import UTC, datetime
from typing import TextIO

from edgectl.console.history import History
from edgectl.records.cycle_record import DecisionRecord, DeliveryRecord

_FIXED = (
    "cycle",
    "made_at",
    "standing",
    "reason",
    "valid",
    "outcome",
    "skipped_cycles",
    "solve_ms",
    "budget_ms",
    "read_ms",
    "validate_ms",
    "decide_ms",
    "journal_ms",
    "publish_ms",
    "late_ms",
    "loop_lag_max_ms",
    "sentence",
)
# A spreadsheet takes a cell that begins with one of these for a formula to run.
_FORMULA_SIGNS = ("=", "+", "-", "@", "\t", "\r")


def write_cycle_table(history: History, file: TextIO) -> int:
    """The rows written. Columns: fixed ones, then each MV, then each CV."""
    mvs = sorted({mv for d in history.decisions for mv in d.positions})
    cvs = sorted({limits.cv for d in history.decisions for limits in d.limits})
    rows = csv.writer(file)
    rows.writerow([*_FIXED, *_columns(mvs, ("position", "target")), *_columns(cvs, ("estimate",))])
    for seq, decision in zip(history.decision_seqs, history.decisions, strict=True):
        cells = (
            *_fixed(decision, history.deliveries.get(seq)),
            *_of_mvs(decision, mvs),
            *_of_cvs(decision, cvs),
        )
        rows.writerow([_safe(cell) for cell in cells])
    return len(history.decisions)


def _columns(names: list[str], what: tuple[str, ...]) -> list[str]:
    return [str(_safe(f"{name} {word}")) for name in names for word in what]


def _fixed(decision: DecisionRecord, delivery: DeliveryRecord | None) -> tuple[object, ...]:
    spent = decision.timings
    return (
        decision.cycle,
        datetime.fromtimestamp(decision.made_at, UTC).isoformat(timespec="milliseconds"),
        decision.advice.standing.value,
        decision.advice.reason,
        int(decision.advice.valid),
        decision.outcome,
        decision.skipped_cycles,
        round(spent.solve_ms, 3),
        round(decision.budget_ms, 3),
        round(spent.read_ms, 3),
        round(spent.validate_ms, 3),
        round(spent.decide_ms, 3),
        None if delivery is None else round(delivery.journal_ms, 3),
        None if delivery is None else round(delivery.publish_ms, 3),
        round(spent.late_ms, 3),
        round(decision.loop_lag.max_ms, 3),
        decision.advice.sentence,
    )


def _of_mvs(decision: DecisionRecord, mvs: list[str]) -> Iterator[object]:
    targets = {move.mv: move.target for move in decision.advice.moves}
    for mv in mvs:
        where = decision.positions.get(mv)
        yield where.position if where else None
        yield targets.get(mv)


def _of_cvs(decision: DecisionRecord, cvs: list[str]) -> Iterator[object]:
    believed = {c.cv: c.value for c in decision.estimate.cvs} if decision.estimate else {}
    for cv in cvs:
        yield believed.get(cv)


def _safe(cell: object) -> object:
    if isinstance(cell, str) and cell.startswith(_FORMULA_SIGNS):
        return "'" + cell
    return cell
