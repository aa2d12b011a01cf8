"""Two workers, one deadline: the PlanSolver that the loop asks.

The first ready worker answers; the second stands by, built and solved once, and
takes over at once when the first is killed or dies. A keeper task replaces
whatever is missing, one at a time, and slows down when workers keep dying.
After `deaths` of them within `window_s` it gives up: that is for a person.

    ready worker asked --> answer in time ............ Plan, NoPlan
                       --> deadline passes ........... SIGKILL, Overrun
                       --> died, or spoke nonsense ... SIGKILL, WorkerLost
    no ready worker ................................. SolverWarming
    given up ........................................ WorkerLost, `latched`

Overruns are not deaths: the loop's period paces them, and a slow solver is no
reason never to ask again.
"""

from __future__ import annotations

import asyncio
from collections import deque
from collections.abc import Callable, Mapping
from dataclasses import dataclass

from edgectl.ports import PortError
from edgectl.records.encoding import EncodingError, from_json, to_json
from edgectl.records.entries import Json
from edgectl.records.plan import (
    NoPlan,
    Overrun,
    Plan,
    PlanRequest,
    SolveOutcome,
    SolverWarming,
    WorkerLost,
)
from edgectl.worker.frames import Frame, FrameKind
from edgectl.worker.messages import Ready, Setup
from edgectl.worker.process import WorkerGoneError, WorkerProcess

# One that answers, one that stands by.
WORKERS = 2


class WorkerUnavailableError(PortError):
    """No worker could do this: none became ready, or it was refused, late or lost."""


@dataclass(frozen=True, slots=True)
class Patience:
    """How long to wait for a worker, and how often to start another one."""

    build_s: float = 120.0
    """From the start of a process until it has solved once; longer counts as a death."""
    deaths: int = 5
    window_s: float = 600.0
    """This many deaths within this time, and no worker is started again."""
    pause_s: float = 0.5
    """Before a start after the second recent death; doubled with each further one."""
    longest_pause_s: float = 30.0
    reap_s: float = 5.0
    """How long `close` waits for killed processes: one in an uninterruptible call may take it."""


