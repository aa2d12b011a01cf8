"""An invented shift as journal entries, for tests of whatever reads a journal.

Nothing here comes from a controller: smooth curves with seeded noise, a few
suggestions, one overrun, one bad tag that ends in silence, one dead analyser.
"""

from __future__ import annotations

import math
import random
from collections.abc import Iterator, Mapping
from typing import Any, Final

from edgectl.records.advice import Advice, Delivery, Standing, SuggestedMove
from edgectl.records.cycle_record import (
    DecisionRecord,
    DeliveryRecord,
    EventRecord,
    FollowUp,
    LoopLag,
    OpeningRecord,
    PhaseTimings,
    Provenance,
)
from edgectl.records.encoding import to_json
from edgectl.records.entries import Entry, EntryKind
from edgectl.records.measurements import Measurement, MovePosition, Service, Verdict
from edgectl.records.plan import (
    CvEstimate,
    CvLimits,
    CvPrediction,
    Estimate,
    PlannedMove,
    ProfileStage,
    SolverStatistics,
)

BEGIN: Final = 1_767_592_800.0
"""5 January 2026, 06:00 UTC."""
PERIOD_S: Final = 30.0
TIMES_MIN: Final = (1.5, 3.5, 6.5, 11.5, 21.5, 41.5, 71.5, 121.5)
WHO: Final = Provenance("0.0-invented", "5a" * 32, "3e" * 32, insecure=True)

SITE: Final[Mapping[str, Any]] = {
    "site": {"name": "C-2101 solvent recovery (invented)", "column": "C-2101"},
    "column": {"feed_stage": 23, "stages": 38},
    "tags": {
        "FIC-2103": {"unit": "kg/h", "description": "reflux flow"},
        "TI-2107": {"unit": "degC", "stage": 30, "description": "tray 30 temperature"},
        "TI-2108": {"unit": "degC", "stage": 8, "description": "tray 8 temperature"},
        "AI-2116": {"unit": "wt ppm", "description": "bottoms methanol"},
        "AI-2115": {"unit": "wt %", "description": "distillate water"},
    },
    "mv": {
        "FIC-2103": {"unit": "kg/h", "description": "reflux flow", "low": 6500.0, "high": 9500.0},
        "TIC-2107": {
            "unit": "degC",
            "description": "tray 30 temperature setpoint",
            "low": 97.0,
            "high": 104.0,
            "loop": {"stage": 30},
        },
    },
    "cv": {
        "BOTTOMS": {
            "unit": "wt ppm",
            "description": "bottoms methanol",
            "measured": "AI-2116",
            "coordinate": "logarithmic",
            "role": "quality",
            "hard_high": 500.0,
        },
        "DISTILLATE": {
            "unit": "wt %",
            "description": "distillate water",
            "measured": "AI-2115",
            "coordinate": "logarithmic",
            "role": "quality",
            "hard_high": 0.5,
        },
    },
}


