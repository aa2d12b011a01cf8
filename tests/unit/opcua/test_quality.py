"""Status codes in words."""

from __future__ import annotations

import pytest

from edgectl.opcua.quality import describe_status, status_name


@pytest.mark.parametrize(
    ("code", "name"),
    [
        (0x00000000, "Good"),
        (0x808C0000, "BadSensorFailure"),
        (0x808C0480, "BadSensorFailure"),  # the lower half holds flags
        (0x40900000, "UncertainLastUsableValue"),
        (0x00960000, "GoodLocalOverride"),
        (0xDEAD0000, "0xDEAD0000"),
    ],
)
def test_names(code: int, name: str) -> None:
    assert status_name(code) == name


@pytest.mark.parametrize(
    ("code", "words"),
    [
        (0x00000000, "good"),
        (0x00960000, "good (GoodLocalOverride)"),
        (0x40900000, "uncertain (UncertainLastUsableValue)"),
        (0xDEAD0000, "bad (0xDEAD0000)"),
    ],
)
def test_descriptions(code: int, words: str) -> None:
    assert describe_status(code) == words
