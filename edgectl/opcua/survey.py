"""Looking at nodes: does each exist, of which type, in which unit, for whom?

A handful of calls for any number of nodes: one Read for the attributes, one
TranslateBrowsePathsToNodeIds for the unit and range properties, one Read for them.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace
from typing import Final, cast

from asyncua.common.ua_utils import get_base_data_type
from asyncua.ua.attribute_ids import AttributeIds
from asyncua.ua.object_ids import ObjectIds
from asyncua.ua.uaerrors import UaError, UaStatusCodeError
from asyncua.ua.uaprotocol_auto import (
    BrowsePath,
    EUInformation,
    NodeClass,
    Range,
)
from asyncua.ua.uatypes import (
    Boolean,
    DataValue,
    NodeId,
    QualifiedName,
    RelativePath,
    RelativePathElement,
    VariantType,
)

from edgectl.opcua.connection import Connection, standard_node
from edgectl.opcua.fit import NodeFacts
from edgectl.opcua.units import ServerRange, ServerUnit
from edgectl.opcua.values import plain_of, status_of
from edgectl.records.readings import Quality, quality_of

_ATTRIBUTES: Final = (
    AttributeIds.NodeClass,
    AttributeIds.DataType,
    AttributeIds.ValueRank,
    AttributeIds.UserAccessLevel,
)
_SCALAR_RANKS: Final = (-1, -2, -3)
"""Scalar, any, scalar or one dimension: the value itself is looked at in every read."""
_FIRST_ABSTRACT_TYPE: Final = 24
_ENUMERATION: Final = 29
_PROPERTIES: Final = ("EngineeringUnits", "EURange")


async def survey_nodes(
    connection: Connection, nodes: Mapping[str, str], with_units: bool
) -> dict[str, NodeFacts]:
    """What the server says about each node, by name. Raises LINK_ERRORS or PlantMismatchError."""
    ids = {name: connection.resolve(node) for name, node in nodes.items()}
    known = [(name, node_id) for name, node_id in ids.items() if node_id is not None]
    asked = [(node_id, attribute) for _, node_id in known for attribute in _ATTRIBUTES]
    answers = await connection.read(connection.requests(asked))
    base_types = await _base_types(connection, answers[1 :: len(_ATTRIBUTES)])
    facts = {
        name: NodeFacts(name, nodes[name], node_id, False, None, True, None)
        for name, node_id in ids.items()
    }
    for row, (name, _) in enumerate(known):
        start = row * len(_ATTRIBUTES)
        four = answers[start : start + len(_ATTRIBUTES)]
        facts[name] = _with_attributes(facts[name], four, base_types)
    if with_units:
        facts |= await _with_units(connection, [item for item in facts.values() if item.found])
    return facts


def _with_attributes(
    facts: NodeFacts, answers: Sequence[DataValue], base_types: Mapping[NodeId, VariantType]
) -> NodeFacts:
    node_class, data_type, rank, access = (_good(answer) for answer in answers)
    return replace(
        facts,
        found=node_class == NodeClass.Variable,
        data_type=base_types.get(data_type) if isinstance(data_type, NodeId) else None,
        scalar=rank in _SCALAR_RANKS if isinstance(rank, int) else True,
        access=access if isinstance(access, int) else None,
    )


def _good(answer: DataValue) -> object:
    bad = quality_of(status_of(answer)) is Quality.BAD
    return None if bad else plain_of(answer)


async def _base_types(
    connection: Connection, answers: Sequence[DataValue]
) -> dict[NodeId, VariantType]:
    """The built-in type behind each data type; abstract ones (Number) are left out."""
    found: dict[NodeId, VariantType] = {}
    for data_type in {item for item in map(_good, answers) if isinstance(item, NodeId)}:
        try:
            base = (await get_base_data_type(connection.client.get_node(data_type))).nodeid
        except UaError:
            continue  # not known here: the value of each reading tells
        number = base.Identifier
        if number == _ENUMERATION:
            found[data_type] = VariantType.Int32
        elif isinstance(number, int) and 0 < number < _FIRST_ABSTRACT_TYPE:
            found[data_type] = VariantType(number)
    return found


async def _with_units(connection: Connection, facts: Sequence[NodeFacts]) -> dict[str, NodeFacts]:
    """The same facts with unit and range, where the nodes have these properties."""
    paths = [
        (item.name, wanted, _property_path(item.node_id, wanted))
        for item in facts
        if item.node_id is not None
        for wanted in _PROPERTIES
    ]
    targets: list[tuple[str, NodeId]] = []
    step = connection.limits.translate
    for start in range(0, len(paths), step):
        part = paths[start : start + step]
        try:
            results = await connection.client.uaclient.translate_browsepaths_to_nodeids(
                [path for _, _, path in part]
            )
        except UaStatusCodeError:
            return {}  # a server without this service declares no units to us
        for (name, _, _), result in zip(part, results, strict=True):
            targets += [(name, target.TargetId) for target in (result.Targets or [])[:1]]
    # TargetId is an expanded id; nodes of this server carry their index in it.
    plain = [(NodeId(target.Identifier, target.NamespaceIndex)) for _, target in targets]
    answers = await connection.read(
        connection.requests([(node, AttributeIds.Value) for node in plain])
    )
    complete = {item.name: item for item in facts}
    for (name, _), answer in zip(targets, answers, strict=True):
        value = _good(answer)
        if isinstance(value, EUInformation):
            text = value.DisplayName.Text if value.DisplayName else None
            unit = ServerUnit(value.NamespaceUri or "", value.UnitId, text or "")
            complete[name] = replace(complete[name], unit=unit)
        elif isinstance(value, Range):
            complete[name] = replace(complete[name], span=ServerRange(value.Low, value.High))
    return complete


def _property_path(node: NodeId, name: str) -> BrowsePath:
    # The library's own Boolean cannot be made; it stands for a plain one.
    element = RelativePathElement(
        ReferenceTypeId=standard_node(ObjectIds.HasProperty),
        IsInverse=cast(Boolean, False),
        IncludeSubtypes=cast(Boolean, True),
        TargetName=QualifiedName(name, 0),
    )
    return BrowsePath(StartingNode=node, RelativePath=RelativePath(Elements=[element]))
