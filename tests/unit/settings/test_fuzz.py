"""Whatever is in the file: a site, or a SiteFileError that can be read."""

from __future__ import annotations

import json
import tomllib
from pathlib import Path
from typing import Any

from hypothesis import given, settings
from hypothesis import strategies as st

from edgectl.settings import SiteFileError, parse_site
from edgectl.settings.checks import cross_complaints
from edgectl.settings.lines import LineIndex
from edgectl.settings.nodes import same_node
from edgectl.settings.parts import take_apart

TEXT = (Path(__file__).parent / "whole.toml").read_text(encoding="utf-8")
RAW = tomllib.loads(TEXT)
FUZZ = settings(max_examples=150, deadline=None, derandomize=True)

VALUES = [
    "nan", "-inf", "1e308", "-0.0", "9" * 500, "true", '""', "[]", "{}", "[[1]]", "{ a = 1 }",
    '"\\u0000"', '"nsu=urn:x;s=a"', "1979-05-27", "07:32:00", "-1", "0", '"AI-2115"', '"degC"',
    "[nan, 1]", "'''\n'''", "0x10", '"\\U0001F600"', '"opc.tcp://a:b@c"', "[{}]", '"limit"',
]  # fmt: skip


def outcome(text: str) -> None:
    """Parse it; check what comes out either way."""
    refused: SiteFileError | None = None
    try:
        site = parse_site(text, "site.toml")
    except SiteFileError as error:
        refused = error
    if refused is not None:
        count = text.count("\n") + 1
        assert refused.findings
        assert all(f.line is None or 1 <= f.line <= count for f in refused.findings)
        assert all(sign.isprintable() or sign == "\n" for sign in str(refused))
        return
    # A site that was accepted can travel, and its fence is apart from what it reads.
    json.dumps(site.as_dict(), allow_nan=False)
    fence = {same_node(node) for node in site.write_fence()}
    assert not fence & {same_node(tag.node) for tag in site.tags.values()}
    assert len(fence) in (0, 8 + 2 * len(site.mv))


@FUZZ
@given(st.text(max_size=300))
def test_garbage(text: str) -> None:
    outcome(text)


@FUZZ
@given(
    st.lists(
        st.tuples(
            st.integers(0, len(TEXT) - 1),
            st.integers(0, 40),
            st.text("abz09.,=[]{}\"'#\\\n\r \t-_e\x00\u202e", max_size=6),
        ),
        min_size=1,
        max_size=6,
    )
)
def test_random_edits(edits: list[tuple[int, int, str]]) -> None:
    text = TEXT
    for at, gone, new in edits:
        text = text[:at] + new + text[at + gone :]
    outcome(text)


@FUZZ
@given(st.data())
def test_random_values_at_random_keys(data: st.DataObject) -> None:
    lines = TEXT.splitlines()
    pairs = [number for number, line in enumerate(lines) if " = " in line and line[0] != "#"]
    for number in data.draw(st.lists(st.sampled_from(pairs), min_size=1, max_size=12)):
        key = lines[number].split(" = ")[0]
        lines[number] = f"{key} = {data.draw(st.sampled_from(VALUES))}"
    outcome("\n".join(lines))


@FUZZ
@given(st.data())
def test_random_lines_moved_doubled_and_dropped(data: st.DataObject) -> None:
    lines = TEXT.splitlines()
    for _ in range(data.draw(st.integers(1, 5))):
        at = data.draw(st.integers(0, len(lines) - 1))
        to = data.draw(st.integers(0, len(lines) - 1))
        line = lines.pop(at) if data.draw(st.booleans()) else lines[at]
        if data.draw(st.booleans()):
            lines.insert(to, line)
    outcome("\n".join(lines))


TREES: st.SearchStrategy[Any] = st.recursive(
    st.none()
    | st.booleans()
    | st.integers()
    | st.floats()
    | st.text(max_size=8)
    | st.just(10**400),
    lambda inner: (
        st.lists(inner, max_size=3) | st.dictionaries(st.text(max_size=5), inner, max_size=3)
    ),
    max_leaves=8,
)


@FUZZ
@given(st.data())
def test_any_tree_in_any_place(data: st.DataObject) -> None:
    raw = json.loads(json.dumps(RAW))
    for _ in range(data.draw(st.integers(1, 4))):
        node = raw
        for _ in range(data.draw(st.integers(0, 3))):
            inner = [value for value in node.values() if isinstance(value, dict) and value]
            node = data.draw(st.sampled_from(inner)) if inner else node
        key = data.draw(st.sampled_from(list(node)) | st.text(max_size=5))
        node[key] = data.draw(TREES)
    parts, complaints = take_apart(raw)
    for complaint in [*complaints, *cross_complaints(parts)]:
        str(complaint.at("site.toml", 1))


@FUZZ
@given(st.data())
def test_the_line_scan_ends_on_whatever_the_parser_accepts(data: st.DataObject) -> None:
    blocks = TEXT.split("\n\n")
    text = "\n".join(
        data.draw(st.sampled_from(["", "# c ' \"", "['k.k']", f"z = {value}"]))
        for value in data.draw(st.lists(st.sampled_from(VALUES), max_size=4))
    )
    text = f"{data.draw(st.sampled_from(blocks))}\n{text}"
    try:
        tomllib.loads(text)
    except tomllib.TOMLDecodeError:
        return
    assert LineIndex(text).line(("none",)) == 1
