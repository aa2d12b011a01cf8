"""The command `python -m sim_server` as its own process, with the real plant."""

from __future__ import annotations

import csv
import json
import os
import signal
import socket
import stat
import subprocess
import sys
import time
from collections.abc import Awaitable, Callable, Iterator
from contextlib import ExitStack, contextmanager
from datetime import UTC, datetime
from pathlib import Path
from typing import Any, Final

import pytest
from asyncua import ua
from asyncua.client.client import Client

from edgectl.clock import PlantClock
from sim_server.__main__ import main
from sim_server.writelog import read_write_log

START: Final = "2031-03-01T06:00:00Z"
ADVISOR: Final = {"EDGECTL_SIM_ADVISOR_PASSWORD": "advisor word"}
BOTH: Final = {**ADVISOR, "EDGECTL_SIM_BOARD_PASSWORD": "board word"}
COMMAND: Final = (sys.executable, "-W", "error", "-m", "sim_server", "--plant", "methanol_water")
PATIENCE_S: Final = 20.0


class Running:
    """A started server and its ready line."""

    def __init__(self, process: subprocess.Popen[str], ready: dict[str, Any]) -> None:
        self.process = process
        self.ready = ready

    def client(self, user: str | None = None, password: str | None = None) -> Client:
        client = Client(self.ready["endpoint"])
        if user is not None and password is not None:
            client.set_user(user)
            client.set_password(password)
        return client

    def clock(self) -> PlantClock:
        return PlantClock(self.ready["plant_start"], self.ready["anchor"], self.ready["speed"])

    def end(self, number: int = signal.SIGTERM) -> tuple[int, str, str]:
        """Exit code, rest of standard output, standard error."""
        self.process.send_signal(number)
        rest, errors = self.process.communicate(timeout=PATIENCE_S)
        return self.process.returncode, rest, errors


def environment(passwords: dict[str, str]) -> dict[str, str]:
    plain = {key: value for key, value in os.environ.items() if not key.startswith("EDGECTL_")}
    return {**plain, "OPENBLAS_NUM_THREADS": "1", **passwords}


@contextmanager
def running(*options: str, passwords: dict[str, str] | None = None) -> Iterator[Running]:
    with ExitStack() as cleaning:
        process = subprocess.Popen(
            [*COMMAND, "--start", START, *options],
            stdin=subprocess.PIPE,
            stdout=subprocess.PIPE,
            stderr=subprocess.PIPE,
            text=True,
            env=environment(BOTH if passwords is None else passwords),
        )
        cleaning.callback(close, process)
        assert process.stdout is not None
        yield Running(process, json.loads(process.stdout.readline()))


def close(process: subprocess.Popen[str]) -> None:
    if process.poll() is None:
        process.kill()
    process.communicate()


def text_of(path: str) -> str:
    return Path(path).read_text(encoding="utf-8")


def mode_of(path: str) -> int:
    return stat.S_IMODE(Path(path).stat().st_mode)


def is_there(path: str) -> bool:
    return Path(path).exists()


async def until(condition: Callable[[], Awaitable[bool]], what: str) -> None:
    """Poll the server, a bounded time, until the condition holds."""
    deadline = time.monotonic() + PATIENCE_S
    while time.monotonic() < deadline:
        if await condition():
            return
    pytest.fail(f"{what}: not within {PATIENCE_S:g} s")


async def node(client: Client, name: str) -> ua.NodeId:
    return ua.NodeId(name, await client.get_namespace_index("urn:edgectl:sim:C-2101"))


async def value(client: Client, name: str) -> Any:
    return await client.get_node(await node(client, name)).read_value()


async def advise(client: Client, heartbeat: int, valid_until: float) -> None:
    codes = await client.uaclient.write_attributes(
        [
            await node(client, name)
            for name in ("ADV.valid_until", "ADV.heartbeat", "ADV.valid", "FIC-2103.SP")
        ],
        [
            ua.DataValue(ua.Variant(item, kind), StatusCode=None)
            for item, kind in (
                (datetime.fromtimestamp(valid_until, UTC), ua.VariantType.DateTime),
                (heartbeat, ua.VariantType.Int64),
                (True, ua.VariantType.Boolean),
                (8000.0, ua.VariantType.Double),
            )
        ],
    )
    assert [code.is_good() for code in codes] == [True, True, True, False]


