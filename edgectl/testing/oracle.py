"""What must hold in every story, whatever goes wrong: one oracle for all of them.

I1 only known moves are published; I2 what is valid is finite, inside its limits
and its reach, from this cycle's vetted plan and good data; I3 the heartbeat moves
only when the whole cycle made progress; I4 one decision per cycle, durable before
it is valid, followed by its delivery; I5 one cause, one event; I6 recovery by
itself, without a jump; I7 a start warms up.
"""

from __future__ import annotations

import itertools
import math
from collections.abc import Iterator

from edgectl.records.advice import Advice, Standing
from edgectl.records.cycle_record import DecisionRecord
from edgectl.records.entries import EntryKind
from edgectl.records.measurements import Service, Verdict
from edgectl.runtime.loop import CycleReport
from edgectl.testing.story import ASKS, Played

QUIET_CYCLES = 15
"""Cycles after the last fault within which everything is as before."""


def problems(played: Played) -> list[str]:
    """Every broken invariant, in words; empty when all hold."""
    return [
        *_only_known_moves(played),
        *_valid_means_supported(played),
        *_heartbeat_means_progress(played),
        *_one_decision_then_its_delivery(played),
        *_one_cause_one_event(played),
        *_recovers(played),
        *_starts_warm_up(played),
    ]


def _published(played: Played) -> Iterator[Advice]:
    return (seen.advice for seen in played.sink.log if seen.advice is not None)


def _only_known_moves(played: Played) -> Iterator[str]:
    for advice in _published(played):
        if [move.mv for move in advice.moves] != list(played.policies.moves):
            yield f"I1 cycle {advice.cycle}: moves {[m.mv for m in advice.moves]}"


def _valid_means_supported(played: Played) -> Iterator[str]:
    for report in played.reports:
        advice, cycle = report.advice, report.record.cycle
        numbers = [advice.valid_until, *(m.target for m in advice.moves if m.target is not None)]
        if not all(math.isfinite(number) for number in numbers):
            yield f"I2 cycle {cycle}: not finite"
        if not advice.reason or not advice.sentence or advice.cycle != cycle:
            yield f"I2 cycle {cycle}: without reason, sentence or its own cycle"
        if report.delivery.valid and not advice.valid:
            yield f"I2 cycle {cycle}: valid at the plant, not in the advice"
        if (advice.standing is Standing.ADVISING) != advice.valid:
            yield f"I2 cycle {cycle}: {advice.standing} and valid {advice.valid}"
        if advice.valid:
            yield from (f"I2 cycle {cycle}: {what}" for what in _unsupported(played, report))


def _unsupported(played: Played, report: CycleReport) -> Iterator[str]:
    advice, record = report.advice, report.record
    if record.outcome != "plan" or record.vetting:
        yield f"valid from outcome {record.outcome}, vetting {record.vetting}"
    if advice.confirmed_cycle != record.cycle:
        yield f"confirmed by cycle {advice.confirmed_cycle}"
    policy = played.policies.cycle
    if not math.isclose(advice.valid_until, record.made_at + policy.validity_s):
        yield f"valid until {advice.valid_until}"
    for tag, policy_of_tag in played.policies.tags.items():
        verdict = record.measurements[tag].verdict
        if policy_of_tag.required and verdict not in (Verdict.USED, Verdict.TOO_FAST):
            yield f"valid with {tag} {verdict}"
    yield from _unsupported_targets(played, advice, record)


def _unsupported_targets(played: Played, advice: Advice, record: DecisionRecord) -> Iterator[str]:
    for move in advice.moves:
        policy, at = played.policies.moves[move.mv], record.positions[move.mv]
        if move.target is None or at.position is None:
            yield f"valid, and {move.mv} has target {move.target}, position {at.position}"
            continue
        away = abs(move.target - at.position)
        asks = move.reason in ASKS
        if asks and not at.low <= move.target <= at.high:
            yield f"{move.mv} {move.target} outside {at.low} to {at.high}"
        if asks and at.service is Service.FIXED:
            yield f"{move.mv} asked for while {at.reason}"
        if (move.changed and not asks) or (move.changed and away > policy.max_move + 1e-6):
            yield f"{move.mv} asked {away} away, reason {move.reason}"
        if asks and away > policy.max_move + policy.increment + 1e-6:
            yield f"{move.mv} still asked {away} away"
        if not asks and at.low <= at.position <= at.high:
            reach = policy.worthwhile_move + policy.increment
            if away > reach:
                yield f"{move.mv} stands {away} away without being asked for"


