"""The setup of a worker."""

from __future__ import annotations

import pytest

from edgectl.records.encoding import EncodingError, dumps, from_json, loads, to_json
from edgectl.worker.messages import Ready, Setup


def test_a_setup_comes_back_as_it_went() -> None:
    setup = Setup({"column": {"stages": 42}}, rehearsal=True, slow_cycles=(5, 6))
    assert loads(Setup, dumps(setup)) == setup
    ready = Ready("collocation", "ab", 1.5, 2.5)
    assert loads(Ready, dumps(ready)) == ready


def test_the_drill_is_refused_outside_a_rehearsal_on_both_sides() -> None:
    with pytest.raises(ValueError, match="refused unless rehearsal is true"):
        Setup({}, slow_cycles=(5, 6))
    raw = to_json(Setup({}, rehearsal=True, slow_cycles=(5, 6)))
    assert isinstance(raw, dict)
    with pytest.raises(EncodingError, match="refused unless rehearsal is true"):
        from_json(Setup, {**raw, "rehearsal": False})


def test_a_brain_is_named_by_module_and_function() -> None:
    with pytest.raises(ValueError, match="expected module:function"):
        Setup({}, brain="build_brain")
