"""The write fence: the only place in this program that asks a server to write.

It holds the closed list of advisory nodes, as resolved on this very connection,
and lets nothing else through. A test greps that no other file writes.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from types import MappingProxyType

from asyncua.client.ua_client import UaClient
from asyncua.ua.uaerrors import UaError
from asyncua.ua.uatypes import NodeId, VariantType

from edgectl.opcua.values import Plain, encode
from edgectl.ports import PlantMismatchError


class FenceError(RuntimeError):
    """Somebody tried to write a node that is not advisory: a bug, never caught in a cycle."""


class WriteFence:
    """Writes values to the listed nodes, and to nothing else.

    Parameters
    ----------
    uaclient : UaClient
    nodes : mapping of str to NodeId
        Every advisory node of the site file that this server can resolve, by name.
    types : mapping of str to VariantType
        How to write the ones that fit; a node that is missing here is never written.
    tags : mapping of str to NodeId
        Every tag's node: what is read is never written.
    most_per_call : int
        Items the server accepts in one Write.

    Raises
    ------
    PlantMismatchError
        An advisory node is also a tag's node or belongs to OPC UA itself, or two
        names lead to one node. Texts that differ may name the same node, so
        resolved ids are compared.
    """

    def __init__(
        self,
        uaclient: UaClient,
        nodes: Mapping[str, NodeId],
        types: Mapping[str, VariantType],
        tags: Mapping[str, NodeId],
        most_per_call: int,
    ) -> None:
        _check_apart(nodes, tags)
        self._uaclient = uaclient
        self._types = MappingProxyType({nodes[name]: kind for name, kind in types.items()})
        self._most_per_call = most_per_call

    def check(self, node: NodeId) -> VariantType:
        """The type to write to that node. Raises FenceError when it is not advisory."""
        # An expanded id equals a plain one, but may travel as another node.
        if type(node) is not NodeId or node not in self._types:
            raise FenceError(f"{node!r} is not an advisory node of the site file")
        return self._types[node]

    async def send(self, items: Sequence[tuple[NodeId, Plain]]) -> list[int]:
        """Write all items and return their status codes.

        Everything is checked before anything is sent. Raises FenceError,
        UnwritableValueError, or what the connection raises.
        """
        nodes = [node for node, _ in items]
        values = [encode(value, self.check(node)) for node, value in items]
        codes: list[int] = []
        for start in range(0, len(items), self._most_per_call):
            part = slice(start, start + self._most_per_call)
            answers = await self._uaclient.session.write_attributes(nodes[part], values[part])
            if len(answers) != len(nodes[part]):
                raise UaError(f"{len(nodes[part])} items written, {len(answers)} answered")
            codes += [int(answer.value) for answer in answers]
        return codes


def _check_apart(nodes: Mapping[str, NodeId], tags: Mapping[str, NodeId]) -> None:
    readers = {node: f"tag {tag}: what is read is never written" for tag, node in tags.items()}
    writers: dict[NodeId, str] = {}
    for name, node in nodes.items():
        what = f"advisory node {name} ({node.to_string()})"
        if node in readers:
            raise PlantMismatchError(f"{what} is the same node as {readers[node]}")
        if node in writers:
            raise PlantMismatchError(f"{what} is the same node as advisory node {writers[node]}")
        if node.NamespaceIndex == 0:
            raise PlantMismatchError(f"{what} belongs to OPC UA itself; name another node")
        writers[node] = name
