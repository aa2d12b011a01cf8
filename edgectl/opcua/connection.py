"""One connection to the plant's server: opened once, used, closed, never revived.

Each connection has a new client object: a client used again after a lost
transport was seen to hang. Every wait has its own deadline, and whatever goes
wrong is told in words: what, where, and how to mend it.
"""

from __future__ import annotations

import asyncio
import logging
import socket
import struct
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from enum import StrEnum
from typing import Any, Final
from uuid import UUID

from asyncua.client.client import Client
from asyncua.ua.attribute_ids import AttributeIds
from asyncua.ua.object_ids import ObjectIds
from asyncua.ua.status_codes import StatusCodes
from asyncua.ua.uaerrors import UaError, UaStatusCodeError
from asyncua.ua.uaprotocol_auto import (
    EndpointDescription,
    MessageSecurityMode,
    ReadParameters,
    ReadValueId,
    TimestampsToReturn,
    UserTokenType,
)
from asyncua.ua.uatypes import DataValue, Int16, Int32, NodeId, String

from edgectl.opcua.address import ServerAddress
from edgectl.opcua.quality import status_name
from edgectl.opcua.values import number_of, plain_of
from edgectl.ports import PlantMismatchError, PlantUnreachableError
from edgectl.settings.nodes import NodeTextError, same_node

# Everything the library would log arrives here as an error with our own words.
logging.getLogger("asyncua").setLevel(logging.CRITICAL)

LINK_ERRORS: Final = (OSError, TimeoutError, UaError, struct.error, ValueError, LookupError)
"""What a call over a broken or babbling connection raises (a reply may not even parse)."""

POLICY_PREFIX: Final = "http://opcfoundation.org/UA/SecurityPolicy#"
_CLOSE_TIMEOUT_S: Final = 1.0
# A session that nobody uses for a minute is no use to its server either.
_SESSION_TIMEOUT_MS: Final = 60_000
_WATCHDOG_INTERVAL_S: Final = 5.0
_NO_LIMIT: Final = 1_000_000

_IDENTIFIERS: Final[Mapping[str, Callable[[str], Any]]] = {
    "i": lambda text: Int32(int(text)),
    "s": String,
    "g": UUID,
    "b": bytes.fromhex,
}
"""How each kind of identifier in a `SameNode` becomes the library's."""

_IDENTITY_REFUSED: Final = frozenset(
    {
        StatusCodes.BadUserAccessDenied,
        StatusCodes.BadIdentityTokenInvalid,
        StatusCodes.BadIdentityTokenRejected,
        StatusCodes.BadUserSignatureInvalid,
    }
)
_SECURITY_REFUSED: Final = frozenset(
    {
        StatusCodes.BadSecurityChecksFailed,
        StatusCodes.BadSecurityModeRejected,
        StatusCodes.BadSecurityPolicyRejected,
        StatusCodes.BadCertificateInvalid,
        StatusCodes.BadCertificateUntrusted,
    }
)


def standard_node(number: int) -> NodeId:
    """A node of the standard's own namespace, by a number of `ObjectIds`."""
    return NodeId(Int32(number))


class Refusal(StrEnum):
    """Why there is no session."""

    HOST_UNKNOWN = "host_unknown"
    NOT_LISTENING = "not_listening"
    NO_ANSWER = "no_answer"
    NOT_OPC_UA = "not_opc_ua"
    SECURITY = "security"
    IDENTITY = "identity"
    SERVER_ERROR = "server_error"


class ConnectRefusedError(PlantUnreachableError):
    """No session, with the reason as a word and a sentence."""

    def __init__(self, refusal: Refusal, sentence: str) -> None:
        super().__init__(sentence)
        self.refusal = refusal

    @property
    def needs_a_person(self) -> bool:
        """Settings are wrong: trying again soon would not help and may lock the account."""
        return self.refusal in (Refusal.SECURITY, Refusal.IDENTITY)


@dataclass(frozen=True, slots=True)
class ServerLimits:
    """Nodes the server accepts in one call (OPC 10000-5, 6.3.11)."""

    read: int = _NO_LIMIT
    write: int = _NO_LIMIT
    translate: int = _NO_LIMIT


