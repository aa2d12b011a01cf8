"""`edgectl report`: the page, the table, and the figures as JSON."""

from __future__ import annotations

import io
from dataclasses import asdict
from pathlib import Path

from edgectl.console.cycle_table import write_cycle_table
from edgectl.console.endings import Exit, FoundError, say, write_json, write_text
from edgectl.console.figures import made_moves, overruns, spells, summary, unused_tags
from edgectl.console.history import History, read_history
from edgectl.console.report import ChainWords, report_page
from edgectl.console.verify import chain_sentence
from edgectl.journal.reader import JournalUnreadableError
from edgectl.journal.verify import ChainReport, verify
from edgectl.records.encoding import EncodingError

SCHEMA = "edgectl.report/1"


def report_command(
    journal: Path,
    out: Path,
    begin: float | None,
    end: float | None,
    table: Path | None,
    json_target: str | None,
) -> Exit:
    chain = verify(journal)
    try:
        history = read_history(journal, begin, end)
    except (JournalUnreadableError, EncodingError) as error:
        words = str(error) if chain.intact else chain_sentence(chain)
        raise FoundError(f"{journal}: {words}") from error
    write_report(history, chain, journal, out)
    say(f"report   {out}", json_target=json_target)
    if table is not None:
        rows = io.StringIO(newline="")
        count = write_cycle_table(history, rows)
        write_text(table, rows.getvalue())
        say(f"table    {table}, {count} cycles", json_target=json_target)
    say(chain_sentence(chain), json_target=json_target)
    write_json(json_target, _content(history, chain, journal, out))
    return Exit.DONE if chain.intact else Exit.FINDING


def write_report(history: History, chain: ChainReport, journal: Path, out: Path) -> None:
    """Write the page. Raises EndedError."""
    words = ChainWords(
        chain.intact, chain_sentence(chain), chain.entries, chain.newest_hash or "none"
    )
    write_text(out, report_page(history, words, journal.name))


def _content(history: History, chain: ChainReport, journal: Path, out: Path) -> dict[str, object]:
    latest = history.latest
    late = overruns(history.decisions)
    return {
        "schema": SCHEMA,
        "journal": str(journal),
        "report": str(out),
        "from": history.decisions[0].made_at if latest else None,
        "to": latest.made_at if latest else None,
        **summary(history),
        "spells": [asdict(spell) for spell in spells(history.decisions)],
        "overruns_held": [
            {"cycle": found.record.cycle, "at": found.record.made_at, "held": dict(found.held)}
            for found in late
        ],
        "moves": [asdict(move) for move in made_moves(history.decisions)],
        "unused_tags": [asdict(tag) for tag in unused_tags(history.decisions)],
        "journal_intact": chain.intact,
        "journal_entries": chain.entries,
        "newest_hash": chain.newest_hash,
    }
