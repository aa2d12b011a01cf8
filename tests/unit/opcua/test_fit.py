"""Judging nodes against the site file."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import pytest
from asyncua.ua.uatypes import NodeId, VariantType

from edgectl.opcua.address import TagNode
from edgectl.opcua.fit import (
    SUBSTITUTE_STATUS,
    Finding,
    NodeFacts,
    Severity,
    judge_access,
    judge_advisory,
    judge_tag,
)
from edgectl.opcua.units import ServerRange, ServerUnit
from edgectl.opcua.values import FieldKind
from edgectl.records.units import UNECE_NAMESPACE

TAG = TagNode("TI-2107", "nsu=urn:p;s=TI-2107.PV", "degC", 50.0, 130.0, required=True)
CELSIUS = ServerUnit(UNECE_NAMESPACE, 4408652, "degC")
FACTS = NodeFacts(
    name="TI-2107",
    node=TAG.node,
    node_id=NodeId("TI-2107.PV", 2),
    found=True,
    data_type=VariantType.Double,
    scalar=True,
    access=1,
    unit=CELSIUS,
    span=ServerRange(0.0, 200.0),
)


def words(findings: list[Finding]) -> list[tuple[str, Severity]]:
    return [(finding.word, finding.severity) for finding in findings]


def test_a_node_that_fits_has_no_findings() -> None:
    assert judge_tag(TAG, FACTS) == []
    assert judge_access(FACTS, may_be_written=False) == []


@pytest.mark.parametrize(
    ("changes", "word", "severity"),
    [
        ({"node_id": None, "found": False}, "node_missing", Severity.ERROR),
        ({"found": False}, "node_missing", Severity.ERROR),
        ({"data_type": VariantType.String}, "wrong_type", Severity.ERROR),
        ({"scalar": False}, "wrong_type", Severity.ERROR),
        ({"unit": replace(CELSIUS, unit_id=4932940)}, "unit_differs", Severity.ERROR),
        ({"unit": None}, "unit_unchecked", Severity.WARNING),
        ({"unit": ServerUnit("", 3, "Grad")}, "unit_unchecked", Severity.WARNING),
        ({"span": ServerRange(0.0, 1.0)}, "other_scale", Severity.ERROR),
        ({"span": ServerRange(60.0, 200.0)}, "range_wider", Severity.WARNING),
    ],
)
def test_what_does_not_fit_is_named(changes: dict[str, Any], word: str, severity: Severity) -> None:
    findings = judge_tag(TAG, replace(FACTS, **changes))
    assert words(findings) == [(word, severity)]
    assert "TI-2107" in findings[0].sentence
    assert TAG.node in findings[0].sentence or word in ("other_scale", "range_wider")
    assert severity is Severity.WARNING or word in SUBSTITUTE_STATUS


def test_a_type_that_the_server_does_not_tell_is_left_to_the_readings() -> None:
    assert judge_tag(TAG, replace(FACTS, data_type=None)) == []


@pytest.mark.parametrize(
    ("kind", "data_type", "fits"),
    [
        (FieldKind.FLAG, VariantType.Boolean, True),
        (FieldKind.FLAG, VariantType.Int32, False),
        (FieldKind.NUMBER, VariantType.Float, True),
        (FieldKind.NUMBER, VariantType.Int32, False),  # would round a target
        (FieldKind.COUNT, VariantType.UInt32, True),
        (FieldKind.TEXT, VariantType.String, True),
        (FieldKind.INSTANT, VariantType.DateTime, True),
        (FieldKind.INSTANT, None, False),
    ],
)
def test_an_advisory_node_must_have_a_type_we_can_write(
    kind: FieldKind, data_type: VariantType | None, fits: bool
) -> None:
    findings = judge_advisory(replace(FACTS, data_type=data_type), kind)
    assert words(findings) == ([] if fits else [("wrong_type", Severity.ERROR)])


@pytest.mark.parametrize(
    ("access", "may_be_written", "word"),
    [
        (0, False, "not_readable"),
        (3, False, "account_too_strong"),
        (1, True, "not_writable"),
        (3, True, None),
        (2, True, None),
        (None, True, None),
        (None, False, None),
    ],
)
def test_access_is_judged_by_what_the_node_is_for(
    access: int | None, may_be_written: bool, word: str | None
) -> None:
    findings = judge_access(replace(FACTS, access=access), may_be_written)
    assert [finding.word for finding in findings] == ([] if word is None else [word])
