"""The simulated plant's OPC UA server, met by a real client on loopback."""

from __future__ import annotations

import io
import json
import math
from collections.abc import AsyncIterator, Mapping
from contextlib import asynccontextmanager
from datetime import UTC, datetime
from typing import Any

import pytest
import pytest_asyncio
from asyncua import ua
from asyncua.client.client import Client
from asyncua.ua.attribute_ids import AttributeIds
from asyncua.ua.status_codes import StatusCodes
from asyncua.ua.uaerrors import UaError

from edgectl.records.units import UNECE_NAMESPACE, UNITS
from sim_server.advisory import ADVISORY_KINDS, SWITCH, USABLE
from sim_server.crew import Crew, CrewMode
from sim_server.faults import Drill, DrillName
from sim_server.nodes import NAMESPACE, VARIANTS
from sim_server.server import PlantServer, standard_server
from sim_server.signals import BAD_SENSOR_FAILURE, GOOD, Signal, SignalSpec
from sim_server.simulation import Simulation
from sim_server.watchdog import AdviceWatchdog
from sim_server.writelog import WriteLog

START = datetime(2031, 3, 1, 6, 0, tzinfo=UTC).timestamp()
PASSWORDS = {"board": "board word", "advisor": "advisor word"}


class StubPlant:
    """Eight signals and no physics: enough to meet the server."""

    specs = (
        SignalSpec("TI-2107.PV", "tray 30 temperature", "degC", 50.0, 130.0),
        SignalSpec("AI-2116.PV", "bottoms methanol", "wt ppm", 0.0, 5000.0),
        SignalSpec("FIC-2103.PV", "reflux flow", "kg/h", 0.0, 15000.0),
        *(
            spec
            for loop, unit, low, high in (
                ("FIC-2103", "kg/h", 0.0, 15000.0),
                ("TIC-2107", "degC", 50.0, 130.0),
            )
            for spec in (
                SignalSpec(f"{loop}.SP", "setpoint", unit, low, high, board_writable=True),
                SignalSpec(
                    f"{loop}.MODE", "mode", "-", 0.0, 2.0, integer=True, board_writable=True
                ),
            )
        ),
    )

    def __init__(self) -> None:
        self.time_s = 0.0
        self._values = {
            "TI-2107.PV": 96.1,
            "AI-2116.PV": 310.0,
            "FIC-2103.PV": 7937.0,
            "FIC-2103.SP": 7940.0,
            "FIC-2103.MODE": 1.0,
            "TIC-2107.SP": 102.0,
            "TIC-2107.MODE": 1.0,
        }

    @property
    def signals(self) -> Mapping[str, Signal]:
        return {name: Signal(value, GOOD, self.time_s) for name, value in self._values.items()}

    def advance(self, until_s: float) -> None:
        self.time_s = until_s

    def write(self, name: str, value: float) -> None:
        spec = next(spec for spec in self.specs if spec.name == name)
        if not (spec.board_writable and spec.low <= value <= spec.high):
            raise ValueError(f"{name} does not take {value}")
        self._values[name] = value

    def true_values(self) -> Mapping[str, float]:
        return {"reboiler_duty_kw": 5000.0, "distillate_kg_h": 6800.0}


class Rehearsal:
    """A server whose plant time the test moves by hand."""

    def __init__(self, server: PlantServer, simulation: Simulation, log: io.StringIO) -> None:
        self.server = server
        self.simulation = simulation
        self._log = log

    async def steps(self, plant_s: float) -> None:
        until = self.simulation.plant.time_s + plant_s
        while self.simulation.plant.time_s < until:
            self.simulation.step()
        await self.server.follow_drill()
        await self.server.publish()

    async def server_endpoints(self) -> list[ua.EndpointDescription]:
        return await Client(self.server.endpoint).connect_and_get_server_endpoints()

    def plant_time(self) -> float:
        return START + self.simulation.plant.time_s

    def last_writes(self, count: int) -> list[dict[str, Any]]:
        """The newest entries of the write log, oldest first."""
        return [json.loads(line) for line in self._log.getvalue().splitlines()[-count:]]


