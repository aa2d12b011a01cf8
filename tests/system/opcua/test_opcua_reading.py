"""Reading tags from a real server: what arrives is what was sent, and nothing else is believed."""

from __future__ import annotations

import asyncio
import math
from typing import Any

import pytest
from asyncua import ua

from edgectl.opcua.source import OpcUaTagSource
from edgectl.ports import PlantMismatchError, PlantUnreachableError
from edgectl.records.readings import Quality

pytestmark = pytest.mark.asyncio
V = ua.VariantType


async def test_sixty_tags_are_read_in_one_call(plant: Any, kit: Any) -> None:
    async with kit.session(plant.port) as session:
        await session.wait_linked(5.0)
        source = OpcUaTagSource(session, kit.clock)
        plant.service.read_sizes.clear()
        snapshot = await source.read(12, 1.0)
    assert plant.service.read_sizes == [63]  # 60 tags and three nodes of the server itself
    assert snapshot.cycle == 12
    assert [reading.tag for reading in snapshot.readings] == [tag.tag for tag in kit.TAGS]
    assert [reading.value for reading in snapshot.readings] == [20.0 + n for n in range(60)]
    assert {reading.quality for reading in snapshot.readings} == {Quality.GOOD}
    assert {reading.source_time for reading in snapshot.readings} == {kit.STAMP.timestamp()}
    assert source.server_running is True
    assert source.clock_offset_s is not None
    assert abs(source.clock_offset_s) < 3.0  # this server shows its time once a second


async def test_values_statuses_and_timestamps_arrive_untouched(plant: Any, kit: Any) -> None:
    plant.show("TI-0000", None, V.Null, status=0x808C0000)
    plant.show("TI-0001", 61.5, status=0x40930000)
    plant.show("TI-0002", math.nan)
    plant.show("TI-0003", 1.0, source=None)
    plant.show("TI-0004", True, V.Boolean)
    plant.show("TI-0005", -7, V.Int16)
    plant.show("TI-0006", "far too hot", V.String)
    plant.show("TI-0007", [1.0, 2.0])
    plant.show("TI-0008", None, V.Null)
    async with kit.session(plant.port) as session:
        await session.wait_linked(5.0)
        readings = (await OpcUaTagSource(session, kit.clock).read(1, 1.0)).readings
    seen = [(reading.value, reading.status_code) for reading in readings[:9]]
    assert seen[:2] == [(None, 0x808C0000), (61.5, 0x40930000)]
    assert math.isnan(seen[2][0])
    assert seen[3:6] == [(1.0, 0), (1.0, 0), (-7.0, 0)]
    assert seen[6:] == [(None, 0x80740000), (None, 0x80740000), (None, 0x80B10000)]
    assert readings[3].source_time is None
    assert readings[3].server_time is not None
    assert readings[0].source_time == kit.STAMP.timestamp()


async def test_a_small_server_is_asked_in_portions(plant: Any, kit: Any) -> None:
    plant.limit_read(25)
    async with kit.session(plant.port) as session:
        await session.wait_linked(5.0)
        assert max(plant.service.read_sizes) <= 25
        plant.service.read_sizes.clear()
        snapshot = await OpcUaTagSource(session, kit.clock).read(1, 1.0)
    assert plant.service.read_sizes == [25, 25, 13]
    assert [reading.value for reading in snapshot.readings] == [20.0 + n for n in range(60)]


async def test_a_missing_optional_node_is_a_bad_reading(plant: Any, kit: Any) -> None:
    absent, foreign = kit.tag("TI-9"), kit.tag("TI-8", node="nsu=urn:nowhere;s=TI-8")
    async with kit.session(plant.port, tags=(absent, kit.TAGS[0], foreign)) as session:
        await session.wait_linked(5.0)
        readings = (await OpcUaTagSource(session, kit.clock).read(1, 1.0)).readings
    assert [(reading.tag, reading.status_code) for reading in readings] == [
        ("TI-9", 0x80340000),
        ("TI-0000", 0),
        ("TI-8", 0x80340000),
    ]


