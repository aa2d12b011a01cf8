"""What the worker process needs from whoever estimates and plans."""

from __future__ import annotations

from typing import Protocol

from edgectl.records.entries import Json
from edgectl.records.plan import NoPlan, Plan, PlanRequest


class Brain(Protocol):
    """Built once from a site, then asked again and again; keeps nothing but compiled code.

    The setup names its maker as `module:function`; the function takes the site
    as a dict and a stopwatch (wall seconds, monotonic), and returns one of these.
    What it raises ends the process: a request that cannot be planned is answered
    with NoPlan, not with an error.
    """

    @property
    def engine(self) -> str: ...

    @property
    def model_hash(self) -> str: ...

    def warm_up(self) -> None:
        """Solve once, so that the first request meets compiled and cached code."""

    def answer(self, request: PlanRequest) -> Plan | NoPlan:
        """Estimate and plan: a pure function of the request."""

    def job(self, name: str, arguments: dict[str, Json]) -> Json:
        """Anything else that is solved here, such as an operating point.

        Raises ValueError, with a sentence for people, for a job that it does
        not know or cannot do; the process lives on.
        """