def _heartbeat_means_progress(played: Played) -> Iterator[str]:
    for run in played.runs:
        previous = 0
        for report in run:
            cycle = report.record.cycle
            read = report.record.outcome != "no_data"
            whole = read and report.receipt is not None and report.delivery.complete
            if report.progressed != whole:
                yield f"I3 cycle {cycle}: progressed {report.progressed}, whole {whole}"
            if report.heartbeat != previous + int(whole):
                yield f"I3 cycle {cycle}: heartbeat {report.heartbeat} after {previous}"
            previous = report.heartbeat


def _one_decision_then_its_delivery(played: Played) -> Iterator[str]:
    rows = {row.seq: row for row in played.journal.rows}
    seen: dict[int, int] = {}
    for seq, row in rows.items():
        if row.entry.kind is EntryKind.DECISION:
            assert row.entry.cycle is not None
            if row.entry.cycle in seen:
                yield f"I4 cycle {row.entry.cycle}: two decisions, {seen[row.entry.cycle]}, {seq}"
            seen[row.entry.cycle] = seq
        if row.entry.kind is EntryKind.DELIVERY:
            decision_seq = row.entry.body["decision_seq"]
            if decision_seq is None:
                if row.entry.body["delivery"]["valid"]:  # type: ignore[index,call-overload]  # plain JSON
                    yield f"I4 entry {seq}: valid without a decision"
            elif rows[decision_seq].entry.cycle != row.entry.cycle:  # type: ignore[index]  # plain JSON
                yield f"I4 entry {seq}: delivery of another cycle's decision"
    for report in played.reports:
        cycle = report.record.cycle
        if report.receipt is None and report.advice.valid:
            yield f"I4 cycle {cycle}: valid without being on record"
        if report.receipt is not None and seen.get(cycle) != report.receipt.seq:
            yield f"I4 cycle {cycle}: the decision on record is another one"


def _one_cause_one_event(played: Played) -> Iterator[str]:
    raised: dict[tuple[str, str], int] = {}
    standing: set[tuple[str, str]] = set()
    for k, row in enumerate(played.journal.rows):
        if k in played.rows_at_start:
            standing.clear()
        if row.entry.kind is not EntryKind.EVENT:
            continue
        key = (str(row.entry.body["event"]), str(row.entry.body["subject"]))
        if row.entry.body["raised"]:
            if key in standing:
                yield f"I5 {key}: raised twice"
            standing.add(key)
            raised[key] = raised.get(key, 0) + 1
        elif key not in standing:
            yield f"I5 {key}: cleared without being raised"
        else:
            standing.discard(key)
    allowed = len(played.script.faults) + len(played.starts)
    for key, count in raised.items():
        # These have their causes in the plant, not in the script.
        if key[0] not in ("limit_gives_way", "outside_limits") and count > allowed:
            yield f"I5 {key}: raised {count} times for {allowed} causes"


def _recovers(played: Played) -> Iterator[str]:
    last = played.reports[-1]
    if last.record.cycle < played.script.over_at + QUIET_CYCLES:
        return
    # Where the crew has taken the plant is the crew's affair.
    taken_away = played.crew.mode == "opposes" and last.advice.reason == "outside_limits"
    if last.advice.standing is not Standing.ADVISING and not taken_away:
        advice = last.advice
        yield f"I6 cycle {last.record.cycle}: still {advice.standing}: {advice.sentence}"


def _starts_warm_up(played: Played) -> Iterator[str]:
    for run in played.runs:
        for report in run[: played.policies.cycle.warm_up_cycles]:
            if report.advice.valid:
                yield f"I7 cycle {report.record.cycle}: valid right after a start"
        cycles = [report.record.cycle for report in run]
        for before, after in itertools.pairwise(cycles):
            if after != before + 1:
                yield f"I7 cycle {after} after {before}"
