"""The watched solver with real processes that are slow, hung, dead, or talk nonsense."""

from __future__ import annotations

import asyncio
import gc
import math
import os
import signal
from collections.abc import AsyncIterator, Iterator
from contextlib import asynccontextmanager
from pathlib import Path
from typing import Any

import pytest

from edgectl.ports import PlanSolver
from edgectl.records.plan import (
    NoPlan,
    Overrun,
    Plan,
    PlanRequest,
    SolveOutcome,
    SolverWarming,
    WorkerLost,
)
from edgectl.worker.handle import Patience, WatchedSolver, WorkerUnavailableError
from edgectl.worker.messages import Setup

pytestmark = pytest.mark.asyncio

START_S = 30.0
# Far longer than a fake brain thinks, far shorter than a test may take.
AMPLE_S = 10.0


@pytest.fixture(autouse=True)
def fakes_can_be_imported(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("PYTHONPATH", str(Path(__file__).parent))


@pytest.fixture(autouse=True)
def nothing_is_left_behind() -> Iterator[None]:
    before = open_descriptors(), own_children()
    yield
    gc.collect()
    assert (open_descriptors(), own_children()) == before


def open_descriptors() -> set[str]:
    """What is open, without the directory that the question itself opens."""
    return {os.path.realpath(fd) for fd in Path("/proc/self/fd").iterdir() if fd.exists()}


def own_children() -> set[int]:
    """Processes whose parent we are, zombies included."""
    found = set()
    for entry in Path("/proc").iterdir():
        if entry.name.isdigit():
            try:
                fields = (entry / "stat").read_text().rpartition(")")[2].split()
            except (FileNotFoundError, ProcessLookupError):
                continue
            if int(fields[1]) == os.getpid():
                found.add(int(entry.name))
    return found


@asynccontextmanager
async def solver_with(
    patience: Patience | None = None, slow_cycles: tuple[int, int] | None = None, **site: Any
) -> AsyncIterator[WatchedSolver]:
    """A started solver over a fake brain; closing it leaves no task."""
    setup = Setup(site, "fake_brains:build_brain", rehearsal=True, slow_cycles=slow_cycles)
    solver = WatchedSolver(setup, patience)
    solver.start()
    try:
        yield solver
    finally:
        await solver.close()
        assert asyncio.all_tasks() == {asyncio.current_task()}


def request_for(cycle: int) -> PlanRequest:
    memory = {"states": (0.1, math.inf), "moves": ()}
    return PlanRequest(f"r{cycle}", cycle, 1e9, 30.0, 1.0, (), (), (), memory)


async def solve(solver: WatchedSolver, cycle: int, within_s: float = AMPLE_S) -> SolveOutcome:
    deadline = asyncio.get_running_loop().time() + within_s
    return await solver.solve(request_for(cycle), deadline)


# -- the good days ----------------------------------------------------------------------


async def test_a_plan_comes_back_whole() -> None:
    async with solver_with() as solver:
        port: PlanSolver = solver
        ready = await solver.wait_ready(START_S)
        assert (ready.engine, ready.model_hash) == ("fake", "f00d")
        outcome = await solve(port, 1)  # type: ignore[arg-type]  # the port has what is used
        assert isinstance(outcome, Plan)
        assert (outcome.request_id, outcome.cycle) == ("r1", 1)
        assert outcome.estimate.memory == {"states": (0.1, math.inf), "moves": ()}


async def test_no_plan_is_an_answer_and_the_worker_lives_on() -> None:
    async with solver_with(cycles={"1": "no_plan"}) as solver:
        await solver.wait_ready(START_S)
        first = await solve(solver, 1)
        assert isinstance(first, NoPlan)
        assert first.reason == "infeasible"
        assert isinstance(await solve(solver, 2), Plan)


async def test_what_native_code_prints_does_not_reach_the_wire() -> None:
    cycles = {"1": "print", "2": "flood"}
    async with solver_with(build="print", warm_up="print", cycles=cycles) as solver:
        await solver.wait_ready(START_S)
        assert isinstance(await solve(solver, 1), Plan)
        assert isinstance(await solve(solver, 2), Plan)
        assert isinstance(await solve(solver, 3), Plan)


async def test_nan_arrives_as_nan_for_the_vetting_to_refuse() -> None:
    async with solver_with(cycles={"1": "nan"}) as solver:
        await solver.wait_ready(START_S)
        outcome = await solve(solver, 1)
        assert isinstance(outcome, Plan)
        assert math.isnan(outcome.cost_with)
        assert outcome.cost_without == -math.inf


async def test_a_worker_has_one_thread_for_linear_algebra() -> None:
    async with solver_with() as solver:
        environment = await solver.job("environment", {}, START_S)
        assert isinstance(environment, dict)
        assert environment["OPENBLAS_NUM_THREADS"] == "1"


# -- past the deadline ---------------------------------------------------------------------


async def test_a_hung_worker_is_killed_and_the_standby_takes_over_at_once() -> None:
    async with solver_with(cycles={"1": "hang"}) as solver:
        await solver.wait_ready(START_S, workers=2)
        loop = asyncio.get_running_loop()
        began = loop.time()
        outcome = await solve(solver, 1, within_s=0.1)
        took = loop.time() - began
        assert outcome == Overrun(pytest.approx(0.1, abs=0.05), killed=True)
        assert 0.1 <= took < 1.0  # bench/worker_latency.py has the figure
        assert isinstance(await solve(solver, 2), Plan)
        await solver.wait_ready(START_S, workers=2)


async def test_without_a_standby_the_solver_is_warming() -> None:
    async with solver_with(cycles={"1": "hang", "2": "hang"}) as solver:
        await solver.wait_ready(START_S, workers=2)
        assert isinstance(await solve(solver, 1, within_s=0.05), Overrun)
        assert isinstance(await solve(solver, 2, within_s=0.05), Overrun)
        outcome = await solve(solver, 3)
        assert isinstance(outcome, SolverWarming)
        assert "being built" in outcome.why
        await solver.wait_ready(START_S)
        assert isinstance(await solve(solver, 4), Plan)


async def test_a_worker_that_has_not_solved_once_is_not_asked() -> None:
    async with solver_with(warm_up="hang") as solver:
        assert isinstance(await solve(solver, 1), SolverWarming)
        with pytest.raises(WorkerUnavailableError, match=r"no worker is ready after 0\.05 s"):
            await solver.wait_ready(0.05)


async def test_a_deadline_that_has_passed_costs_no_worker() -> None:
    async with solver_with() as solver:
        await solver.wait_ready(START_S)
        assert await solve(solver, 1, within_s=-1.0) == Overrun(0.0, killed=False)
        assert isinstance(await solve(solver, 2), Plan)


async def test_overruns_are_no_reason_to_give_up() -> None:
    cycles = {str(n): "hang" for n in range(1, 5)}
    async with solver_with(Patience(deaths=2), cycles=cycles) as solver:
        for cycle in range(1, 5):
            await solver.wait_ready(START_S)
            assert isinstance(await solve(solver, cycle, within_s=0.05), Overrun)
        await solver.wait_ready(START_S)
        assert isinstance(await solve(solver, 5), Plan)


async def test_a_timeout_from_outside_is_not_an_overrun() -> None:
    async with solver_with(cycles={"1": "hang"}) as solver:
        await solver.wait_ready(START_S, workers=2)
        with pytest.raises(TimeoutError):
            async with asyncio.timeout(0.05):
                await solve(solver, 1)
        # Its worker may still answer the old question: it is replaced, not asked again.
        assert isinstance(await solve(solver, 2), Plan)
        await solver.wait_ready(START_S, workers=2)


async def test_the_drill_is_late_in_its_cycles_and_in_no_other() -> None:
    async with solver_with(slow_cycles=(2, 2)) as solver:
        await solver.wait_ready(START_S, workers=2)
        assert isinstance(await solve(solver, 1), Plan)
        assert isinstance(await solve(solver, 2, within_s=0.1), Overrun)
        assert isinstance(await solve(solver, 3), Plan)


# -- deaths and nonsense -------------------------------------------------------------------


@pytest.mark.parametrize(
    ("how", "why"),
    [
        ("abort", "died from SIGABRT"),
        ("segfault", "died from SIGSEGV"),
        ("raise", "ended with exit code 1: RuntimeError: the matrix is singular"),
        ("garbage", "spoke nonsense: unknown kind of frame"),
        ("oversize", "spoke nonsense: a frame of 4294967295 bytes; at most 1048576"),
        ("large", "spoke nonsense: a frame of 1100"),
        ("truncated", "ended with exit code 0"),
        ("hang_up", "closed the wire"),
        ("huge", "ended with exit code 1: edgectl.worker.frames.FrameError: a payload of 9"),
        ("wrong_id", "answered request 'another', not 'r1'"),
        ("wrong_id_no_plan", "answered request 'another', not 'r1'"),
        ("wrong_cycle", "answered cycle 0, not 1"),
        ("no_answer", "answered nonsense: $: unknown field"),
    ],
)
async def test_a_worker_that_fails_is_lost_by_name_and_replaced(how: str, why: str) -> None:
    async with solver_with(cycles={"1": how}) as solver:
        await solver.wait_ready(START_S, workers=2)
        outcome = await solve(solver, 1)
        assert isinstance(outcome, WorkerLost)
        assert outcome.why.startswith(why)
        assert isinstance(await solve(solver, 2), Plan)


async def test_an_answer_too_many_ends_the_trust() -> None:
    async with solver_with(cycles={"1": "twice"}) as solver:
        await solver.wait_ready(START_S, workers=2)
        outcome = await solve(solver, 1)
        assert isinstance(outcome, WorkerLost)
        assert isinstance(await solve(solver, 2), Plan)


async def test_an_idle_worker_that_dies_is_replaced() -> None:
    async with solver_with() as solver:
        await solver.wait_ready(START_S, workers=2)
        victim = solver._ready[-1]
        os.kill(victim.pid, signal.SIGKILL)
        await victim.gone.wait()
        assert victim.lost == "died from SIGKILL"
        await solver.wait_ready(START_S, workers=2)
        assert isinstance(await solve(solver, 1), Plan)


async def test_after_repeated_deaths_it_gives_up_and_says_so() -> None:
    patience = Patience(deaths=3, pause_s=0.01)
    async with solver_with(patience, build="raise") as solver:
        with pytest.raises(WorkerUnavailableError, match="given up after 3 deaths"):
            await solver.wait_ready(START_S)
        assert solver.latched
        outcome = await solve(solver, 1)
        assert isinstance(outcome, WorkerLost)
        assert outcome.why.startswith(
            "given up after 3 deaths within 600 s; the last worker ended with exit code 1: "
            "RuntimeError: the matrix is singular"
        )
        with pytest.raises(WorkerUnavailableError, match="given up"):
            await solver.job("pid", {}, 1.0)


async def test_a_request_that_kills_every_worker_is_not_asked_for_ever() -> None:
    cycles = {str(n): "abort" for n in range(1, 9)}
    async with solver_with(Patience(deaths=3, pause_s=0.01), cycles=cycles) as solver:
        outcomes = []
        for cycle in range(1, 4):
            await solver.wait_ready(START_S)
            outcomes.append(await solve(solver, cycle))
        assert outcomes == [WorkerLost("died from SIGABRT")] * 3
        assert solver.latched
        outcome = await solve(solver, 9)
        assert isinstance(outcome, WorkerLost)
        assert "died from SIGABRT" in outcome.why


async def test_a_build_that_takes_too_long_is_a_death() -> None:
    patience = Patience(build_s=0.5, deaths=2, pause_s=0.01)
    async with solver_with(patience, build="hang") as solver:
        with pytest.raises(WorkerUnavailableError, match=r"was not ready within 0\.5 s"):
            await solver.wait_ready(START_S)


async def test_a_worker_lost_in_the_moment_it_was_ready_is_never_asked() -> None:
    async with solver_with(Patience(deaths=2, pause_s=0.01), build="ready_twice") as solver:
        with pytest.raises(WorkerUnavailableError, match="a READY frame that nobody asked for"):
            await solver.wait_ready(START_S)


@pytest.mark.parametrize(
    ("brain", "why"),
    [
        ("no_such_module:build", "ModuleNotFoundError: No module named 'no_such_module'"),
        ("fake_brains:no_such_maker", "AttributeError"),
    ],
)
async def test_a_brain_that_cannot_be_made_says_why(brain: str, why: str) -> None:
    solver = WatchedSolver(Setup({}, brain), Patience(deaths=1))
    solver.start()
    with pytest.raises(WorkerUnavailableError, match=why):
        await solver.wait_ready(START_S)
    await solver.close()


# -- jobs ----------------------------------------------------------------------------------


async def test_a_job_is_done_beside_the_cycle() -> None:
    async with solver_with() as solver:
        arguments = {"a": [1, 2.5, None], "b": {"c": "d"}}
        assert await solver.job("echo", {**arguments}, START_S) == arguments
        await solver.wait_ready(START_S, workers=2)
        hung = asyncio.ensure_future(solver.job("misbehave", {"how": "hang"}, 0.3))
        await asyncio.sleep(0)
        assert isinstance(await solve(solver, 1), Plan)
        with pytest.raises(WorkerUnavailableError, match=r"not done within 0\.3 s"):
            await hung


async def test_a_job_that_is_refused_costs_no_worker() -> None:
    async with solver_with() as solver:
        await solver.wait_ready(START_S, workers=2)
        one = await solver.job("pid", {}, AMPLE_S)
        with pytest.raises(WorkerUnavailableError, match="no job called levitate"):
            await solver.job("levitate", {}, AMPLE_S)
        assert await solver.job("pid", {}, AMPLE_S) == one


async def test_a_job_that_kills_its_worker_says_so() -> None:
    async with solver_with() as solver:
        with pytest.raises(WorkerUnavailableError, match="the worker died from SIGABRT"):
            await solver.job("misbehave", {"how": "abort"}, START_S)


# -- the end ---------------------------------------------------------------------------------


@pytest.mark.parametrize("turns", [0, 1, 3, 10])
async def test_it_can_be_closed_at_any_moment_of_a_start(turns: int) -> None:
    async with solver_with():
        for _ in range(turns):
            await asyncio.sleep(0)


async def test_closing_ends_an_open_question() -> None:
    async with solver_with(cycles={"1": "hang"}) as solver:
        await solver.wait_ready(START_S)
        question = asyncio.ensure_future(solve(solver, 1, within_s=60.0))
        await asyncio.sleep(0)
        await solver.close()
        assert await question == WorkerLost("was killed")
        with pytest.raises(RuntimeError, match="not started, or closed"):
            await solve(solver, 2)


async def test_a_bug_in_the_keeper_is_heard(monkeypatch: pytest.MonkeyPatch) -> None:
    async def stumble(_: WatchedSolver) -> None:
        raise ZeroDivisionError

    monkeypatch.setattr(WatchedSolver, "_build_one", stumble)
    solver = WatchedSolver(Setup({}, "fake_brains:build_brain"))
    solver.start()
    await asyncio.sleep(0)
    await asyncio.sleep(0)
    with pytest.raises(ZeroDivisionError):
        await solve(solver, 1)
    with pytest.raises(ZeroDivisionError):
        await solver.close()
