"""What a rehearsal left behind, read for judging: journal, server's write log, true values.

The three are kept by different processes: what the runtime says it published is held
against what the server saw.
"""

from __future__ import annotations

import json
import math
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from datetime import UTC, datetime
from functools import cached_property
from pathlib import Path

from edgectl.console.demo_score import WriteCounts, count_writes_in
from edgectl.journal.reader import JournalReader
from edgectl.journal.verify import ChainReport, verify
from edgectl.records.cycle_record import (
    DecisionRecord,
    DeliveryRecord,
    EventRecord,
    OpeningRecord,
)
from edgectl.records.encoding import from_json
from edgectl.records.entries import EntryKind
from edgectl.settings import Site, load_site
from sim_server.scoring import read_truth
from sim_server.writelog import WriteEntry

ADVISOR = "advisor"
CREW = "board (crew)"
DRILL = "board (drill)"
SWITCH = "HS-2120.advice_on"
HEARTBEAT_LIMIT_S = 90.0
"""Three missed periods: what the plant's side is told to believe [plant s]."""
EXPIRY_SLACK_S = 2.0
"""The crew looks once per step of two plant seconds, right after the watchdog did."""


@dataclass(frozen=True)
class Decided:
    """A decision as it stands in the journal."""

    seq: int
    record: DecisionRecord


@dataclass
class Publication:
    """All writes from one `valid = false` to the next: what one cycle put at the server."""

    plant_time: float
    first_line: int
    """In the write log; the same for `last_line`."""
    last_line: int = 0
    values: dict[str, object] = field(default_factory=dict)
    """By node, without `ADV.`; the newest value."""

    @property
    def valid(self) -> bool:
        return self.values.get("valid") is True

    @property
    def cycle(self) -> int | None:
        """None for a withdrawal, and for a delivery that was cut off before its stamps."""
        found = self.values.get("cycle")
        return found if isinstance(found, int) else None

    def target(self, mv: str) -> object:
        return self.values.get(f"{mv}.target")


class Evidence:
    """Everything about one rehearsal. Raises what its readers raise."""

    def __init__(self, folder: Path) -> None:
        self.folder = folder
        self.journal = folder / "journal.sqlite"
        self.site: Site = load_site(folder / "site.toml")
        self.chain: ChainReport = verify(self.journal)
        self.decisions: list[Decided] = []
        self.deliveries: dict[int, tuple[int, DeliveryRecord]] = {}
        """By the number of their decision: their own number and what they say."""
        self.events: list[EventRecord] = []
        self.openings: list[tuple[int, OpeningRecord]] = []
        with JournalReader(self.journal) as reader:
            for entry in reader.entries():
                if entry.kind is EntryKind.DECISION:
                    self.decisions.append(Decided(entry.seq, from_json(DecisionRecord, entry.body)))
                elif entry.kind is EntryKind.DELIVERY:
                    found: DeliveryRecord = from_json(DeliveryRecord, entry.body)
                    if found.decision_seq is not None:
                        self.deliveries[found.decision_seq] = (entry.seq, found)
                elif entry.kind is EntryKind.EVENT:
                    self.events.append(from_json(EventRecord, entry.body))
                elif entry.kind is EntryKind.OPENED:
                    self.openings.append((entry.seq, from_json(OpeningRecord, entry.body)))
        self.writes = tuple(read_whole_lines(folder / "writes.jsonl"))
        self.publications = publications(self.writes)

    @cached_property
    def truth(self) -> list[dict[str, float]]:
        return read_truth(self.folder / "truth.csv")

    @cached_property
    def counts(self) -> WriteCounts:
        return count_writes_in(self.folder / "writes.jsonl", self.site.write_fence())

    @property
    def records(self) -> list[DecisionRecord]:
        return [decided.record for decided in self.decisions]

    def published(self, cycle: int) -> Publication | None:
        """What the server saw of this cycle."""
        return next((found for found in self.publications if found.cycle == cycle), None)

    def crew_writes(self, begin: float, end: float) -> list[WriteEntry]:
        return [w for w in self.writes if w.user == CREW and begin <= w.plant_time <= end]


def read_whole_lines(path: Path) -> Iterator[WriteEntry]:
    """The write log's entries; a last line that is still being written is left out."""
    text = path.read_text("utf-8")
    whole = text[: text.rfind("\n") + 1]
    for line in whole.splitlines():
        yield WriteEntry(**json.loads(line))


