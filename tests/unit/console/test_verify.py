"""`edgectl verify`."""

from __future__ import annotations

import json
import shutil
import sqlite3
from contextlib import closing
from pathlib import Path

from click.testing import CliRunner

from edgectl.console.commands import main


def run(*arguments: str) -> tuple[int, str]:
    result = CliRunner().invoke(main, ["verify", *arguments])
    return result.exit_code, result.output


def test_an_intact_chain(shift_journal: Path) -> None:
    code, said = run(str(shift_journal))
    assert code == 0
    assert "The chain is intact: 963 entries" in said
    assert "2026-01-05 06:00:00" in said


def test_json_alone_on_standard_output(shift_journal: Path) -> None:
    result = CliRunner().invoke(main, ["verify", str(shift_journal), "--json", "-"])
    found = json.loads(result.stdout)
    assert (found["schema"], found["intact"], found["entries"]) == ("edgectl.verify/1", True, 963)
    newest = found["newest_hash"]
    assert run(str(shift_journal), "--anchor", newest)[0] == 0


def test_an_anchor_shows_a_cut_off_tail(shift_journal: Path, tmp_path: Path) -> None:
    result = CliRunner().invoke(main, ["verify", str(shift_journal), "--json", "-"])
    anchor = json.loads(result.stdout)["newest_hash"]
    cut = _changed(shift_journal, tmp_path, "DELETE FROM entries WHERE seq > 900")
    assert run(str(cut))[0] == 0
    code, said = run(str(cut), "--anchor", anchor)
    assert code == 1
    assert "is not in the chain" in said


def test_a_changed_entry_is_named(shift_journal: Path, tmp_path: Path) -> None:
    changed = _changed(shift_journal, tmp_path, "UPDATE entries SET at = at + 1 WHERE seq = 50")
    code, said = run(str(changed))
    assert code == 1
    assert "The chain is broken: entry 50 was altered" in said


def test_a_missing_file_is_wrong_usage(tmp_path: Path) -> None:
    assert run(str(tmp_path / "none"))[0] == 2


def _changed(journal: Path, folder: Path, statement: str) -> Path:
    copy = folder / "copy.journal"
    shutil.copy(journal, copy)
    with closing(sqlite3.connect(copy)) as connection:
        connection.execute(statement)
        connection.commit()
    return copy
