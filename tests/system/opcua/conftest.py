"""A plant's server made for tests, and a relay that can go silent between it and us.

Both run on an event loop of their own, in another thread: what is left on a test's
loop is the client's. Starting a server costs two seconds, so one serves the whole
folder, and is put back in order before each test.
"""

from __future__ import annotations

import asyncio
import random
import threading
from collections.abc import Callable, Coroutine, Iterator
from dataclasses import dataclass, field
from datetime import UTC, datetime
from pathlib import Path
from typing import Any, TypeVar

import pytest
from asyncua import Server, ua
from asyncua.crypto.permission_rules import User, UserRole
from asyncua.server.address_space import AttributeService
from asyncua.server.user_managers import UserManager

from edgectl.clock import PlantClock
from edgectl.opcua.address import AdviceNodes, MoveNodes, ServerAddress, TagNode
from edgectl.opcua.session import Backoff, PlantSession
from edgectl.records.units import UNECE_NAMESPACE, UNITS

T = TypeVar("T")
PLANT = "urn:test:plant"
OTHER = "urn:test:vendor"
NAMESPACES = ("http://opcfoundation.org/UA/", "urn:test:server", PLANT, OTHER)
AFTER_UPGRADE = 99.0
PASSWORDS = {"advisor": "advisor word", "board": "board word"}
STAMP = datetime(2031, 3, 1, 6, 0, tzinfo=UTC)
TAG_COUNT = 60
QUICK = Backoff(first_s=0.02, most_s=0.05, steady_after_s=0.0, recheck_s=0.05)
V = ua.VariantType
ADVISORY = {
    "ADV.valid": V.Boolean,
    "ADV.valid_until": V.DateTime,
    "ADV.made_at": V.DateTime,
    "ADV.cycle": V.Int64,
    "ADV.heartbeat": V.UInt32,
    "ADV.standing": V.String,
    "ADV.reason": V.String,
    "ADV.sentence": V.String,
    "ADV.FIC-2103.target": V.Double,
    "ADV.FIC-2103.reason": V.String,
    "ADV.TIC-2107.target": V.Float,
    "ADV.TIC-2107.reason": V.String,
}
BLANK = {V.Boolean: False, V.DateTime: STAMP, V.String: ""}


def node(name: str) -> str:
    return f"nsu={PLANT};s={name}"


def tag(name: str, **changes: Any) -> TagNode:
    values = {"unit": "degC", "low": 0.0, "high": 200.0, "required": False} | changes
    return TagNode(tag=name, node=values.pop("node", node(name)), **values)


TAGS = tuple(tag(f"TI-{number:04d}", required=number < 3) for number in range(TAG_COUNT))
ADVICE = AdviceNodes(
    **{name.removeprefix("ADV."): node(name) for name in list(ADVISORY)[:8]},
    moves={
        mv: MoveNodes(node(f"ADV.{mv}.target"), node(f"ADV.{mv}.reason"))
        for mv in ("FIC-2103", "TIC-2107")
    },
)


class Background:
    """An event loop in another thread, for what stands at the other end of the wire."""

    def __init__(self) -> None:
        self.loop = asyncio.new_event_loop()
        self._thread = threading.Thread(target=self.loop.run_forever, daemon=True)
        self._thread.start()

    def run(self, work: Coroutine[Any, Any, T]) -> T:
        """The result of a coroutine that runs over there; waits for it."""
        return asyncio.run_coroutine_threadsafe(work, self.loop).result(15.0)

    def close(self) -> None:
        self.loop.call_soon_threadsafe(self.loop.stop)
        self._thread.join(5.0)
        self.loop.close()


class Accounts(UserManager):
    def get_user(
        self, iserver: Any, username: Any = None, password: Any = None, certificate: Any = None
    ) -> User | None:
        if username is None:
            return User(role=UserRole.Anonymous, name="anonymous")
        known = PASSWORDS.get(username) == password
        return User(role=UserRole.User, name=username) if known else None


class RecordingService(AttributeService):
    """Notes every Read and Write call of clients; refuses, item by item, what it is told to."""

    def __init__(self, aspace: Any) -> None:
        super().__init__(aspace)
        self.read_sizes: list[int] = []
        self.writes: list[tuple[str, dict[str, Any]]] = []
        self.refuse: dict[str, int] = {}
        self.refuse_value: dict[str, Any] = {}

    def read(self, params: Any) -> Any:
        # The server's own clock task reads its status structure through here once a second.
        own = ua.NodeId(ua.ObjectIds.Server_ServerStatus)
        if [item.NodeId for item in params.NodesToRead] != [own]:
            self.read_sizes.append(len(params.NodesToRead))
        return super().read(params)

    async def write(self, params: Any, user: Any = None) -> Any:
        if user is None or user.role is UserRole.Admin:
            return await super().write(params)
        items = params.NodesToWrite
        values = {str(item.NodeId.Identifier): item.Value.Value.Value for item in items}
        self.writes.append((user.name, values))
        return [await self._write_one(item, user) for item in items]

    async def _write_one(self, item: Any, user: Any) -> Any:
        name, value = str(item.NodeId.Identifier), item.Value
        bad = ua.StatusCodes
        if (
            name in self.refuse
            and self.refuse_value.get(name, value.Value.Value) == value.Value.Value
        ):
            return ua.StatusCode(self.refuse[name])
        if user.name != "advisor" or not name.startswith("ADV."):
            return ua.StatusCode(bad.BadUserAccessDenied)
        if value.Encoding & ~1:  # more than the value itself came along
            return ua.StatusCode(bad.BadWriteNotSupported)
        if value.Value.VariantType is not ADVISORY[name]:
            return ua.StatusCode(bad.BadTypeMismatch)
        params = ua.WriteParameters(NodesToWrite=[item])
        return (await super().write(params))[0]