class WatchedSolver:
    """A PlanSolver over worker processes. All deadlines are on the event loop's clock."""

    def __init__(self, setup: Setup, patience: Patience | None = None) -> None:
        self._setup = to_json(setup)
        self._patience = patience or Patience()
        self._keeper: asyncio.Task[None] | None = None
        self._alive: set[WorkerProcess] = set()
        """Every process that is not reaped yet, killed ones included."""
        self._ready: list[WorkerProcess] = []
        """In the order in which they became ready: the first answers."""
        self._deaths: deque[float] = deque()
        self._trouble = "the first one is being built"
        self._changed = asyncio.Event()
        self.latched = False
        """Given up after repeated deaths: a person has to look and start the service again."""
        self.readiness: Ready | None = None
        """What the newest worker said when it was ready."""

    def start(self) -> None:
        """Begin to build workers; returns at once."""
        if self._keeper is not None:
            raise RuntimeError("a WatchedSolver is started once")
        # Kept here, and asked in every call whether it is well; `close` ends it.
        self._keeper = asyncio.create_task(self._keep())  # noqa: TID251 outlives this call

    async def wait_ready(self, timeout_s: float, workers: int = 1) -> Ready:
        """Return when a worker can be asked; with `workers=2` the standby too.

        Raises
        ------
        WorkerUnavailableError
            Not within `timeout_s`, or given up.
        """
        budget = asyncio.timeout(timeout_s)
        try:
            async with budget:
                await self._idle_workers(workers)
        except TimeoutError as error:
            if not budget.expired():
                raise
            raise WorkerUnavailableError(
                f"no worker is ready after {timeout_s:g} s: {self._trouble}"
            ) from error
        assert self.readiness is not None
        return self.readiness

    async def solve(self, request: PlanRequest, deadline: float) -> SolveOutcome:
        """The plan, or why there is none; at the latest at `deadline` [s, the loop's clock]."""
        self._require_keeper()
        if self.latched:
            return WorkerLost(self._trouble)
        idle = self._idle()
        if not idle:
            return SolverWarming(f"no worker is ready: {self._trouble}")
        worker = idle[0]
        began = asyncio.get_running_loop().time()
        if deadline <= began:
            return Overrun(0.0, killed=False)
        budget = asyncio.timeout_at(deadline)
        try:
            async with budget:
                frame = await worker.ask(FrameKind.REQUEST, to_json(request))
        except TimeoutError:
            if not budget.expired():
                raise
            self._kill(worker)
            return Overrun(deadline - began, killed=True)
        except WorkerGoneError as error:
            return WorkerLost(str(error))
        finally:
            self._drop_unanswered(worker)
        return self._outcome(worker, request, frame)

    async def job(self, name: str, arguments: Mapping[str, Json], timeout_s: float) -> Json:
        """Let the brain do something else, in a worker that stands by if there is one.

        Raises
        ------
        WorkerUnavailableError
            Not within `timeout_s` (the worker is killed), refused by the brain,
            or the worker was lost.
        """
        worker: WorkerProcess | None = None
        budget = asyncio.timeout(timeout_s)
        try:
            async with budget:
                # The last one, so that the first stays free for the cycle.
                worker = (await self._idle_workers(1))[-1]
                order: Json = {"job": name, "arguments": dict(arguments)}
                frame = await worker.ask(FrameKind.JOB, order)
        except TimeoutError as error:
            if not budget.expired():
                raise
            what = "not done" if worker else f"no worker ready ({self._trouble})"
            raise WorkerUnavailableError(f"job {name}: {what} within {timeout_s:g} s") from error
        except WorkerGoneError as error:
            raise WorkerUnavailableError(f"job {name}: the worker {error}") from error
        finally:
            if worker is not None:
                self._drop_unanswered(worker)
        if frame.kind is FrameKind.REFUSED:
            raise WorkerUnavailableError(f"job {name}: {frame.payload}")
        if frame.kind is not FrameKind.RESULT:
            worker.lose(f"answered a job with a {frame.kind.name} frame")
            raise WorkerUnavailableError(f"job {name}: the worker {worker.lost}")
        return frame.payload

    async def close(self) -> None:
        """Kill and reap every worker. Raises what the keeper stumbled over, if it did."""
        if self._keeper is not None:
            self._keeper.cancel()
            await asyncio.wait([self._keeper])
        for worker in tuple(self._alive):
            self._kill(worker)
        # Bounded: past it the kernel still owes us the process, and systemd takes over.
        budget = asyncio.timeout(self._patience.reap_s)
        try:
            async with budget:
                for worker in tuple(self._alive):
                    await worker.gone.wait()
        except TimeoutError:
            if not budget.expired():
                raise
        self._alive = {worker for worker in self._alive if not worker.gone.is_set()}
        if self._keeper is not None and not self._keeper.cancelled():
            self._keeper.result()

    # -- answers ----------------------------------------------------------------------------

    def _outcome(
        self, worker: WorkerProcess, request: PlanRequest, frame: Frame
    ) -> Plan | NoPlan | WorkerLost:
        answer: Plan | NoPlan
        try:
            if frame.kind is FrameKind.PLAN:
                answer = from_json(Plan, frame.payload)
            elif frame.kind is FrameKind.NO_PLAN:
                answer = from_json(NoPlan, frame.payload)
            else:
                raise EncodingError(f"a {frame.kind.name} frame")
        except EncodingError as error:
            return self._lost_for(worker, f"answered nonsense: {error}")
        if answer.request_id != request.request_id:
            return self._lost_for(
                worker, f"answered request {answer.request_id!r}, not {request.request_id!r}"
            )
        if isinstance(answer, Plan) and answer.cycle != request.cycle:
            return self._lost_for(worker, f"answered cycle {answer.cycle}, not {request.cycle}")
        return answer

    def _lost_for(self, worker: WorkerProcess, why: str) -> WorkerLost:
        worker.lose(why)
        return WorkerLost(why)

    # -- workers ----------------------------------------------------------------------------

    def _idle(self) -> list[WorkerProcess]:
        return [worker for worker in self._ready if not worker.busy]

    async def _idle_workers(self, count: int) -> list[WorkerProcess]:
        """At least `count` of them, at once or as soon as they are ready."""
        self._require_keeper()
        await self._until(lambda: self.latched or len(self._idle()) >= count)
        if self.latched:
            raise WorkerUnavailableError(self._trouble)
        return self._idle()

    async def _until(self, condition: Callable[[], bool]) -> None:
        while not condition():
            self._changed.clear()
            await self._changed.wait()

    def _drop_unanswered(self, worker: WorkerProcess) -> None:
        """A worker whose answer nobody waits for any more must not be asked again."""
        if worker.busy and worker in self._ready:
            self._kill(worker)
        self._changed.set()

    def _kill(self, worker: WorkerProcess) -> None:
        worker.kill()
        self._forget(worker)

    def _forget(self, worker: WorkerProcess) -> None:
        if worker in self._ready:
            self._ready.remove(worker)
        self._changed.set()

    def _lost(self, worker: WorkerProcess) -> None:
        """Called by a worker that died or was given up."""
        self._forget(worker)
        self._count_death(f"the last worker {worker.lost}")

    def _count_death(self, trouble: str) -> None:
        now = asyncio.get_running_loop().time()
        self._deaths.append(now)
        while self._deaths[0] < now - self._patience.window_s:
            self._deaths.popleft()
        self._trouble = trouble
        if len(self._deaths) >= self._patience.deaths and not self.latched:
            self.latched = True
            self._trouble = (
                f"given up after {len(self._deaths)} deaths within "
                f"{self._patience.window_s:g} s; {trouble}. Find the cause, then start again"
            )
            for worker in tuple(self._alive):
                self._kill(worker)
        self._changed.set()

    # -- the keeper -------------------------------------------------------------------------

    def _require_keeper(self) -> None:
        if self._keeper is None or self._keeper.cancelled():
            raise RuntimeError("the WatchedSolver is not started, or closed")
        if self._keeper.done():
            # When it has given up there is nothing to hear; a bug goes on to the caller.
            self._keeper.result()

    async def _keep(self) -> None:
        while not self.latched:
            await self._until(lambda: self.latched or len(self._ready) < WORKERS)
            await asyncio.sleep(self._pause_s())
            if not self.latched:
                await self._build_one()

    def _pause_s(self) -> float:
        if len(self._deaths) < 2:
            return 0.0
        pause_s = self._patience.pause_s * 2.0 ** (len(self._deaths) - 2)
        return min(pause_s, self._patience.longest_pause_s)

    async def _build_one(self) -> None:
        try:
            worker = await WorkerProcess.start(self._lost)
        except OSError as error:
            self._count_death(f"the last worker could not be started: {error}")
            return
        self._alive = {one for one in self._alive if not one.gone.is_set()} | {worker}
        budget = asyncio.timeout(self._patience.build_s)
        try:
            async with budget:
                frame = await worker.ask(FrameKind.SETUP, self._setup)
            self.readiness = from_json(Ready, frame.payload)
        except TimeoutError:
            if not budget.expired():
                raise
            worker.lose(f"was not ready within {self._patience.build_s:g} s")
        except EncodingError as error:
            worker.lose(f"answered its setup with nonsense: {error}")
        except WorkerGoneError:
            # `_lost` has counted it.
            pass
        else:
            if worker.lost is None and not self.latched:
                self._ready.append(worker)
                self._trouble = "one is being built to replace one that was killed"
                self._changed.set()
