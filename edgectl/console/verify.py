"""`edgectl verify`: is the journal what was written?"""

from __future__ import annotations

from dataclasses import asdict
from datetime import UTC, datetime
from pathlib import Path

from edgectl.console.endings import Exit, say, write_json
from edgectl.journal.verify import ChainReport, verify

SCHEMA = "edgectl.verify/1"


def verify_command(journal: Path, anchor: str | None, json_target: str | None) -> Exit:
    found = verify(journal, anchor)
    say(chain_sentence(found, anchor), json_target=json_target)
    if found.from_time is not None and found.to_time is not None:
        stretch = f"{instant_words(found.from_time)} to {instant_words(found.to_time)}"
        say(f"entries      {found.entries}, {stretch}", json_target=json_target)
    if found.newest_hash is not None:
        say(f"newest hash  {found.newest_hash}", json_target=json_target)
        say("Keep it somewhere else: --anchor then shows a cut-off tail.", json_target=json_target)
    content = {"schema": SCHEMA, "journal": str(journal), "anchor": anchor, **asdict(found)}
    write_json(json_target, content)
    return Exit.DONE if found.intact else Exit.FINDING


def chain_sentence(found: ChainReport, anchor: str | None = None) -> str:
    """The verdict as a sentence."""
    if not found.intact:
        return f"The chain is broken: {found.why}."
    if not found.entries:
        return "The journal is empty, and nothing was removed from its start."
    held = " The anchor is in it." if anchor else ""
    return f"The chain is intact: {found.entries} entries, each follows from the one before.{held}"


def instant_words(instant: float) -> str:
    return datetime.fromtimestamp(instant, UTC).isoformat(sep=" ", timespec="seconds")
