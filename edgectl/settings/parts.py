"""What can be known of a site file that may be wrong in places.

Every section, and every tag, MV, CV and DV by itself, is validated alone, so
that one mistake does not hide the others and the checks between sections can
run on whatever is sound.
"""

from __future__ import annotations

import copy
import re
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any, Final, TypeVar, cast

from pydantic import BaseModel, ValidationError

from edgectl.settings.column import Column, OperatingPoint
from edgectl.settings.findings import MISSING, Complaint, from_validation, unknown_key
from edgectl.settings.goals import (
    ControlledVariable,
    DisturbanceVariable,
    Estimation,
    ManipulatedVariable,
    Planning,
)
from edgectl.settings.lines import Path
from edgectl.settings.site import About, Advisory, Cycle, Pace, Server, Site
from edgectl.settings.tags import Role, Tag

Raw = Mapping[str, Any]
M = TypeVar("M", bound=BaseModel)

SINGLE: Final[dict[str, type[BaseModel]]] = {
    "site": About,
    "server": Server,
    "cycle": Cycle,
    "advice": Pace,
    "column": Column,
    "operating_point": OperatingPoint,
    "estimation": Estimation,
    "planning": Planning,
    "advisory": Advisory,
}
NAMED: Final[dict[str, type[BaseModel]]] = {
    "tags": Tag,
    "mv": ManipulatedVariable,
    "cv": ControlledVariable,
    "dv": DisturbanceVariable,
}
_NAME: Final = re.compile(r"[A-Za-z0-9][A-Za-z0-9_./-]{0,47}")


@dataclass(slots=True)
class Parts:
    """The sound sections, and the names that the file gives."""

    raw: Raw
    single: dict[str, BaseModel] = field(default_factory=dict)
    named: dict[str, dict[str, BaseModel]] = field(default_factory=dict)

    def section(self, kind: type[M]) -> M | None:
        """The section of that kind, if it is sound."""
        return next((part for part in self.single.values() if isinstance(part, kind)), None)

    @property
    def tags(self) -> Mapping[str, Tag]:
        return cast("Mapping[str, Tag]", self.named["tags"])

    @property
    def mv(self) -> Mapping[str, ManipulatedVariable]:
        return cast("Mapping[str, ManipulatedVariable]", self.named["mv"])

    @property
    def cv(self) -> Mapping[str, ControlledVariable]:
        return cast("Mapping[str, ControlledVariable]", self.named["cv"])

    @property
    def dv(self) -> Mapping[str, DisturbanceVariable]:
        return cast("Mapping[str, DisturbanceVariable]", self.named["dv"])

    def names(self, section: str) -> list[str]:
        """Names in `tags`, `mv`, `cv` or `dv`, sound or not."""
        return list(table(self.raw, section))

    def roles(self) -> dict[str, str]:
        """Role of each tag as the file has it, even where the tag is not sound."""
        tags = table(self.raw, "tags")
        found = {name: table(tags, name).get("role") for name in tags}
        known = {role.value for role in Role}
        return {n: role for n, role in found.items() if isinstance(role, str) and role in known}


def table(raw: Raw, key: str) -> Raw:
    """The sub-table, or an empty one."""
    inner = raw.get(key)
    return inner if isinstance(inner, Mapping) else {}


def take_apart(raw: Raw) -> tuple[Parts, list[Complaint]]:
    """Validate every section alone; the complaints are those of single fields."""
    parts = Parts(raw)
    known = Site.model_fields
    complaints = [unknown_key((key,), raw[key], known) for key in raw if key not in known]
    for key, model in SINGLE.items():
        if key not in raw and not Site.model_fields[key].is_required():
            continue
        if (found := _validated(model, raw, key, (key,), complaints)) is not None:
            parts.single[key] = found
    for key, model in NAMED.items():
        parts.named[key] = {}
        if not table(raw, key):
            value = raw.get(key, MISSING)
            complaints.append(
                Complaint(
                    (key,),
                    value,
                    f"at least one section [{key}.NAME]",
                    f"write a section [{key}.NAME]",
                )
            )
        for name in table(raw, key):
            if not _NAME.fullmatch(name):
                complaints.append(_bad_name((key, name)))
            found = _validated(model, raw[key], name, (key, name), complaints)
            if found is not None:
                parts.named[key][name] = found
    return parts, complaints


def _bad_name(path: Path) -> Complaint:
    return Complaint(
        path,
        path[-1],
        "a name of up to 48 letters, digits and _ . / -, starting with a letter or digit",
        "rename it here and wherever it is used",
    )


def _validated(
    model: type[M], raw: Raw, key: str, path: Path, complaints: list[Complaint]
) -> M | None:
    """The sound section; failing that, what is left of it without its wrong optional keys."""
    if not isinstance(raw.get(key), Mapping):
        value, name = raw.get(key, MISSING), ".".join(map(str, path))
        complaints.append(Complaint(path, value, "a section", f"write a section [{name}]"))
        return None
    try:
        return model.model_validate(raw[key])
    except ValidationError as error:
        complaints.extend(from_validation(model, error, path))
        rest = copy.deepcopy(raw[key])
        for detail in error.errors(include_url=False):
            _remove(rest, tuple(detail["loc"]))
    try:
        # Never used as settings: only to let the checks between sections speak too.
        return model.model_validate(rest)
    except ValidationError:
        return None


def _remove(tree: Any, path: Path) -> None:
    """Take the key out of the tree, or the list that it lies in."""
    for part in path[:-1]:
        if not isinstance(part, str) or not isinstance(tree.get(part), dict):
            tree.pop(part, None)
            return
        tree = tree[part]
    tree.pop(path[-1], None)
