"""The address space: which nodes the plant shows, with types, ranges and units.

Objects / `Column C-2101` / one object per tag (`FIC-2103`: PV, SP, OP, MODE),
`HS-2120` with the switch for advice, and the folder `Advisory`. String node ids
are the signals' names. Measured values are AnalogItemType (OPC 10000-8, 5.3.2.3).
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from datetime import datetime
from typing import Any, Final

from asyncua import ua
from asyncua.common.session_interface import AbstractSession
from asyncua.ua.object_ids import ObjectIds

from edgectl.records.units import UNECE_NAMESPACE, UNITS
from sim_server.advisory import ADVISORY_KINDS, SWITCH, USABLE, Written
from sim_server.signals import SignalSpec

NAMESPACE: Final = "urn:edgectl:sim:C-2101"
COLUMN: Final = "Column C-2101"
ADVISORY: Final = "Advisory"

VARIANTS: Final[Mapping[type[Written], ua.VariantType]] = {
    bool: ua.VariantType.Boolean,
    int: ua.VariantType.Int64,
    float: ua.VariantType.Double,
    str: ua.VariantType.String,
    datetime: ua.VariantType.DateTime,
}
DESCRIPTIONS: Final[Mapping[str, str]] = {
    "ADV.valid": "the runtime vouches for the targets",
    "ADV.valid_until": "when the advice expires",
    "ADV.made_at": "when the suggestion last changed",
    "ADV.cycle": "number of the runtime's cycle",
    "ADV.heartbeat": "moves with every complete cycle",
    "ADV.standing": "starting, advising, holding or silent",
    "ADV.reason": "why, in one word",
    "ADV.sentence": "why, in a sentence",
    USABLE: "the plant's own watchdog: false means do not act on the advice",
    SWITCH: "operator's switch for advice",
}


@dataclass(frozen=True, slots=True)
class Variable:
    """One variable of the address space."""

    name: str
    parent: str
    kind: ua.VariantType
    description: str
    writable: bool
    spec: SignalSpec | None = None
    """Range and unit; None for nodes that are not measurements."""


def standard_id(number: int) -> ua.NodeId:
    """A node id of OPC UA itself, e.g. `ObjectIds.Server`."""
    return ua.NodeId(ua.Int32(number))


def signal_id(name: str, index: int) -> ua.NodeId:
    """The node id of a signal or of its object, in namespace `index`."""
    return ua.NodeId(ua.String(name), ua.Int16(index))


def variables(specs: Sequence[SignalSpec]) -> list[Variable]:
    """Every variable the server shows."""
    shown = [
        Variable(
            name=spec.name,
            parent=spec.name.partition(".")[0],
            kind=ua.VariantType.Int32 if spec.integer else ua.VariantType.Double,
            description=spec.description,
            writable=spec.board_writable,
            spec=spec,
        )
        for spec in specs
    ]
    shown.append(_plain_variable(SWITCH, "HS-2120", ua.VariantType.Boolean, writable=True))
    shown.append(_plain_variable(USABLE, ADVISORY, ua.VariantType.Boolean, writable=False))
    shown.extend(
        _plain_variable(name, ADVISORY, VARIANTS[kind], writable=True)
        for name, kind in ADVISORY_KINDS.items()
    )
    return shown


async def build(session: AbstractSession, index: int, shown: Sequence[Variable]) -> None:
    """Add all objects and variables under Objects, in namespace `index`."""
    items = [_object_item(index, COLUMN, standard_id(ObjectIds.ObjectsFolder), folder=True)]
    column = signal_id(COLUMN, index)
    parents = dict.fromkeys(variable.parent for variable in shown)
    items.extend(
        _object_item(index, parent, column, folder=parent == ADVISORY) for parent in parents
    )
    for variable in shown:
        items.append(_variable_item(index, variable))
        if variable.spec is not None:
            items.extend(_property_items(index, variable.name, variable.spec))
    for result in await session.add_nodes(items):
        result.StatusCode.check()


def _plain_variable(name: str, parent: str, kind: ua.VariantType, *, writable: bool) -> Variable:
    return Variable(name, parent, kind, DESCRIPTIONS.get(name, name), writable)


def _object_item(index: int, name: str, parent: ua.NodeId, *, folder: bool) -> ua.AddNodesItem:
    kind = ObjectIds.FolderType if folder else ObjectIds.BaseObjectType
    return ua.AddNodesItem(
        ParentNodeId=parent,
        ReferenceTypeId=standard_id(ObjectIds.Organizes),
        RequestedNewNodeId=signal_id(name, index),
        BrowseName=ua.QualifiedName(name, index),
        NodeClass=ua.NodeClass.Object,
        NodeAttributes=ua.ObjectAttributes(
            DisplayName=ua.LocalizedText(name), Description=ua.LocalizedText(name), EventNotifier=0
        ),
        TypeDefinition=standard_id(kind),
    )


def _variable_item(index: int, variable: Variable) -> ua.AddNodesItem:
    analog = variable.spec is not None
    level = ua.AccessLevel.CurrentRead.mask
    if variable.writable:
        level |= ua.AccessLevel.CurrentWrite.mask
    browse_name = variable.name.removeprefix(f"{variable.parent}.").removeprefix("ADV.")
    return ua.AddNodesItem(
        ParentNodeId=signal_id(variable.parent, index),
        ReferenceTypeId=standard_id(ObjectIds.HasComponent),
        RequestedNewNodeId=signal_id(variable.name, index),
        BrowseName=ua.QualifiedName(browse_name, index),
        NodeClass=ua.NodeClass.Variable,
        NodeAttributes=_attributes(
            variable.name,
            variable.description,
            # Null until the plant publishes: the data type says what will come.
            ua.Variant(None, ua.VariantType.Null),
            standard_id(variable.kind.value),
            level,
        ),
        TypeDefinition=standard_id(
            ObjectIds.AnalogItemType if analog else ObjectIds.BaseDataVariableType
        ),
    )


def _property_items(index: int, name: str, spec: SignalSpec) -> list[ua.AddNodesItem]:
    unit = UNITS[spec.unit]
    units = ua.EUInformation(
        NamespaceUri=UNECE_NAMESPACE,
        UnitId=ua.Int32(unit.unit_id),
        DisplayName=ua.LocalizedText(unit.name),
        Description=ua.LocalizedText(unit.quantity.replace("_", " ")),
    )
    values: list[tuple[str, Any, int]] = [
        ("EURange", ua.Range(Low=spec.low, High=spec.high), ObjectIds.Range),
        ("EngineeringUnits", units, ObjectIds.EUInformation),
    ]
    return [
        ua.AddNodesItem(
            ParentNodeId=signal_id(name, index),
            ReferenceTypeId=standard_id(ObjectIds.HasProperty),
            RequestedNewNodeId=signal_id(f"{name}.{label}", index),
            BrowseName=ua.QualifiedName(label, 0),
            NodeClass=ua.NodeClass.Variable,
            NodeAttributes=_attributes(
                label,
                label,
                ua.Variant(value, ua.VariantType.ExtensionObject),
                standard_id(data_type),
                ua.AccessLevel.CurrentRead.mask,
            ),
            TypeDefinition=standard_id(ObjectIds.PropertyType),
        )
        for label, value, data_type in values
    ]


def _attributes(
    name: str, description: str, value: ua.Variant, data_type: ua.NodeId, level: int
) -> ua.VariableAttributes:
    return ua.VariableAttributes(
        DisplayName=ua.LocalizedText(name),
        Description=ua.LocalizedText(description),
        WriteMask=0,
        UserWriteMask=0,
        Value=value,
        DataType=data_type,
        ValueRank=ua.ValueRank.Scalar,
        ArrayDimensions=[],
        AccessLevel=level,
        UserAccessLevel=level,
        MinimumSamplingInterval=0.0,
        Historizing=False,
    )
