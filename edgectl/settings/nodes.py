"""Node ids as the site file spells them: `nsu=<namespace URI>;s=...`.

A namespace *index* may change when a server restarts (OPC 10000-3, 8.2.2), so
only the URI form is accepted. Two spellings of one node must compare equal, or
the write fence could be walked around: `same_node` forms are what is compared.
"""

from __future__ import annotations

import base64
import binascii
import re
import uuid
from typing import Final, NamedTuple
from urllib.parse import unquote

NODE_WORDS: Final = "a node id `nsu=<namespace URI>;s=...` (or i=, g=, b=)"
BASE_NAMESPACE: Final = "http://opcfoundation.org/UA/"
"""The namespace of OPC UA itself: the server's own state lives there."""

_NODE: Final = re.compile(r"nsu=(?P<uri>[^;]+);(?P<kind>[sigb])=(?P<id>.+)", re.DOTALL)
_GUID: Final = re.compile(r"[0-9a-fA-F]{8}(-[0-9a-fA-F]{4}){3}-[0-9a-fA-F]{12}")
_BAD_ESCAPE: Final = re.compile(r"%(?![0-9a-fA-F]{2})")
_LONGEST: Final = 1024


class NodeTextError(ValueError):
    """The text is not a node id; the message says what is wrong with it."""


class SameNode(NamedTuple):
    """One form per node: two texts name the same node exactly when these are equal."""

    uri: str
    kind: str
    identifier: str


def same_node(text: str) -> SameNode:
    """The comparable form of a node id. Raises NodeTextError."""
    if len(text) > _LONGEST:
        raise NodeTextError(f"longer than {_LONGEST} characters")
    if text.startswith("ns="):
        raise NodeTextError("a namespace index can change at the server; give the URI with nsu=")
    match = _NODE.fullmatch(text)
    if match is None:
        raise NodeTextError("not of the form nsu=<namespace URI>;s=...")
    if any(not sign.isprintable() for sign in text):
        raise NodeTextError("contains a sign that cannot be printed")
    uri, kind, identifier = match["uri"], match["kind"], match["id"]
    if uri != uri.strip() or identifier != identifier.strip():
        raise NodeTextError("has a space at the start or end of a part")
    if _BAD_ESCAPE.search(uri):
        raise NodeTextError("has a % in the URI that is not followed by two hexadecimal digits")
    return SameNode(unquote(uri), kind, _same_identifier(kind, identifier))


def _same_identifier(kind: str, identifier: str) -> str:
    if kind == "i":
        # ASCII digits only: int() would take other scripts' digits, signs and underscores.
        if not re.fullmatch(r"[0-9]{1,10}", identifier) or int(identifier) > 0xFFFFFFFF:
            raise NodeTextError("i= must be a whole number from 0 to 4294967295")
        return str(int(identifier))
    if kind == "g":
        if not _GUID.fullmatch(identifier):
            raise NodeTextError("g= must look like 09087e75-8e5e-499b-954f-f2a9603db28a")
        return str(uuid.UUID(identifier))
    if kind == "b":
        try:
            return base64.b64decode(identifier, validate=True).hex()
        except (binascii.Error, ValueError) as error:
            raise NodeTextError("b= must be base64") from error
    return identifier
