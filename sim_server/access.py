"""Who may do what at the simulated plant's OPC UA server.

Three users: `board` writes loops and the switch for advice, `advisor` writes
the advisory nodes, anybody else reads. Nobody is Admin: the address space is
closed to clients. A Write call is judged item by item, as OPC 10000-4, 5.10.4
wants it; a callback that raises would refuse the whole call instead.

User names and passwords travel in the clear under security policy None, which
is for tests on loopback only (OPC 10000-2). Certificates and policies belong
into `SECURITY_POLICIES`, `IDENTITY_TOKENS` and `secure`.
"""

from __future__ import annotations

import hmac
import secrets
from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any, Final

from asyncua import ua
from asyncua.common.callback import CallbackType
from asyncua.crypto.permission_rules import (
    ADMIN_TYPES,
    USER_TYPES,
    SimpleRoleRuleset,
    User,
    UserRole,
)
from asyncua.server.address_space import AddressSpace, AttributeService
from asyncua.server.user_managers import UserManager
from asyncua.ua.attribute_ids import AttributeIds
from asyncua.ua.status_codes import StatusCodes

from sim_server.nodes import standard_id
from sim_server.simulation import SetupError
from sim_server.writelog import WriteLog

if TYPE_CHECKING:
    from asyncua.server.internal_server import InternalServer
    from asyncua.server.server import Server

BOARD: Final = "board"
ADVISOR: Final = "advisor"
ANONYMOUS: Final = "anonymous"
PASSWORD_VARIABLES: Final[Mapping[str, str]] = {
    BOARD: "EDGECTL_SIM_BOARD_PASSWORD",
    ADVISOR: "EDGECTL_SIM_ADVISOR_PASSWORD",
}
TEXT_LIMIT: Final = 2000

SECURITY_POLICIES: Final = [ua.SecurityPolicyType.NoSecurity]
IDENTITY_TOKENS: Final[list[type]] = [ua.AnonymousIdentityToken, ua.UserNameIdentityToken]


@dataclass(frozen=True, slots=True)
class WriteRule:
    """Who may write a node, and how its values must look."""

    writer: str | None
    """None: no client may."""
    kind: ua.VariantType
    write: Callable[[Any], None] | None = None
    """Takes a value of the right type. Raises ValueError: out of range."""


class Accounts(UserManager):
    """Knows two users by password; everybody without a name is anonymous."""

    def __init__(self, passwords: Mapping[str, str]) -> None:
        self._passwords = {name: word.encode() for name, word in passwords.items()}

    def get_user(
        self,
        iserver: InternalServer,
        username: str | None = None,
        password: str | None = None,
        certificate: Any = None,
    ) -> User | None:
        """The user, or None: refused. Never an Admin, whatever the name."""
        if username is None:
            return User(role=UserRole.Anonymous, name=ANONYMOUS)
        expected = self._passwords.get(username)
        if expected is None or not hmac.compare_digest((password or "").encode(), expected):
            return None
        return User(role=UserRole.User, name=username)


class ReadersAndWriters(SimpleRoleRuleset):
    """Every session may use the ordinary services; none may change the address space."""

    def __init__(self) -> None:
        self._allowed = {standard_id(i) for i in set(USER_TYPES) - set(ADMIN_TYPES)}

    def check_validity(self, user: Any, action_type_id: Any, body: Any) -> bool:
        return action_type_id in self._allowed


