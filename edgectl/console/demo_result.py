"""What a demo came to: figures, files, and whether it was as it should be."""

from __future__ import annotations

import asyncio
import json
import sys
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any, Final, Protocol

from rich.console import Console
from rich.text import Text

from edgectl.console.demo_score import WriteCounts, aims, count_writes_in, cv_scores
from edgectl.console.figures import summary
from edgectl.console.history import read_history
from edgectl.console.morning import (
    budget_answer,
    counted,
    duration_words,
    holds_answer,
    moves_answer,
    tags_answer,
)
from edgectl.console.pace import Pace
from edgectl.console.report_command import write_report
from edgectl.console.svg import number_words
from edgectl.console.verify import chain_sentence
from edgectl.journal.verify import verify
from edgectl.settings import Site

SCHEMA: Final = "edgectl.demo/1"


class Story(Protocol):
    """What was asked for."""

    @property
    def crew(self) -> str: ...
    @property
    def seed(self) -> int: ...
    @property
    def drill(self) -> str: ...


@dataclass(frozen=True, slots=True)
class DemoResult:
    content: dict[str, Any]
    """The documented JSON."""
    sentences: tuple[str, ...]

    @property
    def good(self) -> bool:
        """As it should be: nothing outside the fence, nothing refused, an intact record.

        A drill may cost overruns; a run without one may not.
        """
        told = self.content
        undrilled_late = told["drill"] == "none" and told["overruns"] > 0
        return (
            told["writes_outside_fence"] == 0
            and told["refused_writes"] == 0
            and told["journal_intact"]
            and not undrilled_late
        )

    def print_to(self, console: Console) -> None:
        for sentence in self.sentences:
            console.print(Text(sentence), soft_wrap=True)


async def demo_result(site: Site, folder: Path, story: Story, pace: Pace) -> DemoResult:
    """Read what the demo left in its folder; write the report there."""
    journal, report = folder / "journal.sqlite", folder / "report.html"
    history = read_history(journal)
    chain = verify(journal)
    write_report(history, chain, journal, report)
    writes = count_writes_in(folder / "writes.jsonl", site.write_fence())
    plant_s = len(history.decisions) * pace.period_s
    score = await _score(folder / "truth.csv", aims(site))
    content: dict[str, Any] = {
        "schema": SCHEMA,
        "crew": story.crew,
        "seed": story.seed,
        "drill": story.drill,
        "speed": pace.speed,
        "plant_minutes": plant_s / 60.0,
        **summary(history),
        "writes": writes.accepted,
        "writes_outside_fence": writes.outside_fence,
        "refused_writes": writes.refused,
        "cv": {} if score is None else cv_scores(site, score),
        "in_spec_fraction": score and score["in_spec_fraction"],
        "energy_kwh_per_t_distillate": score and score["energy_kwh_per_t_distillate"],
        "advice_usable_fraction": score and score["usable_fraction"],
        "journal": str(journal),
        "journal_entries": chain.entries,
        "journal_intact": chain.intact,
        "report": str(report),
    }
    sentences = (
        "",
        f"{counted(content['cycles'], 'cycle')} in {duration_words(plant_s)} of plant time.",
        budget_answer(history),
        holds_answer(history),
        tags_answer(history),
        moves_answer(history),
        *_product_words(content),
        _write_words(writes),
        chain_sentence(chain),
        f"Journal  {journal}",
        f"Report   {report}",
    )
    return DemoResult(content, sentences)


async def _score(truth: Path, aimed: Mapping[str, float]) -> Mapping[str, Any] | None:
    """The plant's own score of its true values; None when there are none yet."""
    process = await asyncio.create_subprocess_exec(
        *(sys.executable, "-m", "sim_server.scoring", str(truth)),
        *(word for name, value in aimed.items() for word in ("--aim", f"{name}={value!r}")),
        stdout=asyncio.subprocess.PIPE,
        stderr=asyncio.subprocess.DEVNULL,
    )
    said, _ = await process.communicate()
    if process.returncode != 0:
        return None
    score = json.loads(said)
    assert isinstance(score, dict)
    return score


def _product_words(content: Mapping[str, Any]) -> list[str]:
    words = [
        f"{cv['cv']}: within its specification {100 * cv['in_limits_fraction']:.1f} % of the time,"
        f" true mean {number_words(cv['mean'])} {cv['unit']}."
        for cv in content["cv"].values()
    ]
    energy = content["energy_kwh_per_t_distillate"]
    if energy is None:
        words.append("The plant's true values could not be scored: too short a run, or no plant.")
    else:
        words.append(f"Energy: {energy:.1f} kWh per tonne of distillate.")
    return words


def _write_words(writes: WriteCounts) -> str:
    return (
        f"By the plant's own log: {counted(writes.accepted, 'write')} to advisory nodes,"
        f" {writes.refused} refused, {writes.outside_fence} outside the fence."
    )
