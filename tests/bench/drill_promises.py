"""What each drill must show, judged from what the rehearsal left behind.

One function per drill gives its verdicts; `common` holds for every drill. A cycle that
ran over the budget because the machine was busy counts as what it is, a hold, and is
left out where a promise is about something else.
"""

from __future__ import annotations

import itertools
import math
from collections.abc import Callable, Sequence

from drill_checks import (
    BUSY,
    Verdict,
    Verdicts,
    back,
    bumpless_return,
    exactly_the_last_move,
    hold,
    never_valid,
    one_event,
    poor_stretches,
    reasons_of,
    withheld,
)
from evidence import (
    Evidence,
    reading_status,
    reading_value,
    stretch,
    undocumented,
    unrecorded,
    untimely_crew_actions,
)

from edgectl.console.demo import SLOW_CYCLES
from edgectl.console.figures import loop_lag_ms
from edgectl.records.advice import Standing
from edgectl.records.measurements import Service
from sim_server.faults import LASTS_S, DrillName

LATE_MS = 50.0
"""A cycle that starts no later than this starts on time [wall ms]."""
LAG_P99_MS, LAG_MAX_MS = 20.0, 100.0


def common(evidence: Evidence) -> Verdicts:
    """What holds in every drill."""
    counts, chain = evidence.counts, evidence.chain
    yield Verdict(
        "no write outside the fence, none refused",
        counts.outside_fence == 0 and counts.refused == 0,
        f"{counts.accepted} writes, {counts.outside_fence} outside, {counts.refused} refused",
    )
    yield Verdict("journal intact", chain.intact, chain.why or f"{chain.entries} entries")
    problems = undocumented(evidence)
    valid = sum(found.valid for found in evidence.publications)
    yield Verdict(
        "every valid delivery has its decision on record before it, with the same targets",
        not problems and valid > 0,
        problems[0] if problems else f"{valid} valid of {len(evidence.publications)} deliveries",
    )
    untimely, left = untimely_crew_actions(evidence.writes)
    nearest = f", nearest to expiry {min(left):.0f} plant s" if left else ""
    yield Verdict(
        "no crew action on advice that was not usable",
        not untimely,
        untimely[0] if untimely else f"{len(left)} actions{nearest}",
    )
    lag = loop_lag_ms(evidence.records)
    # Nothing measured is nothing shown.
    p99 = math.inf if lag["p99"] is None else lag["p99"]
    worst = math.inf if lag["max"] is None else lag["max"]
    yield Verdict(
        f"event loop never blocked: lag p99 < {LAG_P99_MS:g} ms, max < {LAG_MAX_MS:g} ms",
        p99 < LAG_P99_MS and worst < LAG_MAX_MS,
        f"p99 {p99:.1f} ms, max {worst:.1f} ms",
    )
    late = max(record.timings.late_ms for record in evidence.records)
    skipped = sum(record.skipped_cycles for record in evidence.records)
    unwritten = unrecorded(evidence)
    yield Verdict(
        "every cycle on its grid",
        late < LATE_MS and skipped == 0,
        f"{len(evidence.records)} cycles, latest {late:.1f} ms, {skipped} skipped,"
        f" {unwritten} not recorded in time (and not valid)",
    )


def slow_solver(evidence: Evidence) -> Verdicts:
    records = evidence.records
    slow = [r for r in records if SLOW_CYCLES[0] <= r.cycle <= SLOW_CYCLES[1]]
    killed = [r for r in slow if r.outcome == "overrun" and "worker killed" in r.outcome_detail]
    yield Verdict(
        "the solver is too slow: past the deadline its worker is killed",
        bool(killed) and slow[0].outcome == "overrun",
        ", ".join(f"cycle {r.cycle} {r.outcome}" for r in slow),
    )
    if not killed:
        return
    behind = [after for r, after in itertools.pairwise(records) if r in killed]
    yield Verdict(
        "the next cycle starts on time",
        all(r.timings.late_ms < LATE_MS and r.skipped_cycles == 0 for r in behind),
        f"{', '.join(f'{r.timings.late_ms:.1f}' for r in behind)} ms late",
    )
    first = records.index(killed[0])
    begun, end = next(poor_stretches(records[first:], lambda r: r.outcome in BUSY))
    held = evidence.decisions[first + begun : first + end]
    yield from exactly_the_last_move(evidence, held)
    yield Verdict(
        "standing and reason say so",
        all(r.advice.standing is Standing.HOLDING for r in (d.record for d in held))
        and all(r.advice.reason == "over_budget" for r in killed),
        f"held {len(held)} cycles: {', '.join(dict.fromkeys(reasons_of(held)))}",
    )
    yield from back(evidence, first + end, "a standby is ready")