class GuardedWrites(AttributeService):
    """Judges each item of a Write call by the node's rule, and logs all of them.

    Parameters
    ----------
    aspace : AddressSpace
    rules : mapping of NodeId to WriteRule
        Every variable of the plant. Nodes that are missing here are not writable.
    log : WriteLog
    after_write : callable
        Awaited after a call that changed something: publishes what followed from it.
    """

    def __init__(
        self,
        aspace: AddressSpace,
        rules: Mapping[ua.NodeId, WriteRule],
        log: WriteLog,
        after_write: Callable[[], Any],
    ) -> None:
        super().__init__(aspace)
        self._rules = rules
        self._log = log
        self._after_write = after_write

    async def write(
        self,
        params: ua.WriteParameters,
        user: User = User(role=UserRole.Admin),  # noqa: B008 - asyncua's signature
    ) -> list[ua.StatusCode]:
        if user.role is UserRole.Admin:
            # Only the server's own session is Admin: `Accounts` makes none.
            return await super().write(params, user)
        name = user.name or ANONYMOUS
        codes = []
        for item in params.NodesToWrite:
            code = self._write_item(item, name)
            codes.append(ua.StatusCode(ua.UInt32(code)))
            value = item.Value.Value.Value if item.Value.Value is not None else None
            self._log.record(name, _node_name(item), value, code)
        if any(code.is_good() for code in codes):
            await self._after_write()
        return codes

    def _write_item(self, item: ua.WriteValue, user: str) -> int:
        """Write one item and return its status code."""
        refusal = self._refusal(item, user)
        if refusal is not None:
            return refusal
        rule = self._rules[item.NodeId]
        assert rule.write is not None
        try:
            rule.write(item.Value.Value.Value)
        except ValueError:
            return StatusCodes.BadOutOfRange
        return StatusCodes.Good

    def _refusal(self, item: ua.WriteValue, user: str) -> int | None:
        """Why this item may not be written, or None."""
        if item.NodeId not in self._aspace:
            return StatusCodes.BadNodeIdUnknown
        rule = self._rules.get(item.NodeId)
        if item.AttributeId != AttributeIds.Value or rule is None or rule.writer is None:
            return StatusCodes.BadNotWritable
        if user != rule.writer:
            return StatusCodes.BadUserAccessDenied
        if item.IndexRange:
            return StatusCodes.BadIndexRangeInvalid
        if _carries_more_than_a_value(item.Value):
            # As many control systems answer (OPC 10000-4, 5.10.4): they date values themselves.
            return StatusCodes.BadWriteNotSupported
        variant = item.Value.Value
        if variant.VariantType != rule.kind or variant.is_array or variant.Value is None:
            return StatusCodes.BadTypeMismatch
        if isinstance(variant.Value, str) and len(variant.Value) > TEXT_LIMIT:
            return StatusCodes.BadOutOfRange
        return None


def secure(server: Server, rules: Mapping[ua.NodeId, WriteRule]) -> None:
    """Close what asyncua leaves open by default; call before the server starts."""
    server.allow_remote_admin(False)
    server.set_security_policy(list(SECURITY_POLICIES), ReadersAndWriters())
    server.set_identity_tokens(list(IDENTITY_TOKENS))

    def show_own_rights(event: Any, _service: Any) -> None:
        """A client reads in UserAccessLevel what *it* may do, not what somebody may."""
        user = (event.user.name if event.user else None) or ANONYMOUS
        for index, item in enumerate(event.request_params.NodesToRead):
            rule = rules.get(item.NodeId)
            if item.AttributeId == AttributeIds.UserAccessLevel and rule is not None:
                level = ua.AccessLevel.CurrentRead.mask
                if rule.writer == user:
                    level |= ua.AccessLevel.CurrentWrite.mask
                event.response_params[index] = replace(
                    event.response_params[index], Value=ua.Variant(level, ua.VariantType.Byte)
                )

    server.iserver.subscribe_server_callback(
        CallbackType.PostRead,  # type: ignore[arg-type]  # annotated str, dispatched by this enum
        show_own_rights,
    )


def passwords_from(environment: Mapping[str, str]) -> tuple[dict[str, str], bool]:
    """Passwords by user name, and whether any had to be invented.

    Raises
    ------
    SetupError
        A password variable is there but empty.
    """
    passwords = {}
    invented = False
    for user, variable in PASSWORD_VARIABLES.items():
        password = environment.get(variable)
        if password is None:
            password = secrets.token_urlsafe(18)
            invented = True
        if not password:
            raise SetupError(f"{variable} is empty: set a password or unset the variable")
        passwords[user] = password
    return passwords, invented


def _carries_more_than_a_value(value: ua.DataValue) -> bool:
    """Whether a status other than Good or a timestamp came along."""
    status = value.StatusCode
    return (
        (status is not None and status.value != StatusCodes.Good)
        or value.SourceTimestamp is not None
        or value.ServerTimestamp is not None
    )


def _node_name(item: ua.WriteValue) -> str:
    """The node as the write log names it: the signal's name, or the whole node id."""
    name = item.NodeId.Identifier if isinstance(item.NodeId.Identifier, str) else None
    node = name or str(item.NodeId.to_string())
    if item.AttributeId != AttributeIds.Value:
        return f"{node}#{AttributeIds(item.AttributeId).name}"
    return node
