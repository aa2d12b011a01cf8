"""Rules of the server, the rhythm, the column, its operating point and the planning."""

from __future__ import annotations

import itertools
import math
from collections.abc import Callable, Iterator
from typing import Final

from edgectl.settings.checks_tags import in_range
from edgectl.settings.column import Column, OperatingPoint, Trays
from edgectl.settings.findings import MISSING, Complaint
from edgectl.settings.goals import Estimation, Planning
from edgectl.settings.parts import Parts
from edgectl.settings.site import Cycle, Pace, Server
from edgectl.settings.tags import Role


def login_is_safe(parts: Parts) -> Iterator[Complaint]:
    """Security `none` needs `allow_insecure = true`.

    A user has a password, from the environment or from a file, not both; a
    password needs a user.
    """
    server = parts.section(Server)
    if server is None:
        return
    if server.security == "none" and not server.allow_insecure:
        yield Complaint(
            ("server", "security"),
            server.security,
            "`none` only together with allow_insecure = true",
            "for testing on loopback write allow_insecure = true; never on a plant network",
        )
    given = [key for key in ("password_env", "password_file") if getattr(server, key) is not None]
    if len(given) == 2:
        yield Complaint(
            ("server", "password_file"),
            server.password_file,
            "password_env or password_file, not both",
            "remove one of the two",
        )
    if server.user is not None and not given:
        yield Complaint(
            ("server", "user"),
            server.user,
            "a user with password_env or password_file",
            "say where the password is; never write it here",
        )
    if server.user is None and given:
        yield Complaint(
            ("server", "user"), MISSING, "the user the password belongs to", "add `user`"
        )


def cycle_has_time(parts: Parts) -> Iterator[Complaint]:
    """`budget_s` + `journal_wait_s` is less than `period_s` (at speed 1).

    Each server timeout is shorter than the period; `validity_s` is at least
    two periods; `restore_max_age_s` at least one.
    """
    cycle, server = parts.section(Cycle), parts.section(Server)
    if cycle is None:
        return
    period = f"`cycle.period_s`, which is {cycle.period_s:g}"
    if cycle.budget_s + cycle.journal_wait_s >= cycle.period_s:
        yield Complaint(
            ("cycle", "budget_s"),
            cycle.budget_s,
            f"budget_s + journal_wait_s below {period}",
            "lower the budget or the wait, or lengthen the period",
        )
    if cycle.validity_s < 2 * cycle.period_s:
        yield Complaint(
            ("cycle", "validity_s"),
            cycle.validity_s,
            f"at least twice {period}",
            "raise it: advice must outlive one late confirmation",
        )
    if cycle.restore_max_age_s < cycle.period_s:
        yield Complaint(
            ("cycle", "restore_max_age_s"),
            cycle.restore_max_age_s,
            f"at least {period}",
            "raise it, or no memory is ever restored",
        )
    for key in ("read_timeout_s", "write_timeout_s") if server else ():
        if getattr(server, key) >= cycle.period_s:
            yield Complaint(
                ("server", key), getattr(server, key), f"below {period}", "lower the timeout"
            )


def pace_is_human(parts: Parts) -> Iterator[Complaint]:
    """A suggestion stands at least one period, and as long as a person needs to act."""
    cycle, pace = parts.section(Cycle), parts.section(Pace)
    if pace is None:
        return
    if cycle is not None and pace.interval_s < cycle.period_s:
        yield Complaint(
            ("advice", "interval_s"),
            pace.interval_s,
            f"at least `cycle.period_s`, which is {cycle.period_s:g}",
            "raise it",
        )
    if pace.act_within_s > pace.interval_s:
        yield Complaint(
            ("advice", "act_within_s"),
            pace.act_within_s,
            f"at most `advice.interval_s`, which is {pace.interval_s:g}",
            "give people time to act before the next suggestion",
        )


def column_holds_together(parts: Parts) -> Iterator[Complaint]:
    """The feed enters a tray; the components differ in name, the most volatile first.

    Every Antoine fit covers the drum temperature.
    """
    column = parts.section(Column)
    if column is None:
        return
    if column.feed_stage > column.stages - 2:
        yield Complaint(
            ("column", "feed_stage"),
            column.feed_stage,
            f"a tray: 1 to {column.stages - 2}",
            "stages count from the top, drum 0; correct it or `column.stages`",
        )
    first, second = column.component
    if first.name == second.name:
        yield Complaint(
            ("column", "component", 1, "name"), second.name, "a name of its own", "rename it"
        )
    drum_k = column.drum_temperature_degc + 273.15
    pressures = []
    for index, component in enumerate(column.component):
        fit = component.antoine
        if fit.low_k < fit.high_k and not fit.low_k <= drum_k <= fit.high_k:
            yield Complaint(
                ("column", "component", index, "antoine"),
                {},
                f"a fit that covers the drum temperature, {drum_k:g} K",
                f"it covers {fit.low_k:g} to {fit.high_k:g} K; use another fit",
            )
        elif fit.low_k + fit.c <= 0:
            yield Complaint(
                ("column", "component", index, "antoine", "c"),
                fit.c,
                f"above {-fit.low_k:g}, or the pressure has a pole inside the fit",
                "check its sign and that it is in K",
            )
        else:
            pressures.append(fit.a - fit.b / (drum_k + fit.c))
    if len(pressures) == 2 and pressures[0] <= pressures[1]:
        yield Complaint(
            ("column", "component", 0, "name"),
            first.name,
            "the most volatile component first",
            "swap the components, or correct the Antoine coefficients",
        )