@pytest.mark.asyncio
async def test_one_ready_line_shares_the_plant_clock_and_sigterm_ends_cleanly(
    tmp_path: Path,
) -> None:
    truth, log = tmp_path / "truth.csv", tmp_path / "writes.jsonl"
    with running(
        "--speed", "120", "--truth", str(truth), "--write-log", str(log), "--seed", "5"
    ) as server:
        ready = server.ready
        assert ready["ready"] is True
        assert (ready["speed"], ready["seed"], ready["passwords"]) == (120.0, 5, None)
        assert (ready["truth"], ready["write_log"]) == (str(truth), str(log))
        assert ready["pid"] == server.process.pid
        clock = server.clock()
        assert clock.start == datetime.fromisoformat(START).timestamp()
        async with server.client("advisor", "advisor word") as advisor:
            await advise(advisor, 0, clock.start + 1e6)
            await advise(advisor, 1, clock.start + 1e6)
            assert await value(advisor, "ADV.advice_usable") is True

            async def fallen() -> bool:
                return await value(advisor, "ADV.advice_usable") is False

            await until(fallen, "advice_usable falls after the last heartbeat")
            fell_at = clock.plant_time()
            pressure = await advisor.get_node(await node(advisor, "PIC-2111.PV")).read_data_value()
            assert abs(clock.plant_time() - pressure.SourceTimestamp.timestamp()) < 60.0
        code, rest, errors = server.end()
    assert (code, rest, errors) == (0, "", "")
    entries = list(read_write_log(log))
    assert len(entries) == 8
    assert [entry.accepted for entry in entries] == [True, True, True, False] * 2
    assert {entry.user for entry in entries} == {"advisor"}
    assert 90.0 < fell_at - entries[-1].plant_time < 200.0
    with truth.open(encoding="utf-8", newline="") as file:
        times = [float(row["time_s"]) for row in csv.DictReader(file)]
    assert times == [30.0 * (i + 1) for i in range(len(times))]
    assert len(times) >= 3


@pytest.mark.asyncio
async def test_passwords_are_invented_when_not_given_and_kept_for_this_user_only() -> None:
    with running(passwords=ADVISOR) as server:
        path = server.ready["passwords"]
        assert mode_of(path) == 0o600
        passwords = json.loads(text_of(path))
        assert passwords["advisor"] == "advisor word"
        assert len(passwords["board"]) >= 16
        async with server.client("board", passwords["board"]) as board:
            assert await value(board, "HS-2120.advice_on") is True
        with pytest.raises(ua.UaError):
            async with server.client("board", "advisor word"):
                pass
        assert server.end(signal.SIGINT) == (0, "", "")
    assert not is_there(path)


def test_a_plant_too_fast_for_its_machine_says_so_once_and_still_ends_with_its_parent() -> None:
    with running("--speed", "100000", "--until-stdin-closes") as server:
        assert server.process.stderr is not None
        assert server.process.stdin is not None
        line = server.process.stderr.readline()
        server.process.stdin.close()
        server.process.stdin = None
        rest, errors = server.process.communicate(timeout=PATIENCE_S)
    assert "behind its clock" in line
    assert (server.process.returncode, rest, errors) == (0, "", "")


@pytest.mark.parametrize(
    ("options", "complaint"),
    [
        (("--speed", "0"), "not a number above zero"),
        (("--speed", "nan"), "not a number above zero"),
        (("--port", "70000"), "not a port"),
        (("--seed", "-1"), "below zero"),
        (("--crew", "sleeps"), "invalid choice"),
        (("--drill", "earthquake"), "invalid choice"),
        (("--start", "yesterday"), "--start"),
        (("--until-the-cows-come-home",), "unrecognized"),
    ],
)
def test_wrong_usage_is_said_and_exits_with_two(
    options: tuple[str, ...], complaint: str, capsys: pytest.CaptureFixture[str]
) -> None:
    with pytest.raises(SystemExit) as exit_:
        main(options)
    said = capsys.readouterr()
    assert exit_.value.code == 2
    assert complaint in said.err
    assert said.out == ""


def test_a_port_in_use_and_a_file_that_cannot_be_written_are_said(
    capsys: pytest.CaptureFixture[str],
) -> None:
    with socket.create_server(("127.0.0.1", 0)) as taken:
        assert main(["--port", str(taken.getsockname()[1])]) == 2
    assert "in use" in capsys.readouterr().err
    assert main(["--write-log", "/no/such/folder/log"]) == 2
    said = capsys.readouterr()
    assert "/no/such/folder/log" in said.err
    assert said.out == ""


def test_an_empty_password_is_refused(
    capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setenv("EDGECTL_SIM_BOARD_PASSWORD", "")
    assert main([]) == 2
    assert "EDGECTL_SIM_BOARD_PASSWORD is empty" in capsys.readouterr().err