def bad_quality(evidence: Evidence) -> Verdicts:
    bad = stretch([bool(reading_status(r, "TI-2107")) for r in evidence.records])
    if bad is None:
        yield Verdict("a required tag goes bad", False, "it never did")
        return
    first, end = bad
    yield from hold(evidence, first, "input_bad", "TI-2107")
    limit = evidence.site.cycle.hold_limit
    standings = [r.advice.standing for r in evidence.records[first:end]]
    wanted = [Standing.HOLDING] * limit + [Standing.SILENT] * (len(standings) - limit)
    yield Verdict(
        f"silent after {limit} holds, and not before",
        standings == wanted and len(standings) > limit,
        f"{standings.count(Standing.HOLDING)} holds, then"
        f" {standings.count(Standing.SILENT)} silent cycles",
    )
    yield from never_valid(evidence, first, end)
    yield from exactly_the_last_move(evidence, evidence.decisions[first:end])
    yield from one_event(evidence, "tag_not_used", "TI-2107")
    yield from back(evidence, end, "the tag is good again")


def server_drop(evidence: Evidence) -> Verdicts:
    gone = stretch([r.outcome == "no_data" for r in evidence.records])
    if gone is None:
        yield Verdict("the server goes away", False, "every cycle had data")
        return
    first, end = gone
    yield from hold(evidence, first, "plant_unreachable", "", published=False)
    before, after = evidence.decisions[first].record, evidence.records[end - 1]
    beats = [w.plant_time for w in evidence.writes if w.node == "ADV.heartbeat"]
    pause, begun = max((b - a, a) for a, b in itertools.pairwise(beats))
    lasts = LASTS_S[DrillName.SERVER_DROP]
    yield Verdict(
        "the heartbeat stops at the server",
        pause > lasts and begun <= before.made_at + evidence.site.cycle.period_s,
        f"for {pause:.0f} plant s; the server was away for {lasts:.0f}",
    )
    usable = [row["advice_usable"] > 0.0 for row in evidence.truth]
    # The rows have no plant time of their own: the one long stretch without usable advice,
    # after there was some, is this one.
    holes = [
        hole for hole in poor_stretches(usable, lambda u: not u) if hole[0] > usable.index(True)
    ]
    longest = max((behind - start for start, behind in holes), default=0)
    yield Verdict(
        "advice_usable falls at the plant",
        longest >= 2,
        f"not usable in {longest} rows of 30 plant s in a row",
    )
    yield from one_event(evidence, "plant_unreachable", "")
    away = (after.made_at - before.made_at) + evidence.site.cycle.period_s
    yield Verdict(
        "it finds back by itself",
        end < len(evidence.records),
        f"{end - first} cycles without data, {away:.0f} plant s of which {lasts:.0f} are the drill",
    )
    yield from back(evidence, end, "it is connected again")


def frozen_analyser(evidence: Evidence) -> Verdicts:
    cv, tag = "BOTTOMS", "AI-2116"
    estimates = [
        (k, found)
        for k, r in enumerate(evidence.records)
        if r.estimate is not None
        for found in r.estimate.cvs
        if found.cv == cv
    ]
    ageing = [(k, e) for k, e in estimates if e.state == "ageing"]
    dropped = [(k, e) for k, e in estimates if e.state == "dropped"]
    states = [word for word, _ in itertools.groupby(e.state for _, e in estimates)]
    long_run = len(evidence.records) * evidence.site.cycle.period_s > 4.0 * 3600.0
    wanted = ["live", "ageing", "dropped"] if long_run else ["live", "ageing"]
    yield Verdict(f"{cv} goes {' -> '.join(wanted)}", states == wanted, " -> ".join(states))
    if not ageing:
        return
    ages = [e.bias_age_s for _, e in [*ageing, *dropped]]
    yield Verdict(
        "its bias freezes and ages",
        len({e.bias for _, e in ageing}) == 1 and all(b > a for a, b in itertools.pairwise(ages)),
        f"bias {ageing[0][1].bias:.3f}, age {ages[0] / 60.0:.0f} to {ages[-1] / 60.0:.0f} min",
    )
    configured = evidence.site.cv[cv].high
    highs = [e.high for _, e in ageing if e.high is not None]
    yield Verdict(
        "its planned limit is tightened, more and more",
        isinstance(configured, float)
        and len(highs) == len(ageing)
        and highs[0] < configured
        and all(b < a for a, b in itertools.pairwise(highs)),
        f"{configured} wt ppm when live, {highs[0]:.0f} to {highs[-1]:.0f}",
    )
    yield from _frozen_words(evidence, tag, ageing[0][0], dropped)
    others = {
        found.cv: found.state
        for r in evidence.records
        if r.estimate is not None
        for found in r.estimate.cvs
        if found.cv != cv and found.state != "live"
    }
    yield Verdict("every other CV stays live", not others, str(others) if others else "yes")
    poor = [
        r.advice.reason
        for r in evidence.records[ageing[0][0] :]
        if r.advice.standing is not Standing.ADVISING and r.outcome not in BUSY
    ]
    yield Verdict(
        "never silent for this alone",
        not poor and all(r.advice.standing is not Standing.SILENT for r in evidence.records),
        f"advising in {sum(r.advice.valid for r in evidence.records[ageing[0][0] :])} of"
        f" {len(evidence.records) - ageing[0][0]} cycles since {', '.join(dict.fromkeys(poor))}",
    )