class Connection:
    """An activated session with the namespaces of its server."""

    def __init__(self, client: Client, address: ServerAddress) -> None:
        self.client = client
        self.address = address
        self.lost = asyncio.Event()
        """Set when the transport is gone, or somebody found the session unusable."""
        self.why_lost = ""
        self.namespaces: tuple[str, ...] = ()
        self.limits = ServerLimits()

    def abandon(self, why: str) -> None:
        """Declare the session unusable; its owner closes it and opens another."""
        if not self.lost.is_set():
            self.why_lost = why
            self.lost.set()

    async def read(self, requests: Sequence[ReadParameters]) -> list[DataValue]:
        """The results of all requests, in order. Raises LINK_ERRORS."""
        results: list[DataValue] = []
        for request in requests:
            answers = await self.client.uaclient.read(request)
            if len(answers) != len(request.NodesToRead):
                raise UaError(f"{len(request.NodesToRead)} nodes asked, {len(answers)} answered")
            results.extend(answers)
        return results

    def requests(
        self, nodes: Sequence[tuple[NodeId, AttributeIds]], timestamps: bool = False
    ) -> tuple[ReadParameters, ...]:
        """Read requests for attributes of nodes, split by what the server accepts."""
        return tuple(
            ReadParameters(
                MaxAge=0.0,
                TimestampsToReturn=(
                    TimestampsToReturn.Both if timestamps else TimestampsToReturn.Neither
                ),
                NodesToRead=[
                    ReadValueId(NodeId=node, AttributeId=attribute)
                    for node, attribute in nodes[start : start + self.limits.read]
                ],
            )
            for start in range(0, len(nodes), self.limits.read)
        )

    async def learn_namespaces(self) -> None:
        """Read the namespace table and the operation limits of this server."""
        wanted = (
            ObjectIds.Server_NamespaceArray,
            ObjectIds.Server_ServerCapabilities_OperationLimits_MaxNodesPerRead,
            ObjectIds.Server_ServerCapabilities_OperationLimits_MaxNodesPerWrite,
            ObjectIds.Server_ServerCapabilities_OperationLimits_MaxNodesPerTranslateBrowsePathsToNodeIds,
        )
        # One node a call: nobody knows yet how many the server accepts.
        requests = [self.requests([(standard_node(i), AttributeIds.Value)])[0] for i in wanted]
        results = await self.read(requests)
        table = plain_of(results[0])
        if not isinstance(table, list):
            raise UaError("the server shows no namespace table (node i=2255)")
        self.namespaces = tuple(str(uri) for uri in table)
        read, write, translate = (int(number_of(limit) or 0) or _NO_LIMIT for limit in results[1:])
        self.limits = ServerLimits(read, write, translate)

    def resolve(self, node: str) -> NodeId | None:
        """The node id at this server, or None when it does not know the namespace.

        Raises PlantMismatchError when the text is no node id at all.
        """
        try:
            uri, kind, identifier = same_node(node)
        except NodeTextError as error:
            raise PlantMismatchError(f"{node!r} is not a node id: it is {error}") from error
        if uri not in self.namespaces:
            return None
        return NodeId(_IDENTIFIERS[kind](identifier), Int16(self.namespaces.index(uri)))

    async def close(self) -> None:
        """Close the session, or at least the socket. An abandoned client leaks two tasks."""
        await close_client(self.client)


async def open_connection(address: ServerAddress) -> Connection:
    """Connect, activate a session, learn the namespaces. Raises ConnectRefusedError."""
    if not address.endpoint.startswith("opc.tcp://"):
        raise ConnectRefusedError(
            Refusal.HOST_UNKNOWN, f"{address.endpoint!r} is no endpoint: it begins with opc.tcp://"
        )
    if address.security.casefold() == "none" and not address.allow_insecure:
        raise ConnectRefusedError(
            Refusal.SECURITY,
            "security 'none' sends everything in clear text and is for testing only: "
            "set server.allow_insecure = true to say that you mean it",
        )
    try:
        async with asyncio.timeout(address.connect_timeout_s):
            await _check_endpoints(address)
            return await _activated(address)
    except LINK_ERRORS as error:
        raise _refused(address, error) from error


async def _activated(address: ServerAddress) -> Connection:
    client = _new_client(address)
    connection = Connection(client, address)

    async def transport_lost(error: Exception) -> None:
        connection.abandon(f"connection lost ({error or type(error).__name__})")

    client.connection_lost_callback = transport_lost
    try:
        await client.connect()
        await connection.learn_namespaces()
    # A cancelled attempt must not leak its socket and tasks either; nothing is swallowed.
    except BaseException:
        await close_client(client)
        raise
    return connection


async def close_client(client: Client) -> None:
    """Disconnect within a second; then drop the socket, sent or unsent."""
    protocol = client.uaclient.protocol
    try:
        async with asyncio.timeout(_CLOSE_TIMEOUT_S):
            await client.disconnect()
    except LINK_ERRORS:
        pass  # a lost connection has nothing left to say goodbye to
    finally:
        client.disconnect_socket()
        if protocol is not None and protocol.transport is not None:
            # close() would wait for a peer that may never read again.
            protocol.transport.abort()


