"""Node ids: what is accepted, and when two of them are the same node."""

from __future__ import annotations

import pytest

from edgectl.settings.nodes import NodeTextError, same_node


@pytest.mark.parametrize(
    "text",
    [
        "nsu=urn:x;s=FIC-2101.PV",
        "nsu=urn:x;s=a;b=c",
        "nsu=urn:x;i=0",
        "nsu=urn:x;i=4294967295",
        "nsu=urn:x;g=09087e75-8e5e-499b-954f-f2a9603db28a",
        "nsu=urn:x;b=M/RbKBsRVkePCePcx24oRA==",
    ],
)
def test_node_ids_are_accepted(text: str) -> None:
    same_node(text)


@pytest.mark.parametrize(
    ("text", "says"),
    [
        ("", "form"),
        ("FIC-2101.PV", "form"),
        ("ns=2;s=FIC-2101.PV", "the URI"),
        ("i=2258", "form"),
        ("svr=1;nsu=urn:x;s=a", "form"),
        ("nsu=;s=a", "form"),
        ("nsu=urn:x;s=", "form"),
        ("nsu=urn:x;x=a", "form"),
        ("nsu=urn:x;s= a", "space"),
        ("nsu=urn:x ;s=a", "space"),
        ("nsu=urn:x;s=a\u202eb", "printed"),
        ("nsu=urn:x;s=a\nb", "printed"),
        ("nsu=urn:%zz;s=a", "hexadecimal"),
        ("nsu=urn:x;i=-1", "whole number"),
        ("nsu=urn:x;i=4294967296", "whole number"),
        ("nsu=urn:x;i=1_0", "whole number"),
        ("nsu=urn:x;i=\u0661", "whole number"),
        ("nsu=urn:x;g=09087e75", "look like"),
        ("nsu=urn:x;b=*", "base64"),
        ("nsu=urn:x;s=" + "a" * 2000, "longer"),
    ],
)
def test_other_texts_are_refused(text: str, says: str) -> None:
    with pytest.raises(NodeTextError, match=says):
        same_node(text)


@pytest.mark.parametrize(
    ("one", "other"),
    [
        ("nsu=urn:x;i=7", "nsu=urn:x;i=007"),
        ("nsu=urn:a-b;s=a", "nsu=urn:a%2Db;s=a"),
        (
            "nsu=urn:x;g=09087e75-8e5e-499b-954f-f2a9603db28a",
            "nsu=urn:x;g=09087E75-8E5E-499B-954F-F2A9603DB28A",
        ),
        ("nsu=urn:x;b=QQ==", "nsu=urn:x;b=QR=="),
    ],
)
def test_two_spellings_are_one_node(one: str, other: str) -> None:
    assert same_node(one) == same_node(other)


@pytest.mark.parametrize(
    "other", ["nsu=urn:x;s=A", "nsu=urn:X;s=a", "nsu=urn:x;s=a ;", "nsu=urn:x;i=1"]
)
def test_different_nodes_differ(other: str) -> None:
    assert same_node("nsu=urn:x;s=a") != same_node(other)
