"""`check` against the simulated plant, a process of its own: all is named, nothing written."""

from __future__ import annotations

import io
import json
import os
import random
import subprocess
import sys
from collections.abc import Awaitable, Callable, Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import pytest
from rich.console import Console

from edgectl.clock import PlantClock
from edgectl.console.check import CheckResult, run_check
from edgectl.console.check_view import CheckView
from edgectl.opcua.from_site import advice_nodes, server_address, tag_nodes
from edgectl.opcua.session import PlantSession
from edgectl.opcua.sink import OpcUaAdviceSink
from edgectl.opcua.source import OpcUaTagSource
from edgectl.records.advice import Advice, Standing, SuggestedMove
from edgectl.records.entries import Json
from edgectl.settings import Site, parse_site

pytestmark = pytest.mark.asyncio
PASSWORDS = {"advisor": "advisor word", "board": "board word"}


@dataclass(frozen=True)
class Rehearsal:
    """The simulated plant, and a site file that points at it."""

    ready: dict[str, Any]
    text: str

    @property
    def clock(self) -> PlantClock:
        return PlantClock(self.ready["plant_start"], self.ready["anchor"], self.ready["speed"])

    def site(self, *changes: tuple[str, str]) -> Site:
        """The site with pieces of its file exchanged; each must be there."""
        text = self.text
        for old, new in changes:
            assert old in text, old
            text = text.replace(old, new)
        return parse_site(text, "site.toml")

    def writes(self) -> list[dict[str, Any]]:
        """Everything that a client wrote so far, or tried to."""
        lines = Path(self.ready["write_log"]).read_text().splitlines()
        return [entry for entry in map(json.loads, lines) if "(" not in entry["user"]]

    async def check(
        self,
        *changes: tuple[str, str],
        password: str = PASSWORDS["advisor"],
        solve: Callable[[], Awaitable[dict[str, Json]]] | None = None,
    ) -> CheckResult:
        return await run_check(self.site(*changes), password, self.clock, solve)


@pytest.fixture(scope="module")
def rehearsal(repo_root: Path, tmp_path_factory: pytest.TempPathFactory) -> Iterator[Rehearsal]:
    log = tmp_path_factory.mktemp("sim") / "writes.jsonl"
    names = {f"EDGECTL_SIM_{user.upper()}_PASSWORD": word for user, word in PASSWORDS.items()}
    command = [
        sys.executable, "-m", "sim_server", "--plant", "methanol_water", "--port", "0",
        "--speed", "5", "--seed", "3", "--crew", "ignores", "--write-log", str(log),
    ]  # fmt: skip
    with subprocess.Popen(
        command, cwd=repo_root, env=os.environ | names, stdout=subprocess.PIPE, text=True
    ) as process:
        assert process.stdout is not None
        ready = json.loads(process.stdout.readline())
        text = (repo_root / "deploy/examples/methanol_water.toml").read_text()
        yield Rehearsal(ready, text.replace("opc.tcp://127.0.0.1:48400/", ready["endpoint"]))
        process.terminate()


def words(result: CheckResult, severity: str = "error") -> set[tuple[str, str]]:
    return {
        (finding.subject, finding.word)
        for finding in result.findings
        if finding.severity == severity
    }


async def test_the_example_fits_its_plant(rehearsal: Rehearsal) -> None:
    async def solve() -> dict[str, Json]:
        return {"converged": True, "message": "9 steps", "ms": 41.0}

    result = await rehearsal.check(solve=solve)
    assert words(result) == set()
    assert words(result, "warning") == {("server", "insecure")}
    assert (result.ok, result.exit_code) == (True, 0)
    assert [tag.tag for tag in result.tags] == list(rehearsal.site().tags)
    assert all(tag.found and tag.readable and tag.writable is False for tag in result.tags)
    assert all(node.writable for node in result.advisory)
    assert result.clock_offset_s is not None
    assert abs(result.clock_offset_s) < 5.0
    assert result.round_trip_ms is not None
    assert 0.0 < result.round_trip_ms.median <= result.round_trip_ms.max
    ages = {tag.tag: tag.age_s for tag in result.tags}
    assert ages["TI-2107"] is not None
    assert ages["TI-2107"] < 30.0
    assert rehearsal.writes() == []


async def test_the_document_is_plain_and_versioned(rehearsal: Rehearsal) -> None:
    document = json.loads(json.dumps((await rehearsal.check()).to_json(), allow_nan=False))
    assert document["schema"] == 1
    assert document["ok"] is True
    assert {"tags", "advisory", "findings", "round_trip_ms", "clock_offset_s", "operating_point",
            "next_step", "exit_code", "endpoint", "security", "user"} <= set(document)  # fmt: skip
    first = document["tags"][0]
    assert (first["tag"], first["unit"], first["server_unit"]) == ("FIC-2101", "kg/h", "kg/h")


