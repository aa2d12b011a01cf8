"""Publishing to a real server: in order, whole or withdrawn, and to nothing else."""

from __future__ import annotations

import dataclasses
import math
import time
from typing import Any

import pytest
from asyncua import ua

from edgectl.opcua.connection import open_connection
from edgectl.opcua.fence import FenceError
from edgectl.opcua.link import make_link
from edgectl.opcua.sink import OpcUaAdviceSink
from edgectl.opcua.source import OpcUaTagSource
from edgectl.ports import PlantMismatchError, PlantUnreachableError
from edgectl.records.advice import Advice, Standing, SuggestedMove

pytestmark = pytest.mark.asyncio
AT = 1_930_000_000.0
DENIED = 0x801F0000


def advice(cycle: int = 7, valid: bool = True, target: float | None = 7860.0) -> Advice:
    return Advice(
        cycle=cycle,
        standing=Standing.ADVISING if valid else Standing.HOLDING,
        reason="limit_reached" if valid else "over_budget",
        sentence="Lower reflux to 7860 kg/h.",
        valid=valid,
        valid_until=AT + 90.0,
        made_at=AT,
        confirmed_cycle=cycle,
        moves=(
            SuggestedMove("FIC-2103", target, True, AT, "energy_saved", "Lower reflux."),
            SuggestedMove("TIC-2107", None, False, None, "no_move", "Leave tray 30."),
        ),
        notices=(),
    )


async def test_valid_falls_first_and_rises_last(plant: Any, kit: Any) -> None:
    async with kit.session(plant.port) as session:
        await session.wait_linked(5.0)
        delivery = await OpcUaAdviceSink(session).publish(advice(), 41, 1.0)
    assert (delivery.cycle, delivery.valid, delivery.complete) == (7, True, True)
    assert delivery.problem is None
    assert {item.status_code for item in delivery.items} == {0}
    first, values, stamps, last = plant.last_writes()
    assert first == {"ADV.valid": False}
    assert values == {
        "ADV.FIC-2103.target": 7860.0,
        "ADV.FIC-2103.reason": "energy_saved",
        "ADV.TIC-2107.reason": "no_move",
        "ADV.standing": "advising",
        "ADV.reason": "limit_reached",
        "ADV.sentence": "Lower reflux to 7860 kg/h.",
        "ADV.made_at": plant.value("ADV.made_at"),
    }
    assert set(stamps) == {"ADV.valid_until", "ADV.cycle", "ADV.heartbeat"}
    assert last == {"ADV.valid": True}
    assert plant.value("ADV.made_at").timestamp() == AT
    assert plant.value("ADV.valid_until").timestamp() == AT + 90.0
    assert (plant.value("ADV.cycle"), plant.value("ADV.heartbeat")) == (7, 41)


async def test_a_hold_moves_the_heartbeat_but_never_says_valid(plant: Any, kit: Any) -> None:
    async with kit.session(plant.port) as session:
        await session.wait_linked(5.0)
        sink = OpcUaAdviceSink(session)
        await sink.publish(advice(7), 41, 1.0)
        plant.service.writes.clear()
        delivery = await sink.publish(advice(8, valid=False), 42, 1.0)
    assert (delivery.valid, delivery.complete) == (False, True)
    assert {"ADV.valid": True} not in plant.last_writes()
    assert plant.value("ADV.valid") is False
    assert plant.value("ADV.heartbeat") == 42
    assert plant.value("ADV.FIC-2103.target") == 7860.0
    assert plant.value("ADV.standing") == "holding"


@pytest.mark.parametrize(
    "name",
    ["FIC-2103.target", "TIC-2107.reason", "standing", "made_at", "valid_until", "heartbeat"],
)
async def test_one_refused_item_withdraws_the_whole(plant: Any, kit: Any, name: str) -> None:
    plant.service.refuse[f"ADV.{name}"] = DENIED
    async with kit.session(plant.port) as session:
        await session.wait_linked(5.0)
        delivery = await OpcUaAdviceSink(session).publish(advice(), 41, 1.0)
        await OpcUaTagSource(session, kit.clock).read(8, 1.0)  # reads go on
    assert (delivery.valid, delivery.complete) == (False, False)
    assert f"{name} (BadUserAccessDenied)" in str(delivery.problem)
    assert (name, DENIED) in {(item.node, item.status_code) for item in delivery.items}
    assert {"ADV.valid": True} not in plant.last_writes()
    assert {"ADV.valid": False} in plant.last_writes()[1:]
    assert plant.value("ADV.valid") is False


async def test_a_refused_rise_of_valid_is_a_failed_delivery(plant: Any, kit: Any) -> None:
    plant.service.refuse["ADV.valid"] = DENIED
    plant.service.refuse_value["ADV.valid"] = True
    async with kit.session(plant.port) as session:
        await session.wait_linked(5.0)
        delivery = await OpcUaAdviceSink(session).publish(advice(), 41, 1.0)
    assert (delivery.valid, delivery.complete) == (False, False)
    assert plant.last_writes()[-1] == {
        "ADV.standing": "silent",
        "ADV.reason": "not_published",
        "ADV.sentence": "Advice withdrawn: the server refused valid (BadUserAccessDenied).",
    }


@pytest.mark.parametrize("target", [math.nan, math.inf, -math.inf])
async def test_what_is_not_finite_is_never_sent(plant: Any, kit: Any, target: float) -> None:
    async with kit.session(plant.port) as session:
        await session.wait_linked(5.0)
        delivery = await OpcUaAdviceSink(session).publish(advice(target=target), 41, 1.0)
    assert (delivery.valid, delivery.complete) == (False, False)
    assert "not finite" in str(delivery.problem)
    sent = [value for values in plant.last_writes() for value in values.values()]
    assert all(math.isfinite(value) for value in sent if isinstance(value, float))
    assert not any("ADV.FIC-2103.target" in values for values in plant.last_writes())