@asynccontextmanager
async def rehearsal(
    drill: DrillName = DrillName.NONE, crew: CrewMode = CrewMode.IGNORES
) -> AsyncIterator[Rehearsal]:
    plant = StubPlant()
    log = io.StringIO()

    def plant_time() -> float:
        return START + plant.time_s

    write_log = WriteLog(log, lambda: (plant_time(), 0.0))
    simulation = Simulation(
        plant, Crew(crew, 1), Drill(drill, 60.0, 60.0), AdviceWatchdog(), plant_time, write_log
    )
    opcua = await standard_server(PASSWORDS)
    server = PlantServer(opcua, simulation, START, plant_time, write_log)
    await server.start()
    try:
        yield Rehearsal(server, simulation, log)
    finally:
        await server.stop()


@asynccontextmanager
async def client(
    plant: Rehearsal, user: str | None = None, password: str | None = None
) -> AsyncIterator[Client]:
    connection = Client(plant.server.endpoint)
    if user is not None:
        connection.set_user(user)
        connection.set_password(PASSWORDS.get(user, "") if password is None else password)
    async with connection:
        yield connection


async def node_id(connection: Client, name: str) -> ua.NodeId:
    return ua.NodeId(name, await connection.get_namespace_index(NAMESPACE))


async def read(
    connection: Client, name: str, attribute: AttributeIds = AttributeIds.Value
) -> ua.DataValue:
    params = ua.ReadParameters(
        TimestampsToReturn=ua.TimestampsToReturn.Both,
        NodesToRead=[ua.ReadValueId(await node_id(connection, name), attribute)],
    )
    return (await connection.uaclient.read(params))[0]


async def write(connection: Client, *items: tuple[str, object, ua.VariantType]) -> list[int]:
    """One Write call of values only; each item's status code."""
    codes = await connection.uaclient.write_attributes(
        [await node_id(connection, name) for name, _, _ in items],
        [ua.DataValue(ua.Variant(value, kind), StatusCode=None) for _, value, kind in items],
    )
    return [code.value for code in codes]


DOUBLE = ua.VariantType.Double


@pytest_asyncio.fixture(loop_scope="module", scope="module")
async def plant() -> AsyncIterator[Rehearsal]:
    """One undrilled plant for the tests that do not mind each other: starting a server is slow."""
    async with rehearsal() as shared:
        yield shared


@pytest.mark.asyncio(loop_scope="module")
async def test_measurements_have_type_range_unit_status_and_plant_time(plant: Rehearsal) -> None:
    async with client(plant) as reader:
        await plant.steps(10.0)
        now = plant.plant_time()
        for spec in StubPlant.specs:
            node = reader.get_node(await node_id(reader, spec.name))
            assert await node.read_type_definition() == ua.NodeId(ua.ObjectIds.AnalogItemType)
            kind = ua.ObjectIds.Int32 if spec.integer else ua.ObjectIds.Double
            assert await node.read_data_type() == ua.NodeId(kind)
            limits = await (await node.get_child("0:EURange")).read_value()
            assert (limits.Low, limits.High) == (spec.low, spec.high)
            units = await (await node.get_child("0:EngineeringUnits")).read_value()
            assert units.UnitId == UNITS[spec.unit].unit_id
            assert units.NamespaceUri == UNECE_NAMESPACE
            assert units.DisplayName.Text == spec.unit
            value = await read(reader, spec.name)
            assert value.Value is not None
            assert value.Value.Value == plant.simulation.signals[spec.name].value
            assert value.Value.VariantType.value == kind
            assert value.SourceTimestamp is not None
            assert value.SourceTimestamp.timestamp() == now
            assert value.ServerTimestamp is not None
            assert value.ServerTimestamp.timestamp() == now