def _new_client(address: ServerAddress) -> Client:
    client = Client(
        address.endpoint,
        timeout=address.step_timeout_s,
        watchdog_intervall=_WATCHDOG_INTERVAL_S,
        auto_reconnect=False,
    )
    client.name = client.description = "edgectl"
    client.application_uri = "urn:edgectl:advisor"
    client.session_timeout = _SESSION_TIMEOUT_MS
    if address.user is not None:
        client.set_user(address.user)
        client.set_password(address.password or "")
    return client


async def _check_endpoints(address: ServerAddress) -> None:
    """Ask without a session what the server offers, and refuse what the site file does not want."""
    client = _new_client(address)
    try:
        offered = await client.connect_and_get_server_endpoints()
    finally:
        await close_client(client)
    choose_endpoint(address, offered)


def choose_endpoint(
    address: ServerAddress, offered: Sequence[EndpointDescription]
) -> EndpointDescription:
    """The endpoint to use. Raises ConnectRefusedError: never a fall back to less security."""
    names = sorted({_policy_name(endpoint) for endpoint in offered})
    where = f"server {address.endpoint} offers {', '.join(names) or 'no endpoint'}"
    wanted = address.security
    fitting = [
        endpoint
        for endpoint in offered
        if _policy_name(endpoint).casefold().startswith(wanted.casefold())
        and endpoint.EndpointUrl.startswith("opc.tcp:")
    ]
    if not fitting:
        raise ConnectRefusedError(
            Refusal.SECURITY,
            f"{where}, but the site file asks for security {wanted!r}: no connection is made; "
            "have the server offer it, or change server.security",
        )
    if wanted.casefold() != "none":
        raise ConnectRefusedError(
            Refusal.SECURITY,
            f"security {wanted!r} needs certificates, which this version cannot use yet: "
            "no connection is made, and none without security either",
        )
    endpoint = fitting[0]
    tokens = {policy.TokenType for policy in endpoint.UserIdentityTokens}
    if address.user is not None and UserTokenType.UserName not in tokens:
        raise ConnectRefusedError(
            Refusal.IDENTITY,
            f"server {address.endpoint} takes no user name and password on its endpoint without "
            f"security, so user {address.user!r} cannot log in: have it allowed at the server",
        )
    return endpoint


def _policy_name(endpoint: EndpointDescription) -> str:
    policy = str(endpoint.SecurityPolicyUri or "").removeprefix(POLICY_PREFIX) or "?"
    if endpoint.SecurityMode == MessageSecurityMode.None_:
        return policy
    return f"{policy} ({endpoint.SecurityMode.name})"


def _refused(address: ServerAddress, error: BaseException) -> ConnectRefusedError:
    """The library's error in words: what, where, how to mend."""
    where = address.endpoint
    if isinstance(error, socket.gaierror):
        return ConnectRefusedError(
            Refusal.HOST_UNKNOWN,
            f"host name in {where} is not known ({error.strerror}): check server.endpoint",
        )
    if isinstance(error, TimeoutError):
        return ConnectRefusedError(
            Refusal.NO_ANSWER,
            f"{where} did not answer in time: check address, network and firewall",
        )
    if isinstance(error, ConnectionRefusedError):
        return ConnectRefusedError(
            Refusal.NOT_LISTENING,
            f"nothing listens at {where} (connection refused): check the port and "
            "whether the server runs",
        )
    if isinstance(error, UaStatusCodeError) and error.code in _IDENTITY_REFUSED:
        who = "an anonymous user" if address.user is None else f"user {address.user!r}"
        return ConnectRefusedError(
            Refusal.IDENTITY,
            f"server {where} refused {who} ({status_name(error.code)}): check server.user and "
            "the password in the environment variable that server.password_env names",
        )
    if isinstance(error, UaStatusCodeError) and error.code in _SECURITY_REFUSED:
        return ConnectRefusedError(
            Refusal.SECURITY,
            f"server {where} refused security {address.security!r} ({status_name(error.code)})",
        )
    if isinstance(error, ConnectionError):
        return ConnectRefusedError(
            Refusal.NOT_OPC_UA,
            f"{where} closed the connection while it was being opened: is it an OPC UA server?",
        )
    if isinstance(error, OSError):
        return ConnectRefusedError(
            Refusal.NO_ANSWER, f"{where} cannot be reached ({error.strerror or error})"
        )
    return ConnectRefusedError(
        Refusal.SERVER_ERROR, f"server {where} refused the session ({error})"
    )
