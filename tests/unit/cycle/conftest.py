"""The policies of the example site file, a plan to change, and silence in the log."""

from __future__ import annotations

import logging
from collections.abc import Iterator
from dataclasses import dataclass, replace
from pathlib import Path

import pytest
import structlog

from edgectl.cycle.policies import Policies
from edgectl.cycle.positions import Seen, validate
from edgectl.records.measurements import Measurements, MovePosition
from edgectl.records.plan import CvPrediction, Plan, PlannedMove, PlanRequest
from edgectl.records.readings import TagSnapshot
from edgectl.runtime.policies import policies_from
from edgectl.settings import load_site
from edgectl.testing.toy import REFLUX, TRAY, ToyPlanner, ToyPlant, toy_policies

NOW = 1_767_592_800.0


@pytest.fixture(scope="session")
def policies(repo_root: Path) -> Policies:
    example = load_site(repo_root / "deploy/examples/methanol_water.toml")
    return toy_policies(policies_from(example))


@pytest.fixture(autouse=True)
def quiet_log() -> Iterator[None]:
    structlog.configure(wrapper_class=structlog.make_filtering_bound_logger(logging.CRITICAL))
    yield
    structlog.reset_defaults()


@dataclass(frozen=True)
class Case:
    """One question, its answer, and ways to spoil both."""

    policies: Policies
    measurements: Measurements
    request: PlanRequest
    plan: Plan

    @property
    def positions(self) -> dict[str, MovePosition]:
        return dict(self.measurements.positions)

    def move(self, mv: str) -> PlannedMove:
        return next(move for move in self.plan.moves if move.mv == mv)

    def prediction(self, cv: str) -> CvPrediction:
        return next(found for found in self.plan.predictions if found.cv == cv)

    def with_move(self, mv: str, **changes: object) -> Plan:
        moves = tuple(
            replace(move, **changes) if move.mv == mv else move  # type: ignore[arg-type]  # test helper
            for move in self.plan.moves
        )
        return replace(self.plan, moves=moves)

    def with_prediction(self, cv: str, **changes: object) -> Plan:
        predictions = tuple(
            replace(found, **changes) if found.cv == cv else found  # type: ignore[arg-type]  # test helper
            for found in self.plan.predictions
        )
        return replace(self.plan, predictions=predictions)

    def planned(self, **firsts: tuple[float, float]) -> Plan:
        """The plan with (first, destination) as given, by `reflux` and `tray`."""
        plan = self.plan
        for name, (first, destination) in firsts.items():
            mv = {"reflux": REFLUX, "tray": TRAY}[name]
            moves = tuple(
                replace(m, first=first, destination=destination) if m.mv == mv else m
                for m in plan.moves
            )
            plan = replace(plan, moves=moves)
        return plan

    def request_for(self, measurements: Measurements) -> PlanRequest:
        return replace(self.request, positions=tuple(measurements.positions.values()))


def make_case(policies: Policies, reflux: float, tray: float, bottoms: float = 0.0) -> Case:
    plant = ToyPlant(policies, NOW - 3600.0, seed=1)
    plant.setpoints |= {REFLUX: reflux, TRAY: tray}
    plant.push["BOTTOMS"] = bottoms
    plant.advance(NOW)
    readings = tuple(plant.reading(tag) for tag in policies.tags)
    found = validate(TagSnapshot(1, NOW, readings), Seen(), policies)
    request = PlanRequest(
        request_id="cycle-1",
        cycle=1,
        made_at=NOW,
        elapsed_s=0.0,
        soft_deadline_s=1.0,
        measurements=tuple(found.measurements.values.values()),
        positions=tuple(found.measurements.positions.values()),
        limits=found.limits,
        memory={},
    )
    plan = ToyPlanner(policies).answer(request)
    return Case(policies, found.measurements, request, plan)


@pytest.fixture
def case(policies: Policies) -> Case:
    """Too much reflux, too cold a tray: both moves are planned."""
    return make_case(policies, 9000.0, 98.0, bottoms=0.4)