@pytest.mark.asyncio(loop_scope="module")
async def test_the_column_can_be_browsed_from_objects(plant: Rehearsal) -> None:
    async with client(plant) as reader:
        index = await reader.get_namespace_index(NAMESPACE)
        column = await reader.nodes.objects.get_child(f"{index}:Column C-2101")
        found = await column.get_child([f"{index}:FIC-2103", f"{index}:SP"])
        assert found.nodeid == await node_id(reader, "FIC-2103.SP")
        advisory = await column.get_child(f"{index}:Advisory")
        names = {node.nodeid.Identifier for node in await advisory.get_children()}
        assert names == {*ADVISORY_KINDS, USABLE}


@pytest.mark.asyncio(loop_scope="module")
async def test_the_servers_clock_is_plant_time(plant: Rehearsal) -> None:
    async with client(plant) as reader:
        await plant.steps(10.0)
        now = await reader.get_node(ua.ObjectIds.Server_ServerStatus_CurrentTime).read_value()
        status = await reader.get_node(ua.ObjectIds.Server_ServerStatus).read_value()
        assert now.timestamp() == status.CurrentTime.timestamp() == plant.plant_time()
        assert status.State == ua.ServerState.Running


@pytest.mark.asyncio(loop_scope="module")
async def test_anonymous_reads_everything_and_writes_nothing(plant: Rehearsal) -> None:
    async with client(plant) as reader:
        codes = await write(
            reader,
            ("FIC-2103.SP", 8000.0, DOUBLE),
            ("ADV.FIC-2103.target", 8000.0, DOUBLE),
            ("TI-2107.PV", 90.0, DOUBLE),
            (SWITCH, False, ua.VariantType.Boolean),
            ("NO-SUCH.PV", 1.0, DOUBLE),
        )
        denied = StatusCodes.BadUserAccessDenied
        assert codes == [
            denied,
            denied,
            StatusCodes.BadNotWritable,
            denied,
            StatusCodes.BadNodeIdUnknown,
        ]
        assert plant.simulation.signals["FIC-2103.SP"].value == 7940.0
        assert plant.simulation.board.advice_on
        assert plant.simulation.board.targets()["FIC-2103"] is None
        assert [(w["user"], w["node"], w["accepted"]) for w in plant.last_writes(5)] == [
            ("anonymous", "FIC-2103.SP", False),
            ("anonymous", "ADV.FIC-2103.target", False),
            ("anonymous", "TI-2107.PV", False),
            ("anonymous", SWITCH, False),
            ("anonymous", "NO-SUCH.PV", False),
        ]


@pytest.mark.asyncio(loop_scope="module")
async def test_advisor_writes_advice_only_and_each_item_gets_its_own_code(plant: Rehearsal) -> None:
    async with client(plant, "advisor") as advisor:
        codes = await write(
            advisor,
            ("ADV.FIC-2103.target", 8000.0, DOUBLE),
            ("FIC-2103.SP", 8000.0, DOUBLE),
            ("ADV.sentence", "more reflux", ua.VariantType.String),
            (SWITCH, False, ua.VariantType.Boolean),
            (USABLE, True, ua.VariantType.Boolean),
            ("ADV.cycle", 7.0, DOUBLE),
        )
        assert codes == [
            StatusCodes.Good,
            StatusCodes.BadUserAccessDenied,
            StatusCodes.Good,
            StatusCodes.BadUserAccessDenied,
            StatusCodes.BadNotWritable,
            StatusCodes.BadTypeMismatch,
        ]
        assert (await read(advisor, "FIC-2103.SP")).Value == ua.Variant(7940.0, DOUBLE)
        target = await read(advisor, "ADV.FIC-2103.target")
        assert target.Value == ua.Variant(8000.0, DOUBLE)
        assert target.SourceTimestamp is not None
        waiting = await read(advisor, "ADV.TIC-2107.target")
        assert waiting.StatusCode.value == StatusCodes.BadWaitingForInitialData
        logged = plant.last_writes(6)
        assert [entry["status_code"] for entry in logged] == codes
        assert logged[0]["value"] == 8000.0
        assert logged[0]["user"] == "advisor"
        assert logged[0]["plant_time"] == plant.plant_time()


