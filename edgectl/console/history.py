"""A stretch of the journal in memory: what the report and the figures are made from.

A month has some 86,000 cycles, so of each decision only what is shown later is
kept; the newest is kept whole, and predictions only now and then.
"""

from __future__ import annotations

import itertools
from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import Any, Final

from edgectl.journal.reader import JournalReader, StoredEntry
from edgectl.records.advice import Standing
from edgectl.records.cycle_record import (
    DecisionRecord,
    DeliveryRecord,
    EventRecord,
    OpeningRecord,
    WithdrawalRecord,
)
from edgectl.records.encoding import from_json
from edgectl.records.entries import EntryKind
from edgectl.records.plan import EMPTY_MEMORY

PREDICTIONS_EVERY: Final = 5
"""Every so many cycles keep their predictions; the newest always does."""


@dataclass(frozen=True, slots=True)
class Dated:
    """An entry that is not a cycle, with its instant."""

    at: float
    record: EventRecord | WithdrawalRecord | OpeningRecord


@dataclass(slots=True)
class History:
    """Oldest first. Empty lists are normal: a journal may have been opened a second ago."""

    decisions: list[DecisionRecord] = field(default_factory=list)
    deliveries: dict[int, DeliveryRecord] = field(default_factory=dict)
    """By the sequence number of their decision."""
    decision_seqs: list[int] = field(default_factory=list)
    events: list[Dated] = field(default_factory=list)
    withdrawals: list[Dated] = field(default_factory=list)
    openings: list[Dated] = field(default_factory=list)
    newest_estimate: DecisionRecord | None = None
    """The newest decision that has one, whole: a held cycle has none of its own."""

    @property
    def latest(self) -> DecisionRecord | None:
        return self.decisions[-1] if self.decisions else None

    @property
    def opening(self) -> OpeningRecord | None:
        """The newest start of the runtime."""
        found = self.openings[-1].record if self.openings else None
        return found if isinstance(found, OpeningRecord) else None

    @property
    def site(self) -> SiteWords:
        opening = self.opening
        return SiteWords(opening.site_content if opening else {})


class SiteWords:
    """What the journalled site file says about a tag, an MV or a CV; blank when it does not."""

    def __init__(self, content: Mapping[str, Any]) -> None:
        self._content = content

    @property
    def title(self) -> str:
        return str(self._of("site").get("name", "Site not named in this journal"))

    @property
    def feed_stage(self) -> int | None:
        stage = self._of("column").get("feed_stage")
        return stage if isinstance(stage, int) else None

    def unit(self, name: str) -> str:
        for section in ("cv", "mv", "tags"):
            found = self._of(section, name).get("unit")
            if found is not None:
                return "" if found == "-" else str(found).replace("degC", "°C")
        return ""

    def description(self, name: str) -> str:
        for section in ("cv", "mv", "tags"):
            if "description" in self._of(section, name):
                return str(self._of(section, name)["description"])
        return name

    def cv(self, name: str) -> Mapping[str, Any]:
        return self._of("cv", name)

    def mv(self, name: str) -> Mapping[str, Any]:
        return self._of("mv", name)

    def stage_of_mv(self, name: str) -> int:
        """Where an MV acts: its loop's stage, or the top."""
        loop = self.mv(name).get("loop")
        stage = loop.get("stage") if isinstance(loop, Mapping) else None
        return stage if isinstance(stage, int) else 0

    def tag(self, name: str) -> Mapping[str, Any]:
        return self._of("tags", name)

    def tray_tags(self) -> dict[str, int]:
        """Tags that measure a stage's temperature, with their stage."""
        tags = self._of("tags").items()
        return {name: tag["stage"] for name, tag in tags if isinstance(tag.get("stage"), int)}

    def _of(self, *path: str) -> Mapping[str, Any]:
        found: Any = self._content
        for part in path:
            found = found.get(part) if isinstance(found, Mapping) else None
        return found if isinstance(found, Mapping) else {}


def read_history(path: Path, begin: float | None = None, end: float | None = None) -> History:
    """The history with begin <= time < end of plant time [s].

    Starts of the runtime before `begin` are in it too: a stretch is read with the site file
    that was in force. Raises JournalUnreadableError and EncodingError.
    """
    others = [kind for kind in EntryKind if kind is not EntryKind.OPENED]
    with JournalReader(path) as reader:
        openings = reader.entries(EntryKind.OPENED, to_time=end)
        rest = reader.entries(*others, from_time=begin, to_time=end)
        return history_from(itertools.chain(openings, rest))


def history_from(entries: Iterable[StoredEntry]) -> History:
    """The history in these entries. Raises EncodingError when a body is not what its kind says."""
    history = History()
    newest: DecisionRecord | None = None
    for entry in entries:
        if entry.kind is EntryKind.OPENED:
            history.openings.append(Dated(entry.at, from_json(OpeningRecord, entry.body)))
        elif entry.kind is EntryKind.DECISION:
            if newest is not None:
                keep = len(history.decisions) % PREDICTIONS_EVERY == 0
                history.decisions[-1] = _slim(newest, keep_predictions=keep)
            newest = from_json(DecisionRecord, entry.body)
            history.decisions.append(newest)
            if newest.estimate is not None and newest.estimate.profile:
                history.newest_estimate = newest
            history.decision_seqs.append(entry.seq)
        elif entry.kind is EntryKind.DELIVERY:
            delivery: DeliveryRecord = from_json(DeliveryRecord, entry.body)
            if delivery.decision_seq is not None:
                history.deliveries[delivery.decision_seq] = delivery
            if newest is not None and newest.cycle == entry.cycle:
                stood = as_delivered(newest, delivery)
                if history.newest_estimate is newest:
                    history.newest_estimate = stood
                newest = history.decisions[-1] = stood
        elif entry.kind is EntryKind.EVENT:
            history.events.append(Dated(entry.at, from_json(EventRecord, entry.body)))
        elif entry.kind is EntryKind.WITHDRAWAL:
            history.withdrawals.append(Dated(entry.at, from_json(WithdrawalRecord, entry.body)))
    return history


def as_delivered(record: DecisionRecord, delivery: DeliveryRecord) -> DecisionRecord:
    """A decision as it stood at the plant: advice that did not arrive there was a hold."""
    # Too late to be published, or its writes did not all arrive.
    undelivered = delivery.decision_seq is None or not delivery.delivery.complete
    if not (undelivered and record.advice.valid):
        return record
    reason, why = "not_published", f"publishing failed: {delivery.delivery.problem}"
    if delivery.decision_seq is None:
        reason, why = "not_journalled", "the decision could not be recorded in time"
    advice = replace(
        record.advice,
        standing=Standing.HOLDING,
        valid=False,
        reason=reason,
        sentence=f"Last move held: {why}.",
        moves=tuple(replace(move, changed=False) for move in record.advice.moves),
    )
    return replace(record, advice=advice)


def _slim(record: DecisionRecord, *, keep_predictions: bool) -> DecisionRecord:
    estimate = record.estimate
    if estimate is not None:
        estimate = replace(estimate, memory=EMPTY_MEMORY, profile=())
    predictions = (
        tuple(replace(found, taken_alone={}) for found in record.predictions)
        if keep_predictions
        else ()
    )
    return replace(
        record,
        readings=(),
        memory_in=EMPTY_MEMORY,
        estimate=estimate,
        planned=(),
        predictions=predictions,
    )
