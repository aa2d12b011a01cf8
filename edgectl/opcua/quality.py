"""Status codes of OPC UA (OPC 10000-4, 7.39) in words."""

from __future__ import annotations

from typing import Final

from asyncua.ua.status_codes import get_name_and_doc

from edgectl.records.readings import quality_of

BAD_NODE_ID_UNKNOWN: Final = 0x80340000
BAD_TYPE_MISMATCH: Final = 0x80740000
BAD_CONFIGURATION_ERROR: Final = 0x80890000
BAD_NO_DATA_AVAILABLE: Final = 0x80B10000

_CODE_MASK: Final = 0xFFFF0000
"""The lower half holds flags (limits, overflow), not the meaning."""


def status_name(status_code: int) -> str:
    """The standard's name, e.g. `BadSensorFailure`; hexadecimal when it has none."""
    code = status_code & _CODE_MASK
    name, meaning = get_name_and_doc(code)
    return f"0x{code:08X}" if meaning.startswith("Unknown StatusCode") else str(name)


def describe_status(status_code: int) -> str:
    """For people: `good`, or `bad (BadSensorFailure)`."""
    if status_code & _CODE_MASK == 0:
        return "good"
    return f"{quality_of(status_code)} ({status_name(status_code)})"