async def test_a_withdrawal_says_silent_and_why(plant: Any, kit: Any) -> None:
    async with kit.session(plant.port) as session:
        await session.wait_linked(5.0)
        sink = OpcUaAdviceSink(session)
        await sink.publish(advice(7), 41, 1.0)
        plant.service.writes.clear()
        delivery = await sink.withdraw("stopping", "The advisor stops.", 1.0)
    assert (delivery.cycle, delivery.valid, delivery.complete) == (7, False, True)
    assert plant.last_writes() == [
        {"ADV.valid": False},
        {"ADV.standing": "silent", "ADV.reason": "stopping", "ADV.sentence": "The advisor stops."},
    ]


async def test_a_user_without_rights_is_told_so_and_no_other_user_is_tried(
    plant: Any, kit: Any
) -> None:
    async with kit.session(plant.port, user="board", password="board word") as session:
        await session.wait_linked(5.0)
        delivery = await OpcUaAdviceSink(session).publish(advice(), 41, 1.0)
    assert (delivery.valid, delivery.complete) == (False, False)
    assert "refused valid (BadUserAccessDenied)" in str(delivery.problem)
    assert {user for user, _ in plant.service.writes} == {"board"}


async def test_a_missing_advisory_node_withholds_advice_and_names_it(plant: Any, kit: Any) -> None:
    nodes = dataclasses.replace(kit.ADVICE, made_at=kit.node("ADV.gone"))
    async with kit.session(plant.port, advice=nodes) as session:
        await session.wait_linked(5.0)
        delivery = await OpcUaAdviceSink(session).publish(advice(), 41, 1.0)
        await OpcUaTagSource(session, kit.clock).read(8, 1.0)
    assert (delivery.valid, delivery.complete) == (False, False)
    assert "s=ADV.gone not found" in str(delivery.problem)
    assert plant.last_writes()[0] == {"ADV.valid": False}
    assert {"ADV.valid": True} not in plant.last_writes()


async def test_without_a_session_nothing_is_written_and_nothing_raised(
    relay: Any, plant: Any, kit: Any
) -> None:
    async with kit.session(relay.port) as session:
        await session.wait_linked(5.0)
        relay.silent = True
        relay.cut()
        await kit.eventually(lambda: session._link is None)
        sink = OpcUaAdviceSink(session)
        delivery = await sink.publish(advice(), 41, 1.0)
        withdrawal = await sink.withdraw("stopping", "The advisor stops.", 1.0)
    assert (delivery.cycle, delivery.valid, delivery.complete) == (7, False, False)
    assert "reconnecting" in str(delivery.problem)
    assert withdrawal.complete is False
    assert plant.last_writes() == []


async def test_an_unanswered_last_write_is_reported_as_possibly_standing(
    relay: Any, plant: Any, kit: Any
) -> None:
    async with kit.session(relay.port) as session:
        await session.wait_linked(5.0)
        # Silent from the moment the server has taken the last write.
        relay.silent_after = lambda: {"ADV.valid": True} in plant.last_writes()
        began = time.monotonic()
        delivery = await OpcUaAdviceSink(session).publish(advice(), 41, 0.5)
        assert time.monotonic() - began < 0.8
        with pytest.raises(PlantUnreachableError, match="no answer to a withdrawal"):
            session.link()
    assert (delivery.valid, delivery.complete) == (True, False)
    assert "valid=true may stand at the server until valid_until" in str(delivery.problem)
    assert plant.value("ADV.valid") is True


async def test_nothing_but_advisory_nodes_passes_the_fence(plant: Any, kit: Any) -> None:
    connection = await open_connection(kit.address(plant.port))
    try:
        link = await make_link(connection, kit.TAGS, kit.ADVICE, {})
        valid, foreign = plant.id("ADV.valid"), plant.id("TI-0000")
        expanded = ua.ExpandedNodeId(
            valid.Identifier, valid.NamespaceIndex, NamespaceUri="urn:elsewhere"
        )
        for node in (foreign, expanded, ua.NodeId("ADV.valid", valid.NamespaceIndex + 1)):
            with pytest.raises(FenceError):
                await link.fence.send([(valid, False), (node, False)])
        assert plant.last_writes() == []
        assert await link.fence.send([(valid, False)]) == [0]
    finally:
        await connection.close()


@pytest.mark.parametrize(
    ("field", "name", "words"),
    [
        ("reason", "TI-0005", "same node as tag TI-0005"),
        ("sentence", "ADV.reason", "same node as advisory node reason"),
    ],
)
async def test_an_advisory_node_that_is_something_else_too_is_refused(
    plant: Any, kit: Any, field: str, name: str, words: str
) -> None:
    # Spelt differently on purpose: one colon of the URI is escaped.
    text = kit.node(name).replace("urn:test", "urn%3Atest")
    nodes = dataclasses.replace(kit.ADVICE, **{field: text})
    async with kit.session(plant.port, advice=nodes) as session:
        await kit.eventually(lambda: session._failures > 0)
        with pytest.raises(PlantMismatchError, match=words):
            await OpcUaTagSource(session, kit.clock).read(1, 1.0)
        delivery = await OpcUaAdviceSink(session).publish(advice(), 41, 1.0)
    assert delivery.complete is False
    assert plant.last_writes() == []