async def test_a_missing_required_node_latches_until_it_is_there(plant: Any, kit: Any) -> None:
    tags = (kit.tag("TI-9", required=True), kit.TAGS[0])
    async with kit.session(plant.port, tags=tags) as session:
        link = await session.wait_linked(5.0)
        source = OpcUaTagSource(session, kit.clock)
        for cycle in (1, 2):
            with pytest.raises(PlantMismatchError, match=r"TI-9.*s=TI-9 not found"):
                await source.read(cycle, 1.0)
        plant.add("TI-9", 5.0, V.Double)
        await kit.eventually(lambda: session.link().mismatch is None)
        assert session.link().connection is link.connection
        assert (await source.read(3, 1.0)).readings[0].value == 5.0


async def test_a_required_node_of_the_wrong_type_is_named(plant: Any, kit: Any) -> None:
    plant.add("TI-9", "text", V.String)
    async with kit.session(plant.port, tags=(kit.tag("TI-9", required=True),)) as session:
        await session.wait_linked(5.0)
        with pytest.raises(PlantMismatchError, match=r"TI-9.*of type String, not a number"):
            await OpcUaTagSource(session, kit.clock).read(1, 1.0)


@pytest.mark.parametrize(
    ("changes", "words"),
    [
        ({"unit": "K"}, "is in 'degC', the site file says 'K'"),
        ({"low": 0.0, "high": 1.0}, "this looks like another scale"),
    ],
)
async def test_a_required_tag_in_another_unit_or_scale_is_refused(
    plant: Any, kit: Any, changes: dict[str, Any], words: str
) -> None:
    tags = (kit.tag("TI-0000", required=True, **changes),)
    async with kit.session(plant.port, tags=tags) as session:
        await session.wait_linked(5.0)
        with pytest.raises(PlantMismatchError, match=words):
            await OpcUaTagSource(session, kit.clock).read(1, 1.0)


async def test_a_range_that_changes_while_running_is_refused(
    plant: Any, relay: Any, kit: Any
) -> None:
    added = plant.add("TI-9", 5.0, V.Double, scale=("degC", 0.0, 200.0))
    async with kit.session(relay.port, tags=(kit.tag("TI-9", required=True),)) as session:
        await session.wait_linked(5.0)
        plant.rescale(added, 0.0, 400.0)
        relay.cut()
        await kit.eventually(lambda: session._link is not None and session._link.mismatch)
        with pytest.raises(PlantMismatchError, match=r"0 to 200 degC to 0 to 400 degC"):
            await OpcUaTagSource(session, kit.clock).read(1, 1.0)


@pytest.mark.parametrize(
    ("node", "value", "kind", "words"),
    [
        (ua.ObjectIds.Server_ServerStatus_State, 3, V.Int32, r"not running \(state Suspended"),
        (ua.ObjectIds.Server_ServiceLevel, 1, V.Byte, r"not running \(service level 1"),
    ],
)
async def test_a_server_that_does_not_run_is_not_believed(
    plant: Any, kit: Any, node: int, value: int, kind: ua.VariantType, words: str
) -> None:
    async with kit.session(plant.port) as session:
        await session.wait_linked(5.0)
        source = OpcUaTagSource(session, kit.clock)
        plant.show(node, value, kind)
        with pytest.raises(PlantUnreachableError, match=words):
            await source.read(1, 1.0)
        assert source.server_running is False
        plant.reset()
        await source.read(2, 1.0)
        assert source.server_running is True


async def test_one_read_at_a_time(plant: Any, kit: Any) -> None:
    async with kit.session(plant.port) as session:
        await session.wait_linked(5.0)
        source = OpcUaTagSource(session, kit.clock)
        first, second = await asyncio.gather(
            source.read(1, 1.0), source.read(2, 1.0), return_exceptions=True
        )
        assert first.cycle == 1
        assert isinstance(second, PlantUnreachableError)
        assert "has not been answered" in str(second)
        assert (await source.read(3, 1.0)).cycle == 3
