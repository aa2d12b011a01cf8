"""From the site file to the policies: nothing is lost, and what is derived is right."""

from __future__ import annotations

import dataclasses
from pathlib import Path

import pytest

from edgectl.cycle.policies import CvPolicy, MovePolicy
from edgectl.runtime.policies import policies_from
from edgectl.settings import Site, load_site


@pytest.fixture(scope="module")
def site(repo_root: Path) -> Site:
    return load_site(repo_root / "deploy/examples/methanol_water.toml")


def test_everything_is_there_in_the_order_of_the_file(site: Site) -> None:
    found = policies_from(site)
    assert list(found.tags) == list(site.tags)
    assert list(found.moves) == list(site.mv)
    assert list(found.cvs) == list(site.cv)
    assert found.switch == "ADVICE-ON"


def test_what_is_derived(site: Site) -> None:
    found = policies_from(site)
    assert found.tags["AI-2116"].stale_after_s == 2.5 * 600.0
    assert not found.tags["TI-2107"].use_uncertain, "required: certain or nothing"
    assert found.tags["TI-2109"].use_uncertain
    assert found.cvs["BOTTOMS"].logarithmic
    assert found.cvs["BOTTOMS"].quality
    assert not found.cvs["TRAY30"].quality
    assert found.cycle.future_tolerance_s == site.server.clock_offset_limit_s
    reflux = found.moves["FIC-2103"]
    assert (reflux.in_ratio_to, reflux.ratio_filter_s) == ("FIC-2101", 300.0)


def test_every_number_of_a_move_and_a_cv_is_the_files(site: Site) -> None:
    found = policies_from(site)
    renamed = {"mv", "cv", "logarithmic", "quality", "ratio_filter_s"}
    policies: list[tuple[str, MovePolicy | CvPolicy]] = [*found.moves.items(), *found.cvs.items()]
    for name, policy in policies:
        section = site.mv[name] if name in site.mv else site.cv[name]
        names = [field.name for field in dataclasses.fields(policy) if field.name not in renamed]
        assert names
        for key in names:
            assert getattr(policy, key) == getattr(section, key), (name, key)