async def test_every_mistake_is_named_at_once(rehearsal: Rehearsal) -> None:
    result = await rehearsal.check(
        ("s=TI-2108.PV", "s=TI-9999.PV"),
        ("s=PDI-2112.PV", "s=FIC-2101"),  # an object, no variable
        ("s=LIC-2113.PV", "s=swap"),  # two tags exchanged
        ("s=TI-2109.PV", "s=LIC-2113.PV"),
        ("s=swap", "s=TI-2109.PV"),
        ("s=ADV.cycle", "s=ADV.cycles"),
        ("s=ADV.standing", "s=ADV.advice_usable"),
        ("clock_offset_limit_s = 30.0", "clock_offset_limit_s = 0.000001"),
    )  # fmt: skip
    assert words(result) == {
        ("TI-2108", "node_missing"),
        ("PDI-2112", "node_missing"),
        ("LIC-2113", "unit_differs"),
        ("TI-2109", "unit_differs"),
        ("cycle", "node_missing"),
        ("standing", "wrong_type"),
        ("standing", "not_writable"),
        ("server", "clock_offset"),
    }
    assert result.exit_code == 1
    assert rehearsal.writes() == []


async def test_values_and_ages_are_judged(rehearsal: Rehearsal) -> None:
    tray_30 = 'role = "tray_temperature"\nstage = 30\nunit = "degC"\nlow'
    outputs = 'role = "loop_output"\nunit = "%"\nlow = 0.0\nhigh'
    result = await rehearsal.check(
        (f"{tray_30} = 50.0", f"{tray_30} = 120.0"),
        (f"{outputs} = 100.0", f"{outputs} = 10.0"),
        ("cycle_s = 360.0", "cycle_s = 1.0"),
    )
    assert words(result) == {("TI-2107", "out_of_range")}
    assert words(result, "warning") >= {
        ("REFLUX-OP", "out_of_range"),
        ("TRAY30-OP", "out_of_range"),
        ("AI-2115", "stale"),
    }


async def test_an_account_that_may_do_more_than_advise_is_noticed(rehearsal: Rehearsal) -> None:
    result = await rehearsal.check(
        ('user = "advisor"', 'user = "board"'), password=PASSWORDS["board"]
    )
    assert ("REFLUX-SP", "account_too_strong") in words(result, "warning")
    assert ("valid", "not_writable") in words(result)
    assert rehearsal.writes() == []


async def test_an_unsolved_operating_point_fails_the_check(rehearsal: Rehearsal) -> None:
    async def solve() -> dict[str, Json]:
        return {"converged": False, "message": "no steady state in 60 steps", "ms": 200.0}

    result = await rehearsal.check(solve=solve)
    assert words(result) == {("operating point", "not_solved")}
    assert result.exit_code == 1


@pytest.mark.parametrize(
    ("old", "new", "password", "exit_code", "sentence"),
    [
        ("127.0.0.1", "127.0.0.2", "advisor word", 75, "nothing listens at opc.tcp://127.0.0.2"),
        ('"advisor"', '"advisor"', "guess", 78, "refused user 'advisor'"),
    ],
)
async def test_no_session_says_why(
    rehearsal: Rehearsal, old: str, new: str, password: str, exit_code: int, sentence: str
) -> None:
    result = await rehearsal.check((old, new), password=password)
    assert (result.connected, result.tags, result.exit_code) == (False, (), exit_code)
    assert sentence in result.findings[0].sentence
    assert "check " in result.next_step


async def test_the_table_shows_what_was_found(rehearsal: Rehearsal) -> None:
    result = await rehearsal.check(("s=TI-2108.PV", "s=TI-9999.PV"))
    paper = io.StringIO()
    Console(width=110, file=paper).print(CheckView(result))
    text = paper.getvalue()
    assert "not as the site file says (errors: 1, warnings: 1)" in text
    assert "node_missing" in text
    assert "Next: TI-2108: check the node id in the site file against the server." in text
    assert all(tag.tag in text for tag in result.tags)


async def test_the_simulated_plant_is_read_and_advised(rehearsal: Rehearsal) -> None:
    site, clock = rehearsal.site(), rehearsal.clock
    address = server_address(site, PASSWORDS["advisor"])
    async with PlantSession(
        address, tag_nodes(site), advice_nodes(site), random.Random(1)
    ) as session:
        await session.wait_linked(5.0)
        source = OpcUaTagSource(session, clock)
        snapshot = await source.read(1, 2.0)
        now = clock.plant_time()
        moves = (
            SuggestedMove("FIC-2103", 7860.0, True, now, "energy_saved", "Lower reflux."),
            SuggestedMove("TIC-2107", 101.5, True, now, "energy_saved", "Lower tray 30."),
        )
        advice = Advice(1, Standing.ADVISING, "limit_reached", "Lower reflux.", True, now + 90.0,
                        now, 1, moves, ())  # fmt: skip
        sink = OpcUaAdviceSink(session)
        delivery = await sink.publish(advice, 1, 2.0)
        withdrawal = await sink.withdraw("stopping", "The advisor stops.", 2.0)
    assert [reading.tag for reading in snapshot.readings] == list(site.tags)
    assert all(reading.value is not None for reading in snapshot.readings)
    assert delivery.problem is None
    assert (delivery.valid, withdrawal.valid, withdrawal.complete) == (True, False, True)
    written = rehearsal.writes()
    assert {entry["user"] for entry in written} == {"advisor"}
    assert all(entry["accepted"] and entry["node"].startswith("ADV.") for entry in written)
