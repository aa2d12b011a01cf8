"""Losing the plant's server and finding it again."""

from __future__ import annotations

import asyncio
import gc
import time
from typing import Any

import pytest

from edgectl.opcua.connection import ConnectRefusedError, Refusal, open_connection
from edgectl.opcua.session import Backoff
from edgectl.opcua.source import OpcUaTagSource
from edgectl.ports import PlantUnreachableError

pytestmark = pytest.mark.asyncio
SLOW = Backoff(first_s=40.0, most_s=60.0)


async def free_port() -> int:
    server = await asyncio.start_server(lambda *_: None, "127.0.0.1", 0)
    port = int(server.sockets[0].getsockname()[1])
    server.close()
    await server.wait_closed()
    return port


async def refusal(**changes: Any) -> ConnectRefusedError:
    kit = changes.pop("kit")
    with pytest.raises(ConnectRefusedError) as caught:
        await open_connection(kit.address(**changes))
    return caught.value


async def test_nobody_listens(kit: Any) -> None:
    error = await refusal(kit=kit, port=await free_port())
    assert error.refusal is Refusal.NOT_LISTENING
    assert "nothing listens at opc.tcp://127.0.0.1" in str(error)
    assert not error.needs_a_person


async def test_something_else_listens(kit: Any) -> None:
    async def web_server(reader: asyncio.StreamReader, writer: asyncio.StreamWriter) -> None:
        await reader.read(100)
        writer.write(b"HTTP/1.1 400 Bad Request\r\n\r\n")
        writer.close()

    async with await asyncio.start_server(web_server, "127.0.0.1", 0) as server:
        error = await refusal(kit=kit, port=server.sockets[0].getsockname()[1])
    assert error.refusal is Refusal.NOT_OPC_UA
    assert "is it an OPC UA server?" in str(error)


async def test_nobody_answers(relay: Any, kit: Any) -> None:
    relay.silent = True
    began = time.monotonic()
    error = await refusal(kit=kit, port=relay.port)
    assert error.refusal is Refusal.NO_ANSWER
    assert time.monotonic() - began < 3.0


async def test_wrong_password(plant: Any, kit: Any) -> None:
    error = await refusal(kit=kit, port=plant.port, password="guess")
    assert error.refusal is Refusal.IDENTITY
    assert error.needs_a_person
    assert "refused user 'advisor'" in str(error)
    assert "guess" not in str(error)
    assert "password_env" in str(error)


@pytest.mark.parametrize("policy", ["Basic256Sha256", "Aes256_Sha256_RsaPss"])
async def test_a_server_without_the_security_asked_for_gets_no_session(
    plant: Any, kit: Any, policy: str
) -> None:
    error = await refusal(kit=kit, port=plant.port, security=policy)
    assert error.refusal is Refusal.SECURITY
    assert not plant.service.read_sizes
    assert f"offers None, but the site file asks for security '{policy}'" in str(error)


async def test_no_security_must_be_said(plant: Any, kit: Any) -> None:
    error = await refusal(kit=kit, port=plant.port, allow_insecure=False)
    assert error.refusal is Refusal.SECURITY
    assert "allow_insecure = true" in str(error)
    assert not plant.service.read_sizes


async def test_a_read_while_reconnecting_fails_at_once_and_says_when(kit: Any) -> None:
    async with kit.session(await free_port(), backoff=SLOW) as session:
        await kit.eventually(lambda: session._failures == 1)
        began = time.monotonic()
        with pytest.raises(PlantUnreachableError, match=r"attempt 2, next in [234]\d s"):
            await OpcUaTagSource(session, kit.clock).read(1, 2.0)
        assert time.monotonic() - began < 0.1


async def test_wrong_settings_are_tried_at_the_slowest_pace(plant: Any, kit: Any) -> None:
    async with kit.session(plant.port, password="guess", backoff=SLOW) as session:
        await kit.eventually(lambda: session._failures == 1)
        with pytest.raises(PlantUnreachableError, match=r"next in (60|59) s"):
            session.link()


