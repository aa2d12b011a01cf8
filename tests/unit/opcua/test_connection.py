"""Which endpoint is taken, and what people are told when there is no session."""

from __future__ import annotations

import socket

import pytest
from asyncua.ua.uaerrors import BadIdentityTokenRejected, BadTooManySessions, UaError
from asyncua.ua.uaprotocol_auto import (
    EndpointDescription,
    MessageSecurityMode,
    UserTokenPolicy,
    UserTokenType,
)

from edgectl.opcua.address import ServerAddress
from edgectl.opcua.connection import (
    POLICY_PREFIX,
    ConnectRefusedError,
    Refusal,
    _refused,
    choose_endpoint,
)

ADDRESS = ServerAddress(
    "opc.tcp://plant:4840/", allow_insecure=True, user="advisor", password="s3cret"
)
MODES = MessageSecurityMode


def endpoint(
    policy: str = "None",
    mode: MessageSecurityMode = MODES.None_,
    tokens: tuple[UserTokenType, ...] = (UserTokenType.Anonymous, UserTokenType.UserName),
    url: str = "opc.tcp://plant:4840/",
) -> EndpointDescription:
    return EndpointDescription(
        EndpointUrl=url,
        SecurityMode=mode,
        SecurityPolicyUri=POLICY_PREFIX + policy,
        UserIdentityTokens=[UserTokenPolicy(TokenType=token) for token in tokens],
    )


SECURE = endpoint("Basic256Sha256", MODES.SignAndEncrypt)


def test_the_endpoint_asked_for_is_taken() -> None:
    plain = endpoint()
    assert choose_endpoint(ADDRESS, [SECURE, plain]) is plain


@pytest.mark.parametrize(
    ("offered", "security", "refusal", "words"),
    [
        ([SECURE], "none", Refusal.SECURITY, r"offers Basic256Sha256 \(SignAndEncrypt\), but"),
        ([endpoint()], "Basic256Sha256", Refusal.SECURITY, "offers None, but the site file asks"),
        ([SECURE], "Basic256Sha256", Refusal.SECURITY, "needs certificates"),
        ([], "none", Refusal.SECURITY, "offers no endpoint"),
        ([endpoint(url="https://plant/")], "none", Refusal.SECURITY, "asks for security 'none'"),
        (
            [endpoint(tokens=(UserTokenType.Anonymous,))],
            "none",
            Refusal.IDENTITY,
            "takes no user name",
        ),
    ],
)
def test_no_endpoint_is_better_than_another_one(
    offered: list[EndpointDescription], security: str, refusal: Refusal, words: str
) -> None:
    address = ServerAddress(
        ADDRESS.endpoint, security, allow_insecure=True, user="advisor", password="s3cret"
    )
    with pytest.raises(ConnectRefusedError, match=words) as caught:
        choose_endpoint(address, offered)
    assert caught.value.refusal is refusal
    assert caught.value.needs_a_person


@pytest.mark.parametrize(
    ("error", "refusal", "words"),
    [
        (socket.gaierror(-2, "Name or service not known"), Refusal.HOST_UNKNOWN, "host name"),
        (TimeoutError(), Refusal.NO_ANSWER, "did not answer in time"),
        (ConnectionRefusedError(111, "refused"), Refusal.NOT_LISTENING, "nothing listens"),
        (OSError(113, "No route to host"), Refusal.NO_ANSWER, "No route to host"),
        (ConnectionError("lost"), Refusal.NOT_OPC_UA, "is it an OPC UA server?"),
        (BadIdentityTokenRejected(), Refusal.IDENTITY, "refused user 'advisor'"),
        (BadTooManySessions(), Refusal.SERVER_ERROR, "refused the session"),
        (UaError("odd"), Refusal.SERVER_ERROR, "odd"),
    ],
)
def test_each_refusal_has_its_own_words(error: Exception, refusal: Refusal, words: str) -> None:
    told = _refused(ADDRESS, error)
    assert told.refusal is refusal
    assert words in str(told)
    assert "plant:4840" in str(told)


def test_a_password_is_never_shown() -> None:
    assert "s3cret" not in repr(ADDRESS)
