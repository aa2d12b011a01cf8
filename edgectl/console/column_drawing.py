"""The column as it is now: each stage a shelf filled with what it holds, temperature across it."""

from __future__ import annotations

from edgectl.console.history import SiteWords
from edgectl.console.morning import asks
from edgectl.console.svg import Drawing, Scale, number_words
from edgectl.records.advice import Standing
from edgectl.records.cycle_record import DecisionRecord
from edgectl.records.plan import ProfileStage

WIDTH, HEIGHT = 460.0, 560.0
LEFT, RIGHT, TOP, BOTTOM = 146.0, 338.0, 62.0, 492.0
"""Inside of the shell; what lies outside is for words."""


def column_drawing(
    record: DecisionRecord, profile: tuple[ProfileStage, ...], site: SiteWords
) -> str:
    """The profile with the readings and positions of `record`; empty without a profile."""
    if len(profile) < 2:
        return ""
    drawing = Drawing(WIDTH, HEIGHT, "The column now: temperature and composition by stage")
    down = Scale(profile[0].stage, profile[-1].stage, TOP + 12, BOTTOM - 12)
    temperatures = [stage.temperature_degc for stage in profile]
    measured = _measured(record, site)
    low = min([*temperatures, *(value for _, _, value in measured)])
    high = max([*temperatures, *(value for _, _, value in measured)])
    margin = 0.06 * max(high - low, 1.0)
    across = Scale(low - margin, high + margin, LEFT + 8, RIGHT - 8)
    _shell(drawing)
    _shelves(drawing, profile, down)
    _feed(drawing, site, down)
    _moves(drawing, record, site, down)
    drawing.path(
        ((across(stage.temperature_degc), down(stage.stage)) for stage in profile), "curve"
    )
    _readings(drawing, measured, across, down)
    _axis(drawing, across)
    return str(drawing)


def _measured(record: DecisionRecord, site: SiteWords) -> list[tuple[str, int, float]]:
    found = []
    for tag, stage in site.tray_tags().items():
        measurement = record.measurements.get(tag)
        if measurement is not None and measurement.usable and measurement.value is not None:
            found.append((tag, stage, measurement.value))
    return sorted(found, key=lambda reading: reading[1])


def _shell(drawing: Drawing) -> None:
    drawing.element(
        "rect",
        x=LEFT,
        y=TOP - 26,
        width=RIGHT - LEFT,
        height=BOTTOM - TOP + 52,
        rx=38,
        class_="shell",
    )
    drawing.text((LEFT + RIGHT) / 2, TOP - 8, "top", "small", "middle")
    drawing.text((LEFT + RIGHT) / 2, BOTTOM + 16, "bottom", "small", "middle")


def _shelves(drawing: Drawing, profile: tuple[ProfileStage, ...], down: Scale) -> None:
    """One shelf a stage; its dark part is the share of the light component in the liquid."""
    fill = Scale(0.0, 1.0, LEFT + 4, RIGHT - 4)
    step = (BOTTOM - TOP - 24) / (len(profile) - 1)
    for stage in profile:
        y, thick = down(stage.stage) - 0.36 * step, 0.72 * step
        drawing.rectangle(LEFT + 4, y, RIGHT - LEFT - 8, thick, "shelf")
        hint = (
            f"stage {stage.stage}: {number_words(stage.temperature_degc)} °C,"
            f" {100 * stage.liquid_fraction:.1f} mol % light"
        )
        drawing.rectangle(LEFT + 4, y, fill(stage.liquid_fraction) - LEFT - 4, thick, "light", hint)


def _feed(drawing: Drawing, site: SiteWords, down: Scale) -> None:
    if site.feed_stage is None:
        return
    y = down(site.feed_stage)
    drawing.line((LEFT - 44, y), (LEFT - 8, y), "pipe")
    drawing.path(((LEFT - 10, y - 5), (LEFT, y), (LEFT - 10, y + 5)), "arrow", closed=True)
    drawing.text(LEFT - 48, y + 4, "feed", "small", "end")


def _moves(drawing: Drawing, record: DecisionRecord, site: SiteWords, down: Scale) -> None:
    """Each MV at its place: where it is and, while one stands, what is suggested."""
    standing = record.advice.standing
    targets = {move.mv: move.target for move in record.advice.moves if asks(move)}
    for mv, where in record.positions.items():
        y = down(site.stage_of_mv(mv))
        drawing.line((LEFT - 24, y), (LEFT, y), "pipe")
        target = targets.get(mv)
        now = "no value" if where.position is None else number_words(where.position)
        drawing.text(LEFT - 30, y - 3, mv, "strong", "end")
        drawing.text(LEFT - 30, y + 11, f"{now} {site.unit(mv)}", "small", "end")
        suggests = standing in (Standing.ADVISING, Standing.HOLDING)
        if suggests and target is not None and target != where.position:
            drawing.text(LEFT - 30, y + 26, f"suggested {number_words(target)}", "strong", "end")


def _readings(
    drawing: Drawing, measured: list[tuple[str, int, float]], across: Scale, down: Scale
) -> None:
    last_y = -100.0
    for tag, stage, value in measured:
        x, y = across(value), down(stage)
        label_y = max(y, last_y + 32.0)
        drawing.path(((x, y), (RIGHT + 6, y), (RIGHT + 16, label_y)), "leader")
        drawing.dot(x, y, 4.5, "reading")
        drawing.text(RIGHT + 20, label_y - 1, f"{value:.1f} °C", "strong")
        drawing.text(RIGHT + 20, label_y + 13, f"{tag}, stage {stage}", "small")
        last_y = label_y


def _axis(drawing: Drawing, across: Scale) -> None:
    y = BOTTOM + 34
    drawing.line((LEFT, y), (RIGHT, y), "axis")
    for tick in across.ticks(4):
        drawing.line((across(tick), y), (across(tick), y + 5), "axis")
        drawing.text(across(tick), y + 18, f"{tick:g}", "small", "middle")
    drawing.text(RIGHT + 8, y + 18, "°C", "small")