@pytest.mark.asyncio(loop_scope="module")
async def test_every_advisory_node_takes_its_kind_of_value_and_keeps_it(plant: Rehearsal) -> None:
    samples = {
        bool: True,
        int: 3,
        float: 1.5,
        str: "why",
        datetime: datetime(2031, 3, 1, tzinfo=UTC),
    }
    async with client(plant, "advisor") as advisor:
        items = [(name, samples[kind], VARIANTS[kind]) for name, kind in ADVISORY_KINDS.items()]
        assert set(await write(advisor, *items)) == {StatusCodes.Good}
        for name, value, kind in items:
            found = await read(advisor, name)
            assert found.Value == ua.Variant(value, kind)
            assert found.StatusCode.is_good()


@pytest.mark.asyncio(loop_scope="module")
async def test_board_writes_loops_inside_their_range_and_no_advice(plant: Rehearsal) -> None:
    async with client(plant, "board") as board:
        codes = await write(
            board,
            ("FIC-2103.SP", 8100.0, DOUBLE),
            ("FIC-2103.MODE", 0, ua.VariantType.Int32),
            ("TIC-2107.SP", 500.0, DOUBLE),
            ("TIC-2107.SP", math.nan, DOUBLE),
            ("ADV.valid", True, ua.VariantType.Boolean),
            (SWITCH, False, ua.VariantType.Boolean),
        )
        assert codes == [
            StatusCodes.Good,
            StatusCodes.Good,
            StatusCodes.BadOutOfRange,
            StatusCodes.BadOutOfRange,
            StatusCodes.BadUserAccessDenied,
            StatusCodes.Good,
        ]
        assert (await read(board, "FIC-2103.SP")).Value == ua.Variant(8100.0, DOUBLE)
        assert (await read(board, "FIC-2103.MODE")).Value == ua.Variant(0, ua.VariantType.Int32)
        assert (await read(board, SWITCH)).Value == ua.Variant(False, ua.VariantType.Boolean)
        assert plant.last_writes(3)[0]["value"] == "NaN"


@pytest.mark.asyncio(loop_scope="module")
async def test_a_write_with_status_or_timestamp_is_refused_as_many_servers_do(
    plant: Rehearsal,
) -> None:
    async with client(plant, "advisor") as advisor:
        target = await node_id(advisor, "ADV.FIC-2103.target")
        value = ua.Variant(8000.0, DOUBLE)
        now = ua.DateTime(2031, 3, 1, tzinfo=UTC)
        codes = await advisor.uaclient.write_attributes(
            [target, target],
            [
                ua.DataValue(value, StatusCode=None, SourceTimestamp=now),
                ua.DataValue(value, StatusCode=ua.StatusCode(StatusCodes.BadSensorFailure)),
            ],
        )
        assert [code.value for code in codes] == [StatusCodes.BadWriteNotSupported] * 2


@pytest.mark.asyncio(loop_scope="module")
async def test_user_access_level_shows_each_user_its_own_rights(plant: Rehearsal) -> None:
    names = ("FIC-2103.SP", "ADV.valid", "TI-2107.PV", USABLE)
    expected = {"board": (3, 1, 1, 1), "advisor": (1, 3, 1, 1), None: (1, 1, 1, 1)}
    for user, levels in expected.items():
        async with client(plant, user) as connection:
            found = [
                (await read(connection, name, AttributeIds.UserAccessLevel)).Value for name in names
            ]
            assert [variant.Value for variant in found if variant] == list(levels)