@dataclass
class Plant:
    """A server with 60 tags and the advisory nodes."""

    background: Background
    server: Server
    service: RecordingService
    rare: list[Any] = field(default_factory=list)

    @property
    def port(self) -> int:
        return self.server.bserver._server.sockets[0].getsockname()[1]

    def id(self, name: str) -> ua.NodeId:
        return ua.NodeId(name, NAMESPACES.index(PLANT))

    def show(
        self,
        name: str | int,
        value: Any,
        kind: ua.VariantType = V.Double,
        status: int = 0,
        source: datetime | None = STAMP,
        server_time: datetime | None = STAMP,
    ) -> None:
        """Set a node's value, past every type check: a plant's server may hold anything."""
        node_id = self.id(name) if isinstance(name, str) else ua.NodeId(name)
        attribute = self.server.iserver.aspace[node_id].attributes[ua.AttributeIds.Value]
        attribute.value = ua.DataValue(
            ua.Variant(value, kind), ua.StatusCode(status), source, server_time
        )

    def value(self, name: str) -> Any:
        data = self.server.iserver.aspace.read_attribute_value(self.id(name), ua.AttributeIds.Value)
        return data.Value.Value

    def add(
        self,
        name: str,
        value: Any,
        kind: ua.VariantType,
        scale: tuple[str, float, float] | None = None,
    ) -> Any:
        """One more variable; gone again at the end of the test."""

        async def work() -> Any:
            objects = self.server.nodes.objects
            added = await objects.add_variable(self.id(name), name, value, kind)
            if scale is not None:
                await add_scale(added, *scale)
            return added

        self.rare.append(self.background.run(work()))
        return self.rare[-1]

    def rescale(self, variable: Any, low: float, high: float) -> None:
        async def work() -> None:
            span = await variable.get_child("0:EURange")
            await span.write_value(ua.Range(Low=low, High=high))

        self.background.run(work())

    def allow_writing(self, name: str, allowed: bool) -> None:
        """What the server says of a node's access level."""
        node_of = self.server.get_node(self.id(name))
        self.background.run(node_of.set_writable(allowed))

    def upgrade(self) -> None:
        """Another order of the namespaces; a tag of the old index is now another one's."""
        self.show(ua.ObjectIds.Server_NamespaceArray, [*NAMESPACES[:2], OTHER, PLANT], V.String)

    def reset(self) -> None:
        for added in self.rare:
            self.background.run(self.server.delete_nodes([added], recursive=True))
        self.rare.clear()
        self.service.refuse.clear()
        self.service.refuse_value.clear()
        for number, item in enumerate(TAGS):
            self.show(item.tag, 20.0 + number)
        for name, kind in ADVISORY.items():
            self.show(name, BLANK.get(kind, 0), kind)
        self.show(ua.ObjectIds.Server_ServerStatus_State, 0, V.Int32)
        self.show(ua.ObjectIds.Server_ServiceLevel, 255, V.Byte)
        self.show(ua.ObjectIds.Server_NamespaceArray, [*NAMESPACES], V.String)
        self.limit_read(10000)
        self.service.writes.clear()
        self.service.read_sizes.clear()

    def limit_read(self, most: int) -> None:
        limit = ua.ObjectIds.Server_ServerCapabilities_OperationLimits_MaxNodesPerRead
        self.show(limit, most, V.UInt32)

    def last_writes(self) -> list[dict[str, Any]]:
        """What each Write call carried, by node."""
        return [values for _, values in self.service.writes]


async def start_plant(background: Background) -> Plant:
    server = Server(user_manager=Accounts())
    await server.init()
    server.set_endpoint("opc.tcp://127.0.0.1:0/")
    server.set_security_policy([ua.SecurityPolicyType.NoSecurity])
    server.set_identity_tokens([ua.AnonymousIdentityToken, ua.UserNameIdentityToken])
    for uri in NAMESPACES[2:]:
        await server.register_namespace(uri)
    service = RecordingService(server.iserver.aspace)
    server.iserver.attribute_service = service
    plant = Plant(background, server, service)
    for item in TAGS:
        variable = await server.nodes.objects.add_variable(
            plant.id(item.tag), item.tag, 0.0, V.Double
        )
        await add_scale(variable, "degC", 0.0, 200.0)
    for name, kind in ADVISORY.items():
        variable = await server.nodes.objects.add_variable(
            plant.id(name), name, BLANK.get(kind, 0), kind
        )
        await variable.set_writable()
    moved = ua.NodeId(TAGS[0].tag, NAMESPACES.index(OTHER))
    await server.nodes.objects.add_variable(moved, "after the upgrade", AFTER_UPGRADE, V.Double)
    await server.start()
    return plant


