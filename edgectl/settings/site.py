"""The whole site file. A key's path in the file is its path here."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Annotated, Any, Final, Literal

from pydantic import Field, PrivateAttr

from edgectl.settings.column import Column, OperatingPoint
from edgectl.settings.fields import Count, Named, NodeText, Positive, Says, Section, Text
from edgectl.settings.goals import (
    ControlledVariable,
    DisturbanceVariable,
    Estimation,
    ManipulatedVariable,
    Planning,
)
from edgectl.settings.tags import Tag

# No sign that could set off a user or password from the host.
_ENDPOINT: Final = (
    r"^opc\.tcp://([A-Za-z0-9._-]+|\[[0-9A-Fa-f:.]+\])(:[0-9]{1,5})?(/[A-Za-z0-9._~%/-]*)?$"
)


class About(Section):
    """What this file is about."""

    name: Text
    """Name of the site, for people."""


class Server(Section):
    """The plant's OPC UA server, and how to log in."""

    endpoint: Annotated[
        str,
        Field(pattern=_ENDPOINT, max_length=300),
        Says("opc.tcp://host:port/path, without user or password"),
    ]
    """Where the server listens."""
    # Certificates and policies will be further words here, with their own keys.
    security: Literal["none"]
    """Security policy. `none` is for testing on loopback only (OPC 10000-2)."""
    allow_insecure: bool = False
    """Must be true for security `none`."""
    user: Text | None = None
    """User name; without one the session is anonymous."""
    password_env: (
        Annotated[
            str,
            Field(pattern=r"^[A-Za-z_][A-Za-z0-9_]{0,99}$"),
            Says("the name of an environment variable"),
        ]
        | None
    ) = None
    """Environment variable that holds the password."""
    password_file: (
        Annotated[str, Field(pattern=r"^/[ -~]+$", max_length=1000), Says("an absolute path")]
        | None
    ) = None
    """File that holds the password."""
    read_timeout_s: Positive
    """Wall seconds that reading the tags may take."""
    write_timeout_s: Positive
    """Wall seconds that writing the advice may take."""
    clock_offset_limit_s: Positive
    """Plant seconds by which the server's clock may differ."""


class Cycle(Section):
    """The rhythm of the cycles."""

    period_s: Positive
    """Plant seconds from one cycle to the next."""
    budget_s: Positive
    """Wall seconds for estimate and plan; at most 0.8 of the wall period is enforced."""
    journal_wait_s: Positive
    """Wall seconds to wait for the journal, kept back from the period."""
    hold_limit: Count
    """Holds in a row before the standing is silent."""
    validity_s: Positive
    """Plant seconds an advice stays valid without confirmation."""
    warm_up_cycles: Count
    """Cycles after a start that publish `valid = false`."""
    restore_max_age_s: Positive
    """Plant seconds; an older memory is not restored, the start is cold."""


class Pace(Section):
    """How often a person is asked for a hand."""

    interval_s: Positive
    """Plant seconds between changes of a suggestion, at least."""
    act_within_s: Positive
    """Plant seconds in which a person is expected to act."""
    repeat_limit_h: Annotated[int, Field(ge=1, le=60)]
    """Most suggestions in an hour."""


class AdvisoryMove(Section):
    """Where one MV's suggestion is written."""

    target: NodeText
    """Absolute target in the MV's unit."""
    reason: NodeText
    """Why, one stable word."""


class Advisory(Section):
    """The write fence: nothing else is ever written.

    Leave the section out, and `run` plans and journals but publishes nothing.
    """

    valid: NodeText
    """Whether the advice stands."""
    valid_until: NodeText
    """Until when it stands without confirmation."""
    made_at: NodeText
    """When the suggestion last changed."""
    cycle: NodeText
    """Number of the cycle."""
    heartbeat: NodeText
    """Moves on only when a whole cycle made progress."""
    standing: NodeText
    """What the runtime vouches for."""
    reason: NodeText
    """Why the standing is what it is, one stable word."""
    sentence: NodeText
    """The same as a sentence."""
    moves: Named[AdvisoryMove]
    """One section for each MV."""

    def nodes(self) -> frozenset[str]:
        """Every node that may be written, as the file spells it."""
        own = {getattr(self, name) for name in type(self).model_fields if name != "moves"}
        return frozenset(own.union(*((m.target, m.reason) for m in self.moves.values())))


class Site(Section):
    """A site file that passed every check. Made by `load_site` and `parse_site`."""

    site: About
    """What this file is about."""
    server: Server
    """The plant's server."""
    cycle: Cycle
    """The rhythm of the cycles."""
    advice: Pace
    """How often a person is asked for a hand."""
    column: Column
    """The column model."""
    operating_point: OperatingPoint
    """Where the column usually runs."""
    tags: Named[Tag]
    """What is read, by name."""
    mv: Named[ManipulatedVariable]
    """What is advised, by name."""
    cv: Named[ControlledVariable]
    """What is to be reached, by name."""
    dv: Named[DisturbanceVariable]
    """What is fed forward, by name."""
    estimation: Estimation
    """How the model follows the plant."""
    planning: Planning
    """How the plan is made."""
    advisory: Advisory | None = None
    """The write fence; without it nothing is published."""

    _hash: str = PrivateAttr(default="")

    @property
    def hash(self) -> str:
        """SHA-256 of the file's bytes, hexadecimal."""
        return self._hash

    def as_dict(self) -> dict[str, Any]:
        """The whole content with defaults filled in, ready for JSON; `None` where absent."""
        return self.model_dump(mode="json")

    @classmethod
    def from_dict(cls, content: Mapping[str, Any], file_hash: str) -> Site:
        """The site that `as_dict` was made from, in another process.

        Raises pydantic.ValidationError when the content is not what `as_dict` makes.
        """
        site = cls.model_validate(dict(content))
        site._hash = file_hash
        return site

    def write_fence(self) -> frozenset[str]:
        """The closed set of nodes that may ever be written; empty without `[advisory]`."""
        return frozenset() if self.advisory is None else self.advisory.nodes()
