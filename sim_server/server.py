"""The simulated plant's OPC UA server: shows the simulation, takes writes.

Every timestamp it gives, CurrentTime included, is plant time: the server is a
part of the plant. The server can leave and come back on its port while the
plant runs on (drill `server-drop`).
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from datetime import UTC
from functools import partial
from typing import Any, Final

from asyncua import ua
from asyncua.server.binary_server_asyncio import BinaryServer
from asyncua.server.server import Server
from asyncua.ua.object_ids import ObjectIds

from sim_server import access
from sim_server.advisory import ADVISORY_KINDS, SWITCH, USABLE
from sim_server.nodes import NAMESPACE, Variable, build, signal_id, standard_id, variables
from sim_server.signals import GOOD
from sim_server.simulation import Simulation
from sim_server.writelog import WriteLog

HOST: Final = "127.0.0.1"
BAD_WAITING_FOR_INITIAL_DATA: Final = 0x80320000

Shown = tuple[object, int, float]
"""Value, status code, source time [s since the Unix epoch]."""


async def standard_server(passwords: Mapping[str, str]) -> Server:
    """An OPC UA server with the standard address space only: the slow part of a start.

    Parameters
    ----------
    passwords : mapping
        By user name; nobody else but anonymous readers gets in.
    """
    server = Server(user_manager=access.Accounts(passwords))
    await server.init()
    await server.set_application_uri("urn:edgectl:sim_server")
    server.set_server_name("edgectl simulated plant C-2101")
    # The built-in clock shows wall time; this server's time is plant time.
    server.disable_clock()
    return server


class PlantServer:
    """Publishes a simulation over OPC UA on the loopback interface.

    Parameters
    ----------
    server : Server
        From `standard_server`.
    simulation : Simulation
    start : float
        Plant time at the plant's start, seconds since the Unix epoch [s].
    plant_time : callable
        Plant time by the shared clock [s since the Unix epoch].
    write_log : WriteLog
    port : int
        0 takes a free one.
    """

    def __init__(
        self,
        server: Server,
        simulation: Simulation,
        start: float,
        plant_time: Callable[[], float],
        write_log: WriteLog,
        port: int = 0,
    ) -> None:
        self._simulation = simulation
        self._start_time = start
        self._plant_time = plant_time
        self._write_log = write_log
        self._port = port
        self._server = server
        self._index = 0
        self._kinds: dict[str, ua.VariantType] = {}
        self._shown: dict[str, Shown] = {}

    @property
    def endpoint(self) -> str:
        return f"opc.tcp://{HOST}:{self._port}/"

    @property
    def listening(self) -> bool:
        return self._server.bserver is not None

    async def start(self) -> None:
        """Build the address space, publish once and listen. Raises OSError: port taken."""
        server = self._server
        server.set_endpoint(self.endpoint)
        self._index = await server.register_namespace(NAMESPACE)
        shown = variables(self._simulation.plant.specs)
        self._kinds = {variable.name: variable.kind for variable in shown}
        await build(server.iserver.isession, self._index, shown)
        rules = {self._node(variable.name): self._rule(variable) for variable in shown}
        access.secure(server, rules)
        server.iserver.attribute_service = access.GuardedWrites(
            server.iserver.aspace, rules, self._write_log, self._after_write
        )
        await self.publish()
        await server.start()
        self._settle_port()
        await self._show_server_time()

    async def stop(self) -> None:
        if self.listening:
            await self._server.stop()
        else:
            await self._server.iserver.stop()

    async def follow_drill(self) -> None:
        """Leave or come back, as the simulation's drill has it."""
        if self.listening and not self._simulation.endpoint_up:
            await self._leave()
        elif not self.listening and self._simulation.endpoint_up:
            await self._come_back()

    async def publish(self) -> None:
        """Show what has changed since the last time."""
        now = self._plant_time()
        for name, shown in self._current(now).items():
            if self._shown.get(name) != shown:
                self._shown[name] = shown
                await self._show(name, shown, now)
        await self._show_server_time()

    def _current(self, now: float) -> dict[str, Shown]:
        current: dict[str, Shown] = {
            name: (signal.value, signal.status, self._start_time + signal.source_time_s)
            for name, signal in self._simulation.signals.items()
        }
        board = self._simulation.board
        current[SWITCH] = (board.advice_on, GOOD, now)
        current[USABLE] = (self._simulation.usable, GOOD, now)
        for name in ADVISORY_KINDS:
            status = GOOD if name in board.values else BAD_WAITING_FOR_INITIAL_DATA
            written_at = board.written_at.get(name, self._start_time)
            current[name] = (board.values.get(name), status, written_at)
        return current

    async def _show(self, name: str, shown: Shown, now: float) -> None:
        value, status, source_time = shown
        kind = self._kinds[name]
        if kind is ua.VariantType.Int32 and isinstance(value, float):
            value = round(value)
        await self._server.write_attribute_value(
            self._node(name),
            ua.DataValue(
                # Always with its type: a value of another type is dropped without a word.
                ua.Variant(value, kind) if value is not None else ua.Variant(),
                StatusCode=ua.StatusCode(ua.UInt32(status)),
                SourceTimestamp=_utc(source_time),
                ServerTimestamp=_utc(now),
            ),
        )

    async def _show_server_time(self) -> None:
        """CurrentTime and the status structure, both in plant time."""
        now = _utc(self._plant_time())
        server = self._server
        status_id = standard_id(ObjectIds.Server_ServerStatus)
        standing = server.read_attribute_value(status_id).Value
        assert standing is not None
        status = standing.Value
        status.StartTime = _utc(self._start_time)
        status.CurrentTime = now
        for node_id, value in (
            (status_id, status),
            (standard_id(ObjectIds.Server_ServerStatus_StartTime), status.StartTime),
            (standard_id(ObjectIds.Server_ServerStatus_CurrentTime), now),
        ):
            await server.write_attribute_value(
                node_id, ua.DataValue(ua.Variant(value), SourceTimestamp=now, ServerTimestamp=now)
            )

    async def _after_write(self) -> None:
        self._simulation.judge()
        await self.publish()

    def _rule(self, variable: Variable) -> access.WriteRule:
        if not variable.writable:
            return access.WriteRule(None, variable.kind)
        if variable.name == SWITCH:
            return access.WriteRule(access.BOARD, variable.kind, self._turn_switch)
        if variable.name in ADVISORY_KINDS:
            write = partial(self._write_advice, variable.name)
            return access.WriteRule(access.ADVISOR, variable.kind, write)
        return access.WriteRule(
            access.BOARD, variable.kind, partial(self._simulation.plant.write, variable.name)
        )

    def _turn_switch(self, on: bool) -> None:
        self._simulation.board.advice_on = on

    def _write_advice(self, name: str, value: Any) -> None:
        self._simulation.board.write(name, value, self._plant_time())

    def _settle_port(self) -> None:
        """Learn the port that was given and say it in the endpoint descriptions."""
        assert self._server.bserver is not None
        self._port = self._server.bserver.port
        for description in self._server.iserver.endpoints:
            description.EndpointUrl = self.endpoint
            description.Server.DiscoveryUrls = [self.endpoint]

    async def _leave(self) -> None:
        """Close the port, every connection and every session; the plant runs on."""
        server = self._server
        assert server.bserver is not None
        sessions = list(server.iserver._external_sessions.values())
        await server.bserver.stop()
        server.bserver = None
        # asyncua keeps sessions for clients that come back; a restarted server has none.
        for session in sessions:
            await session.close_session(delete_subs=True)

    async def _come_back(self) -> None:
        server = self._server
        listener = BinaryServer(server.iserver, HOST, self._port, server.limits)
        listener.set_policies(server._policies)
        await listener.start()
        server.bserver = listener

    def _node(self, name: str) -> ua.NodeId:
        return signal_id(name, self._index)


def _utc(plant_time: float) -> ua.DateTime:
    return ua.DateTime.fromtimestamp(plant_time, UTC)