@pytest.mark.asyncio(loop_scope="module")
async def test_nobody_is_admin(plant: Rehearsal) -> None:
    for user, password in (
        ("admin", ""),
        ("Admin", "admin"),
        ("advisor", "wrong"),
        ("advisor", ""),
        ("board", PASSWORDS["advisor"]),
    ):
        with pytest.raises(UaError):
            async with client(plant, user, password):
                pass
    for user in ("board", "advisor", None):
        async with client(plant, user) as connection:
            with pytest.raises(UaError):
                await connection.nodes.objects.add_folder(2, "mine")
            node = connection.get_node(await node_id(connection, "FIC-2103.SP"))
            with pytest.raises(UaError):
                await connection.delete_nodes([node])
            denied = await connection.uaclient.write_attributes(
                [await node_id(connection, "TI-2107.PV")],
                [ua.DataValue(ua.Variant(3, ua.VariantType.Byte), StatusCode=None)],
                attributeid=AttributeIds.AccessLevel,
            )
            assert denied[0].value == StatusCodes.BadNotWritable
    (endpoint,) = await plant.server_endpoints()
    assert endpoint.SecurityPolicyUri.endswith("#None")
    kinds = {token.TokenType for token in endpoint.UserIdentityTokens}
    assert kinds == {ua.UserTokenType.Anonymous, ua.UserTokenType.UserName}


@pytest.mark.asyncio
async def test_usable_rises_with_live_advice_and_falls_when_the_heartbeat_stops() -> None:
    async with rehearsal() as plant, client(plant, "advisor") as advisor:
        far = datetime.fromtimestamp(START + 1e6, UTC)

        async def beat(number: int) -> None:
            codes = await write(
                advisor,
                ("ADV.valid_until", far, ua.VariantType.DateTime),
                ("ADV.heartbeat", number, ua.VariantType.Int64),
                ("ADV.valid", True, ua.VariantType.Boolean),
            )
            assert codes == [StatusCodes.Good] * 3

        async def usable() -> object:
            shown = (await read(advisor, USABLE)).Value
            assert shown is not None
            return shown.Value

        assert await usable() is False
        await plant.steps(2.0)
        await beat(1)
        assert await usable() is True
        await plant.steps(90.0)
        assert await usable() is True
        await plant.steps(2.0)
        assert await usable() is False
        await beat(2)
        assert await usable() is True
        await write(advisor, ("ADV.valid", False, ua.VariantType.Boolean))
        assert await usable() is False


@pytest.mark.asyncio
async def test_a_bad_instrument_shows_its_status_and_no_value() -> None:
    async with rehearsal(DrillName.BAD_QUALITY) as plant, client(plant) as reader:
        await plant.steps(60.0)
        broken = await read(reader, "TI-2107.PV")
        assert broken.StatusCode.value == BAD_SENSOR_FAILURE
        assert broken.Value is None or broken.Value.Value is None
        await plant.steps(60.0)
        assert (await read(reader, "TI-2107.PV")).StatusCode.is_good()


@pytest.mark.asyncio
async def test_server_drop_closes_port_and_sessions_and_returns_on_the_same_port() -> None:
    async with rehearsal(DrillName.SERVER_DROP) as plant:
        endpoint = plant.server.endpoint
        lost = Client(endpoint, timeout=2)
        await lost.connect()
        try:
            await plant.steps(60.0)
            with pytest.raises(ConnectionRefusedError):
                async with client(plant):
                    pass
            assert plant.simulation.plant.time_s == 60.0
            with pytest.raises((UaError, OSError)):
                await read(lost, "TI-2107.PV")
        finally:
            await lost.disconnect()
        await plant.steps(60.0)
        assert plant.server.endpoint == endpoint
        async with client(plant, "advisor") as again:
            value = await read(again, "TI-2107.PV")
            assert value.SourceTimestamp is not None
            assert value.SourceTimestamp.timestamp() == START + 120.0
            assert await write(again, ("ADV.cycle", 1, ua.VariantType.Int64)) == [StatusCodes.Good]