def publications(writes: Sequence[WriteEntry]) -> list[Publication]:
    """The advisor's accepted writes, cut where `valid` falls."""
    found: list[Publication] = []
    for number, write in enumerate(writes):
        if write.user != ADVISOR or not write.accepted:
            continue
        name = write.node.removeprefix("ADV.")
        if (name == "valid" and write.value is False) or not found:
            found.append(Publication(write.plant_time, number))
        found[-1].values[name] = write.value
        found[-1].last_line = number
    return found


def undocumented(evidence: Evidence) -> list[str]:
    """Publications that the journal does not bear out."""
    by_cycle = {decided.record.cycle: decided for decided in evidence.decisions}
    problems = []
    for seen in evidence.publications:
        if seen.cycle is None:
            if seen.valid:
                problems.append(f"valid = true without a cycle at plant time {seen.plant_time:.1f}")
            continue
        decided = by_cycle.get(seen.cycle)
        if decided is None:
            # Without a record nothing may be valid; not valid, it may have come out unrecorded.
            if seen.valid:
                problems.append(f"cycle {seen.cycle} was published as valid and has no decision")
            continue
        problems += _unlike(seen, decided, evidence)
    return problems


def _unlike(seen: Publication, decided: Decided, evidence: Evidence) -> Iterator[str]:
    advice, cycle = decided.record.advice, seen.cycle
    if seen.valid and not advice.valid:
        yield f"cycle {cycle} was published as valid and decided as {advice.standing}"
    delivery = evidence.deliveries.get(decided.seq)
    if delivery is not None and delivery[0] <= decided.seq:
        yield f"the delivery of cycle {cycle} stands before its decision"
    for move in advice.moves:
        if move.target is not None and seen.target(move.mv) != move.target:
            yield f"cycle {cycle}: {move.mv} decided {move.target}, seen {seen.target(move.mv)}"


def unrecorded(evidence: Evidence) -> int:
    """Cycles seen at the server, not valid, of which no decision became durable."""
    known = {decided.record.cycle for decided in evidence.decisions}
    cycles = {seen.cycle for seen in evidence.publications if not seen.valid}
    return len({cycle for cycle in cycles if cycle is not None} - known)


def untimely_crew_actions(writes: Sequence[WriteEntry]) -> tuple[list[str], list[float]]:
    """Crew actions on advice that was not usable, by our own reading of the write log.

    The plant's watchdog and crew are not asked: valid, wanted, in date and alive is judged
    here anew from what was written before.

    Returns
    -------
    list of str
        Those that should not have been.
    list of float
        For each action, the plant seconds that the advice still had to run [s].
    """
    board = dict[str, object]()
    wanted, beat_at, problems, left = True, -math.inf, [], []
    for write in writes:
        if not write.accepted:
            continue
        name = write.node.removeprefix("ADV.")
        if write.node == SWITCH:
            wanted = write.value is True
        elif write.user == ADVISOR:
            if name == "heartbeat" and write.value != board.get(name):
                beat_at = write.plant_time
            board[name] = write.value
        elif write.user == CREW:
            until = _instant(board.get("valid_until"))
            expires_at = min(until, beat_at + HEARTBEAT_LIMIT_S)
            left.append(expires_at - write.plant_time)
            if not (wanted and board.get("valid") is True and left[-1] >= -EXPIRY_SLACK_S):
                problems.append(
                    f"{write.node} = {write.value} at plant time {write.plant_time:.1f}"
                )
    return problems, left


def _instant(value: object) -> float:
    """Plant time of a time in the write log; long ago when none was ever written."""
    if not isinstance(value, str):
        return -math.inf
    found = datetime.fromisoformat(value)
    return found.replace(tzinfo=found.tzinfo or UTC).timestamp()


def stretch(values: Sequence[bool]) -> tuple[int, int] | None:
    """First index of the first run of True, and the index behind it."""
    if True not in values:
        return None
    first = values.index(True)
    behind = next((k for k in range(first, len(values)) if not values[k]), len(values))
    return first, behind


def reading_status(record: DecisionRecord, tag: str) -> int | None:
    """The status code with which the tag came; None when it did not come."""
    return next((r.status_code for r in record.readings if r.tag == tag), None)


def reading_value(record: DecisionRecord, tag: str) -> float | None:
    found = next((r.value for r in record.readings if r.tag == tag), None)
    return float(found) if isinstance(found, bool | int | float) else None


def targets(record: DecisionRecord) -> Mapping[str, float | None]:
    return {move.mv: move.target for move in record.advice.moves}
