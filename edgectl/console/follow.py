"""Following a journal while it is written, for the live view."""

from __future__ import annotations

from pathlib import Path
from types import TracebackType
from typing import Self

from edgectl.console.history import SiteWords, as_delivered
from edgectl.console.live import LiveView
from edgectl.console.svg import clock_words
from edgectl.journal.reader import JournalReader, JournalUnreadableError, StoredEntry
from edgectl.records.cycle_record import (
    DecisionRecord,
    DeliveryRecord,
    EventRecord,
    OpeningRecord,
    WithdrawalRecord,
)
from edgectl.records.encoding import from_json
from edgectl.records.entries import EntryKind


class JournalFollower:
    """Shows what was added since the last look. The file need not exist yet."""

    def __init__(self, path: Path) -> None:
        self._path = path
        self._reader: JournalReader | None = None
        self._next_seq = 1
        self._site = SiteWords({})
        self._decided: DecisionRecord | None = None

    def __enter__(self) -> Self:
        return self

    def __exit__(
        self,
        kind: type[BaseException] | None,
        error: BaseException | None,
        trace: TracebackType | None,
    ) -> None:
        if self._reader is not None:
            self._reader.close()

    def show_new(self, view: LiveView) -> None:
        """Raises JournalUnreadableError, EncodingError."""
        if self._reader is None:
            if not self._path.exists() or self._path.stat().st_size == 0:
                return
            try:
                self._reader = JournalReader(self._path)
            except JournalUnreadableError:
                # It is being made this very moment; a lasting fault shows in the summary.
                return
        for entry in self._reader.entries(first_seq=self._next_seq):
            self._next_seq = entry.seq + 1
            self._show(entry, view)

    def _show(self, entry: StoredEntry, view: LiveView) -> None:
        if entry.kind is EntryKind.OPENED:
            opening: OpeningRecord = from_json(OpeningRecord, entry.body)
            self._site = SiteWords(opening.site_content)
            view.event(f"{clock_words(entry.at)} started, {opening.restored}")
        elif entry.kind is EntryKind.DECISION:
            # Shown with its delivery: until then nobody knows what stands at the plant.
            self._decided = from_json(DecisionRecord, entry.body)
        elif entry.kind is EntryKind.DELIVERY and self._decided is not None:
            delivery: DeliveryRecord = from_json(DeliveryRecord, entry.body)
            view.show(as_delivered(self._decided, delivery), self._site)
            self._decided = None
        elif entry.kind is EntryKind.EVENT:
            event: EventRecord = from_json(EventRecord, entry.body)
            view.event(f"{clock_words(entry.at)} {event.sentence}")
        elif entry.kind is EntryKind.WITHDRAWAL:
            withdrawal: WithdrawalRecord = from_json(WithdrawalRecord, entry.body)
            view.event(f"{clock_words(entry.at)} {withdrawal.sentence}")