async def add_scale(variable: Any, unit: str, low: float, high: float) -> None:
    known = UNITS[unit]
    eu = ua.EUInformation(
        NamespaceUri=UNECE_NAMESPACE, UnitId=known.unit_id, DisplayName=ua.LocalizedText(unit)
    )
    await variable.add_property(ua.NodeId(), "0:EngineeringUnits", eu)
    await variable.add_property(ua.NodeId(), "0:EURange", ua.Range(Low=low, High=high))


@pytest.fixture(scope="session")
def background() -> Iterator[Background]:
    background = Background()
    yield background
    background.close()


@pytest.fixture(scope="session")
def shared_plant(background: Background) -> Iterator[Plant]:
    plant = background.run(start_plant(background))
    yield plant
    background.run(plant.server.stop())


@pytest.fixture
def plant(shared_plant: Plant) -> Plant:
    shared_plant.reset()
    return shared_plant


class Relay:
    """A TCP relay on loopback that forwards, goes silent, cuts, or changes its target."""

    def __init__(self, background: Background, port: int) -> None:
        self.target = port
        self.silent = False
        self.silent_after: Callable[[], bool] = lambda: False
        self._background = background
        self._writers: set[asyncio.StreamWriter] = set()
        self._pumps: set[asyncio.Task[None]] = set()
        self._server = background.run(self._start())
        self.port = int(self._server.sockets[0].getsockname()[1])

    def close(self) -> None:
        self._background.run(self._close())

    def cut(self) -> None:
        """Reset every connection."""
        self._background.run(self._cut())

    async def _start(self) -> asyncio.Server:
        return await asyncio.start_server(self._accept, "127.0.0.1", 0)

    async def _close(self) -> None:
        self._server.close()
        await self._cut()
        await asyncio.gather(*self._pumps, return_exceptions=True)
        await self._server.wait_closed()

    async def _cut(self) -> None:
        for writer in self._writers:
            writer.transport.abort()

    async def _accept(self, reader: asyncio.StreamReader, writer: asyncio.StreamWriter) -> None:
        try:
            there_reader, there_writer = await asyncio.open_connection("127.0.0.1", self.target)
        except OSError:
            writer.close()
            return
        self._writers |= {writer, there_writer}
        for source, sink in ((reader, there_writer), (there_reader, writer)):
            task = asyncio.create_task(self._pump(source, sink))  # noqa: TID251 - kept below
            self._pumps.add(task)
            task.add_done_callback(self._pumps.discard)

    async def _pump(self, source: asyncio.StreamReader, sink: asyncio.StreamWriter) -> None:
        try:
            while data := await source.read(65536):
                if not (self.silent or self.silent_after()):
                    sink.write(data)
        except OSError:
            pass
        finally:
            sink.close()
            self._writers.discard(sink)


@pytest.fixture
def relay(background: Background, plant: Plant) -> Iterator[Relay]:
    between = Relay(background, plant.port)
    yield between
    between.close()


def address(port: int, **changes: Any) -> ServerAddress:
    values = {
        "endpoint": f"opc.tcp://127.0.0.1:{port}/",
        "allow_insecure": True,
        "user": "advisor",
        "password": PASSWORDS["advisor"],
        "step_timeout_s": 0.5,
        "connect_timeout_s": 2.0,
    }
    return ServerAddress(**(values | changes))


def session(
    port: int,
    tags: tuple[TagNode, ...] = TAGS,
    advice: AdviceNodes | None = ADVICE,
    backoff: Backoff = QUICK,
    **changes: Any,
) -> PlantSession:
    return PlantSession(address(port, **changes), tags, advice, random.Random(7), backoff)


async def eventually(condition: Callable[[], bool], within_s: float = 3.0) -> None:
    """Look again until the condition holds; fail when it does not in time."""
    async with asyncio.timeout(within_s):
        while not condition():  # noqa: ASYNC110 - nobody announces what a server has done
            await asyncio.sleep(0.005)


def open_files() -> int:
    return len(list(Path("/proc/self/fd").iterdir()))


class Kit:
    """What the tests of this folder share, as a fixture: conftest files are not imported."""

    TAGS, ADVICE, ADVISORY, STAMP, PLANT, QUICK = TAGS, ADVICE, ADVISORY, STAMP, PLANT, QUICK
    AFTER_UPGRADE = AFTER_UPGRADE
    node, tag = staticmethod(node), staticmethod(tag)
    address, session = staticmethod(address), staticmethod(session)
    eventually, open_files = staticmethod(eventually), staticmethod(open_files)
    clock = PlantClock.real()


@pytest.fixture(scope="session")
def kit() -> type[Kit]:
    return Kit