def trays_fit_the_shell(parts: Parts) -> Iterator[Complaint]:
    """Tray areas and lengths fit inside one another."""
    column = parts.section(Column)
    if column is None:
        return
    trays = column.trays
    total = math.pi / 4 * trays.diameter_m**2
    for key, bound, words in _tray_bounds(trays, total):
        if getattr(trays, key) > bound * (1 + 1e-6):
            yield Complaint(
                ("column", "trays", key),
                getattr(trays, key),
                f"at most {bound:.6g}, {words}",
                "check the drawing and the unit",
            )


def _tray_bounds(trays: Trays, total_m2: float) -> tuple[tuple[str, float, str], ...]:
    return (
        ("net_area_m2", total_m2, "the column's cross-section"),
        ("active_area_m2", trays.net_area_m2, "the net area"),
        ("downcomer_area_m2", total_m2 - trays.net_area_m2, "cross-section less net area"),
        ("weir_length_m", trays.diameter_m, "the diameter"),
        ("weir_height_m", trays.tray_spacing_m, "the tray spacing"),
    )


def operating_point_is_sane(parts: Parts) -> Iterator[Complaint]:
    """The light component's fraction falls from distillate over feed to bottoms.

    The feed's lies inside `estimation.feed_composition_low` and `_high`, and
    feed flow and drum pressure inside the range of their tags.
    """
    point, estimation = parts.section(OperatingPoint), parts.section(Estimation)
    if point is None:
        return
    feed = point.feed_wt_fraction_light
    if point.distillate_wt_fraction_light <= feed:
        yield Complaint(
            ("operating_point", "distillate_wt_fraction_light"),
            point.distillate_wt_fraction_light,
            f"above the feed's, {feed:g}",
            "give the mass fraction of the first component",
        )
    if point.bottoms_wt_fraction_light >= feed:
        yield Complaint(
            ("operating_point", "bottoms_wt_fraction_light"),
            point.bottoms_wt_fraction_light,
            f"below the feed's, {feed:g}",
            "give the mass fraction of the first component",
        )
    if estimation is not None:
        low, high = estimation.feed_composition_low, estimation.feed_composition_high
        if low < high and not low <= feed <= high:
            yield Complaint(
                ("operating_point", "feed_wt_fraction_light"),
                feed,
                f"inside the believed feed composition, {low:g} to {high:g}",
                "correct it or the limits in [estimation]",
            )
    yield from _inside_tag(parts, Role.FEED_FLOW, "feed_kg_h", point.feed_kg_h, "kg/h")
    yield from _inside_tag(
        parts, Role.TOP_PRESSURE, "drum_pressure_kpa", point.drum_pressure_kpa, "kPa"
    )


def _inside_tag(parts: Parts, role: Role, key: str, value: float, unit: str) -> Iterator[Complaint]:
    for name, tag in parts.tags.items():
        if tag.role is not role or tag.unit != unit:
            continue
        if not in_range(tag, value):
            yield Complaint(
                ("operating_point", key),
                value,
                f"inside the range of tag {name}, {tag.low:g} to {tag.high:g} {tag.unit}",
                "correct it or the tag's range",
            )


def moves_lie_on_the_grid(parts: Parts) -> Iterator[Complaint]:
    """`moves_at_min` rises and lies on ends of intervals of `grid_min`, before the last."""
    planning = parts.section(Planning)
    if planning is None:
        return
    ends = [0.0, *itertools.accumulate(planning.grid_min)][:-1]
    for index, move in enumerate(planning.moves_at_min):
        path = ("planning", "moves_at_min", index)
        if not any(math.isclose(move, end, rel_tol=0.0, abs_tol=1e-6) for end in ends):
            _, end = min((abs(end - move), end) for end in ends)
            words = f"write {end:g}, the nearest end, or change the grid"
            yield Complaint(path, move, "an end of an interval of `grid_min`", words)
        elif index and move <= planning.moves_at_min[index - 1]:
            yield Complaint(path, move, "later than the move before it", "sort the moves")


RULES: Final[tuple[Callable[[Parts], Iterator[Complaint]], ...]] = (
    login_is_safe,
    cycle_has_time,
    pace_is_human,
    column_holds_together,
    trays_fit_the_shell,
    operating_point_is_sane,
    moves_lie_on_the_grid,
)