async def test_a_server_that_comes_later_is_found(plant: Any, relay: Any, kit: Any) -> None:
    relay.target = await free_port()
    async with kit.session(relay.port) as session:
        await kit.eventually(lambda: session._failures >= 2)
        relay.target = plant.port
        await session.wait_linked(5.0)
        await OpcUaTagSource(session, kit.clock).read(1, 1.0)


async def test_namespaces_in_another_order_after_an_upgrade(
    plant: Any, relay: Any, kit: Any
) -> None:
    async with kit.session(relay.port, tags=kit.TAGS[:1], advice=None) as session:
        await session.wait_linked(5.0)
        source = OpcUaTagSource(session, kit.clock)
        assert (await source.read(1, 1.0)).readings[0].value == 20.0
        plant.upgrade()
        relay.cut()
        await kit.eventually(lambda: session._link is None)
        with pytest.raises(PlantUnreachableError, match="reconnecting"):
            await source.read(2, 1.0)
        await session.wait_linked(5.0)
        assert (await source.read(3, 1.0)).readings[0].value == kit.AFTER_UPGRADE


async def test_a_connection_cut_in_the_middle_of_a_read(relay: Any, kit: Any) -> None:
    async with kit.session(relay.port) as session:
        await session.wait_linked(5.0)
        source = OpcUaTagSource(session, kit.clock)
        relay.silent = True
        reading = asyncio.ensure_future(source.read(1, 2.0))
        await asyncio.sleep(0)
        relay.cut()
        with pytest.raises(PlantUnreachableError, match=r"read failed|no answer"):
            await reading
        relay.silent = False
        await session.wait_linked(5.0)
        await source.read(2, 1.0)


async def test_a_black_hole_is_bounded_by_the_deadline(relay: Any, kit: Any) -> None:
    async with kit.session(relay.port) as session:
        await session.wait_linked(5.0)
        source = OpcUaTagSource(session, kit.clock)
        relay.silent = True
        began = time.monotonic()
        with pytest.raises(PlantUnreachableError, match=r"no answer to a read within 0\.2 s"):
            await source.read(1, 0.2)
        assert time.monotonic() - began < 0.4
        with pytest.raises(PlantUnreachableError, match="reconnecting"):
            await source.read(2, 0.2)
        assert time.monotonic() - began < 0.5
        relay.silent = False
        await session.wait_linked(5.0)
        await source.read(3, 1.0)


async def test_reconnecting_leaks_neither_tasks_nor_files(plant: Any, relay: Any, kit: Any) -> None:
    async def settled() -> tuple[int, int]:
        gc.collect()
        return len(asyncio.all_tasks()), kit.open_files()

    before = await settled()
    async with kit.session(relay.port) as session:
        await session.wait_linked(5.0)
        once = await settled()
        for _ in range(5):
            link = session.link()
            link.connection.abandon("drill")
            await kit.eventually(lambda link=link: session._link not in (None, link))
        await kit.eventually(lambda: len(asyncio.all_tasks()) <= once[0])
        await kit.eventually(lambda: kit.open_files() <= once[1])
    await kit.eventually(lambda: len(asyncio.all_tasks()) <= before[0])
    await kit.eventually(lambda: kit.open_files() <= before[1])


async def test_failed_attempts_leak_nothing_either(plant: Any, kit: Any) -> None:
    tasks, files = len(asyncio.all_tasks()), kit.open_files()
    for _ in range(3):
        await refusal(kit=kit, port=plant.port, password="guess")
    await kit.eventually(lambda: len(asyncio.all_tasks()) <= tasks)
    await kit.eventually(lambda: kit.open_files() <= files)


async def test_a_bug_in_the_supervisor_is_not_taken_for_a_lost_plant(
    plant: Any, kit: Any, monkeypatch: pytest.MonkeyPatch
) -> None:
    def broken(*_: Any) -> None:
        raise RuntimeError("a bug")

    monkeypatch.setattr("edgectl.opcua.session.make_link", broken)
    session = kit.session(plant.port)
    await session.__aenter__()
    await kit.eventually(session._task.done)
    with pytest.raises(RuntimeError, match="a bug"):
        session.link()
    with pytest.raises(RuntimeError, match="a bug"):
        await session.__aexit__(None, None, None)
