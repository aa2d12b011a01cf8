"""One file alone may change anything at the plant's server: the write fence.

The import contracts keep OPC UA inside `edgectl/opcua`; here every call that
could change something at a server is looked for by name, in all of `edgectl`.
"""

from __future__ import annotations

import ast
import re
from collections.abc import Iterator
from pathlib import Path

from asyncua.client.client import Client
from asyncua.client.ua_client import UaClient
from asyncua.common.node import Node

FENCE = Path("edgectl/opcua/fence.py")

CHANGES_THE_SERVER = re.compile(
    r"^(write_|set_value|set_data_value|set_attr_bit|unset_attr_bit|set_event_notifier"
    r"|set_modelling_rule|set_read_only|set_writable|add_|delete_(nodes|reference)|call_method$"
    r"|history_update|register_(server|namespace)|import_xml|new_node)"
)
SERVICE_STRUCTURES = re.compile(
    r"^(Write(Value|Parameters|Request)|Call(Method)?(Request|Parameters)|HistoryUpdate\w+"
    r"|Add(Nodes|References)\w*|Delete(Nodes|References)\w*)$"
)
# Names too common to look for alone: only on something that is a connection.
COMMON_NAMES = {"write", "call"}
CONNECTION = re.compile(r"(client|session|connection|protocol)(\(\))?$", re.IGNORECASE)


def library_calls() -> set[str]:
    """What the installed OPC UA library offers to change a server with."""
    offered = {name for kind in (Client, Node, UaClient) for name in dir(kind)}
    return {name for name in offered if CHANGES_THE_SERVER.match(name)}


def write_calls(source: str, names: set[str]) -> Iterator[str]:
    """Each mention of a call or structure that could change a server."""
    for node in ast.walk(ast.parse(source)):
        if isinstance(node, ast.Attribute):
            common = node.attr in COMMON_NAMES and CONNECTION.search(ast.unparse(node.value))
            if node.attr in names or common or SERVICE_STRUCTURES.match(node.attr):
                yield f"line {node.lineno}: {ast.unparse(node)}"
        elif isinstance(node, ast.Name) and SERVICE_STRUCTURES.match(node.id):
            yield f"line {node.lineno}: {node.id}"
        elif isinstance(node, ast.alias) and SERVICE_STRUCTURES.match(node.name):
            yield f"line {node.lineno}: import of {node.name}"
        elif isinstance(node, ast.Constant) and node.value in names:
            yield f"line {node.lineno}: the name {node.value!r} as text"


def test_only_the_fence_can_write(repo_root: Path, production_files: list[Path]) -> None:
    names = library_calls()
    problems = [
        f"{path.relative_to(repo_root)}, {call}"
        for path in production_files
        if path.is_relative_to(repo_root / "edgectl") and path != repo_root / FENCE
        for call in write_calls(path.read_text(), names)
    ]
    assert not problems, "\n".join(problems)


def test_the_fence_is_where_the_writing_is(repo_root: Path) -> None:
    source = (repo_root / FENCE).read_text()
    assert list(write_calls(source, library_calls())), f"{FENCE} writes nothing: look elsewhere"


def test_the_library_still_names_its_calls_so() -> None:
    expected = {"write_attributes", "write_values", "write_value", "set_value", "call_method"}
    assert expected <= library_calls()


def test_each_way_to_write_is_seen() -> None:
    samples = [
        "await client.uaclient.write_attributes(ids, values)",
        "await node.write_value(1.0)",
        "await self._client.uaclient.write(parameters)",
        "send = self._session.write",
        "await node.set_value(1.0)",
        "parameters = ua.WriteParameters()",
        "from asyncua.ua import WriteValue",
        "getattr(client, 'write_values')(nodes)",
        "await node.call_method('x')",
        "await client.delete_nodes(nodes)",
    ]
    for sample in samples:
        assert list(write_calls(sample, library_calls())), sample


def test_reading_and_files_are_left_alone() -> None:
    samples = [
        "await client.uaclient.read(parameters)",
        "file.write('x')",
        "client.set_user('advisor')",
        "await client.delete_subscriptions([1])",
        "journal.write_ms",
        "connection.limits.write",
    ]
    for sample in samples:
        assert not list(write_calls(sample, library_calls())), sample
