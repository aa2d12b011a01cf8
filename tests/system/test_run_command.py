"""`edgectl check` and `edgectl run`, beside a real plant server and a service manager's socket."""

from __future__ import annotations

import json
import os
import secrets
import socket
import subprocess
import sys
from collections.abc import Iterator
from pathlib import Path

import pytest

from edgectl.console.demo import example_site_text
from edgectl.console.history import read_history

PASSWORDS = {
    "EDGECTL_SIM_BOARD_PASSWORD": secrets.token_hex(8),
    "EDGECTL_SIM_ADVISOR_PASSWORD": secrets.token_hex(8),
}
ENVIRONMENT = {**os.environ, **PASSWORDS, "NO_COLOR": "1"}
pytestmark = pytest.mark.timeout(120)


@pytest.fixture(scope="module")
def site(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Path]:
    """The example's site file, at a plant that runs in real time, with short cycles."""
    folder = tmp_path_factory.mktemp("site")
    plant = subprocess.Popen(
        (sys.executable, "-m", "sim_server", "--advisory-period", "3", "--until-stdin-closes"),
        stdin=subprocess.PIPE,
        stdout=subprocess.PIPE,
        env=ENVIRONMENT,
    )
    assert plant.stdin is not None
    assert plant.stdout is not None
    endpoint = json.loads(plant.stdout.readline())["endpoint"]
    text = example_site_text().replace("opc.tcp://127.0.0.1:48400/", endpoint)
    path = folder / "site.toml"
    for usual, short in (
        ("period_s = 30.0", "period_s = 3.0"),
        ("budget_s = 20.0", "budget_s = 2.4"),
        ("journal_wait_s = 2.0", "journal_wait_s = 0.5"),
    ):
        text = text.replace(usual, short, 1)
    path.write_text(text)
    yield path
    plant.stdin.close()
    plant.stdout.close()
    assert plant.wait() == 0


def edgectl(*arguments: str, **environment: str) -> subprocess.CompletedProcess[str]:
    return subprocess.run(
        (sys.executable, "-m", "edgectl.console", *arguments),
        capture_output=True,
        text=True,
        env={**ENVIRONMENT, **environment},
        check=False,
    )


def test_check_finds_a_plant_as_the_site_file_says(site: Path) -> None:
    done = edgectl("check", str(site), "--json", "-")
    assert done.returncode == 0, done.stderr
    found = json.loads(done.stdout)
    assert found["schema"] == "edgectl.check/1"
    assert found["operating_point"]["converged"] is True
    assert len(found["tags"]) > 20


def test_run_reports_to_the_service_manager_and_ends_after_its_cycles(
    site: Path, tmp_path: Path
) -> None:
    with socket.socket(socket.AF_UNIX, socket.SOCK_DGRAM) as manager:
        manager.bind(str(tmp_path / "notify"))
        manager.setblocking(False)
        done = edgectl(
            *("run", str(site), "--journal", str(tmp_path / "state"), "--cycles", "3"),
            *("--json", "-"),
            NOTIFY_SOCKET=str(tmp_path / "notify"),
        )
        assert done.returncode == 0, done.stderr
        told = [manager.recv(4096).decode().split("\n")[0] for _ in range(5)]
    assert told == ["READY=1", "WATCHDOG=1", "WATCHDOG=1", "WATCHDOG=1", "STOPPING=1"]
    figures = json.loads(done.stdout)
    assert (figures["schema"], figures["cycles"]) == ("edgectl.run/1", 3)
    assert "Advice only: the operator decides" in done.stderr
    lines = [json.loads(line) for line in done.stderr.splitlines() if line.startswith("{")]
    assert [line["cycle"] for line in lines if line["event"] == "cycle"] == [1, 2, 3]
    history = read_history(tmp_path / "state" / "journal.sqlite")
    assert history.site.title.startswith("C-2101")
    assert "Traceback" not in done.stderr


def test_a_plant_that_is_not_there_is_said_and_not_traced(tmp_path: Path) -> None:
    with socket.socket() as closed:
        # Bound and not listening: whoever connects is refused.
        closed.bind(("127.0.0.1", 0))
        endpoint = f"opc.tcp://127.0.0.1:{closed.getsockname()[1]}/"
        path = tmp_path / "site.toml"
        path.write_text(example_site_text().replace("opc.tcp://127.0.0.1:48400/", endpoint))
        done = edgectl("check", str(path))
    assert done.returncode == 75, done.stdout + done.stderr
    assert "Traceback" not in done.stderr


@pytest.mark.parametrize("command", ["check", "run"])
def test_a_wrong_site_file_ends_with_78_and_every_finding(command: str, tmp_path: Path) -> None:
    path = tmp_path / "site.toml"
    text = example_site_text().replace("period_s = 30.0", "period_s = -1.0")
    path.write_text(text.replace("hold_limit = 10", "hold_limit = nan\nhold_limt = 3"))
    done = edgectl(command, str(path))
    assert done.returncode == 78
    for key in ("cycle.period_s", "cycle.hold_limit", "cycle.hold_limt"):
        assert f"{key} =" in done.stderr
    assert "Traceback" not in done.stderr


def test_a_password_that_is_not_there_ends_with_78(tmp_path: Path) -> None:
    path = tmp_path / "site.toml"
    path.write_text(example_site_text())
    done = edgectl("run", str(path), EDGECTL_SIM_ADVISOR_PASSWORD="")
    assert done.returncode == 78
    assert "EDGECTL_SIM_ADVISOR_PASSWORD is not set" in done.stderr