class InventedShift:
    """Cycles of a made-up shift, one after another."""

    def __init__(self, seed: int = 1) -> None:
        self._random = random.Random(seed)
        self._reflux, self._tray = 8300.0, 102.0
        self._moves: dict[str, SuggestedMove] = {}
        self._before: dict[str, float] = {}
        self._acts_at: dict[str, int] = {}

    def decision(self, cycle: int) -> DecisionRecord:
        at = BEGIN + cycle * PERIOD_S
        outcome = self._outcome(cycle)
        standing, reason, sentence = self._standing(cycle, outcome)
        follow_ups = self._follow(cycle)
        if standing is Standing.ADVISING and cycle % 60 == 20:
            self._suggest(cycle, at)
        planned = outcome == "plan"
        solve_ms = 2000.0 if outcome == "overrun" else self._random.lognormvariate(5.6, 0.25)
        moves = tuple(self._moves.values())
        self._moves = {mv: _unchanged(move) for mv, move in self._moves.items()}
        return DecisionRecord(
            cycle=cycle,
            made_at=at,
            skipped_cycles=0,
            readings=(),
            source_problem=None,
            measurements=self._measurements(cycle, at),
            positions={
                "FIC-2103": _position("FIC-2103", self._reflux, 6500.0, 9500.0),
                "TIC-2107": _position("TIC-2107", self._tray, 97.0, 104.0),
            },
            limits=(
                CvLimits("BOTTOMS", None, 350.0, 150.0),
                CvLimits("DISTILLATE", None, 0.4, None),
            ),
            memory_in={},
            outcome=outcome,
            outcome_detail="",
            estimate=self._estimate(cycle) if planned else None,
            times_min=TIMES_MIN if planned else (),
            planned=self._planned() if planned else (),
            predictions=self._predictions(cycle) if planned else (),
            cost_with=1.0 if planned else None,
            cost_without=1.2 if planned else None,
            gives_way=(),
            vetting=("DISTILLATE above its limit after 40 min",) if cycle == 300 else (),
            follow_ups=follow_ups,
            advice=Advice(
                cycle=cycle,
                standing=standing,
                reason=reason,
                sentence=sentence,
                valid=standing is Standing.ADVISING and cycle >= 3,
                valid_until=at + 90.0,
                made_at=moves[0].made_at if moves else None,
                confirmed_cycle=cycle if planned else None,
                moves=moves,
                notices=self._notices(cycle),
            ),
            statistics=SolverStatistics(
                "collocation", "solved", True, 9, 12.0, solve_ms - 12.0, solve_ms
            )
            if planned
            else None,
            budget_ms=2000.0,
            timings=PhaseTimings(0.4, 11.0, 0.5, solve_ms, 0.8),
            loop_lag=LoopLag(5.0 + self._random.random(), 6.0 + self._random.random(), 2.0, 30),
            provenance=WHO,
        )

    @staticmethod
    def _outcome(cycle: int) -> str:
        if cycle in (150, 151):
            return "overrun"
        return "bad_inputs" if 240 <= cycle < 256 else "plan"

    @staticmethod
    def _standing(cycle: int, outcome: str) -> tuple[Standing, str, str]:
        if cycle < 3:
            return Standing.STARTING, "warm_up", "Starting: no advice before three good cycles."
        if outcome == "overrun":
            return Standing.HOLDING, "over_budget", "Last move held: the plan took too long."
        if outcome == "bad_inputs":
            if cycle < 250:
                return Standing.HOLDING, "input_bad", "Last move held: TI-2107 is bad."
            return Standing.SILENT, "input_bad", "Advice withdrawn: TI-2107 has been bad for 5 min."
        return (
            Standing.ADVISING,
            "economics",
            "Lower the reflux and keep tray 30 where it is: both products have room, and the"
            " reflux is where the energy goes.",
        )

    def _suggest(self, cycle: int, at: float) -> None:
        step = -120.0 if cycle < 300 else 100.0
        wanted = {"FIC-2103": round((self._reflux + step) / 20.0) * 20.0}
        if cycle % 120 == 20:
            wanted["TIC-2107"] = round(self._tray - 0.5, 1)
        for mv, target in wanted.items():
            self._before[mv] = self._reflux if mv == "FIC-2103" else self._tray
            self._acts_at[mv] = cycle + 3
            word = "FIC-2103 reflux" if mv == "FIC-2103" else "TIC-2107 tray 30"
            self._moves[mv] = SuggestedMove(
                mv, target, True, at, "economics", f"{word} to {target:g}: less energy per tonne."
            )

    def _follow(self, cycle: int) -> tuple[FollowUp, ...]:
        found = []
        for mv, move in self._moves.items():
            assert move.target is not None
            taken = cycle >= self._acts_at[mv] and mv == "FIC-2103"
            if taken:
                self._reflux = move.target
            now = self._reflux if mv == "FIC-2103" else self._tray
            left = "pending" if cycle < self._acts_at[mv] + 7 else "ignored"
            found.append(
                FollowUp(mv, move.target, self._before[mv], now, "taken" if taken else left)
            )
        return tuple(found)

    def _bottoms(self, cycle: float) -> float:
        return 180.0 * math.exp(0.35 * math.sin(cycle / 70.0) + 0.1 * math.sin(cycle / 11.0))

    def _distillate(self, cycle: float) -> float:
        return 0.33 * math.exp(0.15 * math.sin(cycle / 55.0 + 1.0))

    def _measurements(self, cycle: int, at: float) -> dict[str, Measurement]:
        noise = self._random.gauss
        bad = 240 <= cycle < 256
        gc_at, gc_cycle = at - 690.0, cycle - cycle % 20 - 23
        return {
            "FIC-2103": _used("FIC-2103", self._reflux + noise(0.0, 20.0), at),
            "TI-2108": _used("TI-2108", 68.3 + noise(0.0, 0.1), at),
            "TI-2107": Measurement(
                "TI-2107",
                self._tray + noise(0.0, 0.1),
                Verdict.BAD_QUALITY if bad else Verdict.USED,
                at,
                0.0,
                not bad,
            ),
            "AI-2116": Measurement(
                "AI-2116",
                self._bottoms(gc_cycle),
                Verdict.FROZEN if cycle > 400 else Verdict.USED,
                gc_at,
                690.0,
                cycle % 20 == 0,
            ),
            "AI-2115": Measurement(
                "AI-2115",
                self._distillate(cycle - 14),
                Verdict.USED,
                at - 420.0,
                420.0,
                cycle % 12 == 0,
            ),
        }

    def _estimate(self, cycle: int) -> Estimate:
        return Estimate(
            cvs=(
                CvEstimate(
                    "BOTTOMS",
                    self._bottoms(cycle),
                    0.1,
                    700.0,
                    "ageing" if cycle > 400 else "live",
                    None,
                    350.0,
                ),
                CvEstimate("DISTILLATE", self._distillate(cycle), -0.05, 430.0, "live", None, 0.4),
            ),
            disturbances={"feed_wt_fraction_light": 0.381},
            profile=tuple(_stage(stage) for stage in range(38)),
            warnings=(),
            memory={},
        )

    def _planned(self) -> tuple[PlannedMove, ...]:
        return (
            PlannedMove(
                "FIC-2103",
                self._reflux,
                self._reflux - 60.0,
                self._reflux - 120.0,
                (self._reflux - 60.0,) * len(TIMES_MIN),
            ),
        )

    def _predictions(self, cycle: int) -> tuple[CvPrediction, ...]:
        later = [cycle + minutes * 60.0 / PERIOD_S for minutes in TIMES_MIN]
        drift = 1.0 + 0.15 * self._random.gauss(0.0, 1.0)
        return (
            CvPrediction(
                "BOTTOMS",
                tuple(drift * self._bottoms(c) for c in later),
                tuple(1.2 * drift * self._bottoms(c) for c in later),
                {},
            ),
            CvPrediction(
                "DISTILLATE",
                tuple(self._distillate(c) for c in later),
                tuple(0.95 * self._distillate(c) for c in later),
                {},
            ),
        )

    @staticmethod
    def _notices(cycle: int) -> tuple[str, ...]:
        if cycle > 400:
            return ("AI-2116 repeats its result: its limit is tightened while the bias ages.",)
        return ()