def _frozen_words(
    evidence: Evidence, tag: str, ageing_from: int, dropped: Sequence[tuple[int, object]]
) -> Verdicts:
    planned = [r for r in evidence.records[ageing_from:] if r.outcome == "plan"]
    named = [r for r in planned if any(tag in notice for notice in r.advice.notices)]
    example = next((n for n in planned[-1].advice.notices if tag in n), "no such notice")
    yield Verdict("the advice names it", len(named) == len(planned), example)
    if not dropped:
        return
    left_out = [evidence.records[k] for k, _ in dropped]
    said = [any("left out" in notice for notice in r.advice.notices) for r in left_out]
    yield Verdict(
        "past its age that CV alone is dropped, and said so",
        all(said) and all(r.outcome == "plan" for r in left_out),
        f"planned without it in {len(left_out)} cycles",
    )


def loop_manual(evidence: Evidence) -> Verdicts:
    manual = stretch([reading_value(r, "REFLUX-MODE") == 0.0 for r in evidence.records])
    if manual is None:
        yield Verdict("the reflux loop goes to manual", False, "it never did")
        return
    yield from withheld(evidence, "FIC-2103", "loop_in_manual", Service.FIXED, *manual)
    yield from bumpless_return(evidence, "FIC-2103", manual[1])


def valve_limit(evidence: Evidence) -> Verdicts:
    mv = "TIC-2107"
    outside = [r.positions[mv].reason != "in_service" for r in evidence.records if r.positions]
    found = stretch(outside)
    opened = max(reading_value(r, "TRAY30-OP") or 0.0 for r in evidence.records)
    if found is None:
        yield Verdict("the stuck valve is noticed", False, f"largest output seen {opened:.1f} %")
        return
    at = evidence.records[found[0]].positions[mv]
    yield from withheld(evidence, mv, at.reason, at.service, *found)
    yield from bumpless_return(evidence, mv, found[1])


def operator_off(evidence: Evidence) -> Verdicts:
    off = stretch([reading_value(r, "ADVICE-ON") == 0.0 for r in evidence.records])
    if off is None:
        yield Verdict("the operator turns advice off", False, "the switch never moved")
        return
    first, end = off
    records = evidence.records[first:end]
    yield Verdict(
        "silent in the same cycle, and says why",
        all(r.advice.standing is Standing.SILENT for r in records)
        and all(r.advice.reason == "operator_off" for r in records),
        f"{len(records)} cycles: {records[0].advice.sentence}",
    )
    yield from never_valid(evidence, first, end)
    acted = evidence.crew_writes(records[0].made_at, records[-1].made_at)
    yield Verdict("nobody acts on it meanwhile", not acted, f"{len(acted)} crew actions")
    yield from one_event(evidence, "operator_off", "")
    yield from back(evidence, end, "the switch is on again")


DRILLS: dict[str, Callable[[Evidence], Verdicts]] = {
    "slow-solver": slow_solver,
    "bad-quality": bad_quality,
    "server-drop": server_drop,
    "frozen-analyser": frozen_analyser,
    "loop-manual": loop_manual,
    "valve-limit": valve_limit,
    "operator-off": operator_off,
}