def invented_entries(cycles: int = 480, seed: int = 1) -> Iterator[Entry]:
    """The shift as entries: one opening, then a decision and a delivery for each cycle."""
    opening = OpeningRecord(
        provenance=WHO,
        engine="collocation",
        site="C-2101 solvent recovery (invented)",
        restored_from_seq=None,
        restored="cold: no journal before this one",
        speed=60.0,
        period_s=PERIOD_S,
        budget_s=2.0,
        site_content=SITE,
    )
    shift = InventedShift(seed)
    yield _entry(EntryKind.OPENED, None, BEGIN, opening)
    seq = 1
    for cycle in range(cycles):
        decision = shift.decision(cycle)
        seq += 1
        yield _entry(EntryKind.DECISION, cycle, decision.made_at, decision)
        delivery = DeliveryRecord(
            delivery=Delivery(cycle, decision.advice.valid, True, (), None),
            decision_seq=seq,
            journal_ms=3.0,
            publish_ms=14.0,
            previous_record_bytes=21_000,
        )
        seq += 1
        yield _entry(EntryKind.DELIVERY, cycle, decision.made_at + 1.0, delivery)
        if cycle in (240, 256):
            raised = cycle == 240
            event = EventRecord(
                "tag_not_used",
                "TI-2107",
                raised,
                "failure",
                0 if raised else 16,
                "TI-2107 is bad." if raised else "TI-2107 is good again.",
            )
            seq += 1
            yield _entry(EntryKind.EVENT, cycle, decision.made_at, event)


def _entry(
    kind: EntryKind,
    cycle: int | None,
    at: float,
    record: DecisionRecord | DeliveryRecord | EventRecord | OpeningRecord,
) -> Entry:
    body = to_json(record)
    assert isinstance(body, dict)
    return Entry(kind, cycle, at, body)


def _stage(stage: int) -> ProfileStage:
    """A curve that looks like a column: steep below the feed."""
    light = 1.0 / (1.0 + math.exp((stage - 25.0) / 3.0)) * (1.0 - 0.2 * stage / 38.0)
    return ProfileStage(stage, 66.0 + 39.0 * (1.0 - light) ** 1.5, light)


def _position(mv: str, value: float, low: float, high: float) -> MovePosition:
    return MovePosition(mv, value, Service.FREE, low, high, "in_service")


def _used(tag: str, value: float, at: float) -> Measurement:
    return Measurement(tag, value, Verdict.USED, at, 0.0, True)


def _unchanged(move: SuggestedMove) -> SuggestedMove:
    return SuggestedMove(move.mv, move.target, False, move.made_at, move.reason, move.sentence)
