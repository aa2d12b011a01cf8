"""What is wrong with a site file, in plain words: all of it at once."""

from __future__ import annotations

import difflib
import json
import math
import re
from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass
from typing import Annotated, Any, Final, get_args, get_origin

from pydantic import BaseModel, ValidationError
from pydantic.fields import FieldInfo

from edgectl.settings.fields import allowed_words
from edgectl.settings.lines import Path

_BARE: Final = re.compile(r"[A-Za-z0-9_-]+")
_SECRET: Final = re.compile(r"passw|secret|token|passphrase|private", re.IGNORECASE)
_LOGIN: Final = re.compile(r"//[^\s]*@")
_NOT_SECRET: Final = frozenset({"password_file"})
_LONGEST_SHOWN: Final = 80

MISSING: Final = "(missing)"
HIDDEN: Final = "(not shown)"


@dataclass(frozen=True, slots=True)
class Finding:
    """One thing that is wrong in a site file."""

    file: str
    line: int | None
    """Counted from 1; None when the file could not be read at all."""
    key: str
    """Dotted, as in the file; empty when the finding is about the whole file."""
    value: str
    """As the file has it."""
    allowed: str
    mend: str
    """What to do about it."""

    def __str__(self) -> str:
        place = self.file if self.line is None else f"{self.file}:{self.line}"
        what = " = ".join(part for part in (self.key, self.value) if part)
        return f"{place}: {what}\n    allowed: {self.allowed}\n    to mend: {self.mend}"


class SiteFileError(Exception):
    """The site file is wrong; `findings` holds everything that is, in order of lines."""

    def __init__(self, file: str, findings: Iterable[Finding]) -> None:
        self.file = file
        self.findings = sorted(findings, key=lambda f: (f.line is None, f.line or 0, f.key))
        super().__init__(file, self.findings)

    def __str__(self) -> str:
        count = len(self.findings)
        head = f"site file {self.file}: {count} finding{'' if count == 1 else 's'}"
        return "\n".join([head, *map(str, self.findings)])


@dataclass(frozen=True, slots=True)
class Complaint:
    """A finding before it has a file and a line."""

    path: Path
    value: object
    allowed: str
    mend: str

    def at(self, file: str, line: int) -> Finding:
        value = HIDDEN if is_secret(self.path) and self.value != MISSING else shown(self.value)
        return Finding(file, line, dotted(self.path), value, self.allowed, self.mend)


def is_secret(path: Path) -> bool:
    """Whether the value of this key must never be repeated on a screen or in a log."""
    return any(
        isinstance(part, str) and part not in _NOT_SECRET and _SECRET.search(part) for part in path
    )


def dotted(path: Path) -> str:
    """The key as one would write it, with list positions counted from 1."""
    words = ""
    for part in path:
        if isinstance(part, int):
            words += f"[{part + 1}]"
        else:
            words += ("." if words else "") + (part if _BARE.fullmatch(part) else _quoted(part))
    return words


def shown(value: object) -> str:
    """A value as the file has it, safe on a terminal and not too long."""
    if isinstance(value, str):
        text = value if value in (MISSING, HIDDEN) else _quoted(_LOGIN.sub(f"//{HIDDEN}@", value))
    elif isinstance(value, bool):
        text = str(value).lower()
    elif isinstance(value, Mapping):
        text = "(a section)"
    elif isinstance(value, list | tuple):
        inner = ("[...]" if isinstance(item, list) else shown(item) for item in value[:10])
        text = f"[{', '.join(inner)}{', ...' if len(value) > 10 else ''}]"
    elif isinstance(value, int) and abs(value) > 10**30:
        text = "(a very large whole number)"
    else:
        text = str(value)
    return text if len(text) <= _LONGEST_SHOWN else text[: _LONGEST_SHOWN - 3] + "..."


def _quoted(text: str) -> str:
    quoted = json.dumps(text, ensure_ascii=False)
    # Direction marks and other invisible signs could make a line read differently.
    return "".join(c if c.isprintable() else f"\\u{ord(c):04x}" for c in quoted)


def nearest(name: str, known: Iterable[str]) -> str:
    """ "did you mean ...", or nothing."""
    close = difflib.get_close_matches(name[:100], list(known), n=1, cutoff=0.6)
    return f"did you mean `{close[0]}`?" if close else ""


def from_validation(
    model: type[BaseModel], error: ValidationError, prefix: Path
) -> Iterator[Complaint]:
    """Each of pydantic's errors in our words."""
    details = error.errors(include_url=False)
    # A list with a wrong item counts as too short as well: only the item is worth a finding.
    above = {detail["loc"][:size] for detail in details for size in range(len(detail["loc"]))}
    for detail in details:
        loc = detail["loc"]
        if loc in above:
            continue
        yield _complaint(model, (*prefix, *loc), loc, dict(detail))


def _complaint(
    model: type[BaseModel], path: Path, loc: Path, detail: Mapping[str, Any]
) -> Complaint:
    kind, value = detail["type"], detail["input"]
    owner, field = _field(model, loc)
    if kind == "extra_forbidden":
        return unknown_key(path, value, owner.model_fields)
    words = "a section" if field is None else allowed_words(field.annotation, field.metadata)
    if kind == "missing":
        if isinstance(path[-1], int):
            return Complaint(path, MISSING, words, "the list is too short; add what is missing")
        meaning = (field.description or "").split("\n")[0] if field else ""
        return Complaint(path, MISSING, words, f"add `{path[-1]}`: {meaning}")
    if kind == "finite_number" or (isinstance(value, float) and not math.isfinite(value)):
        return Complaint(path, value, words, "write a finite number; nan and inf are refused")
    mend = detail.get("ctx", {}).get("mend")
    return Complaint(path, value, words, mend or f"write {words}")


def unknown_key(path: Path, value: object, known: Iterable[str]) -> Complaint:
    """A key that no section has."""
    known = list(known)
    name = str(path[-1])
    guess = nearest(name, known)
    if is_secret(path):
        guess = "a password is never in the site file: use password_env or password_file"
    elif not guess:
        guess = "remove it"
    return Complaint(
        path, value, f"known keys here are {', '.join(known)}", f"unknown key; {guess}"
    )


def _field(model: type[BaseModel], loc: Path) -> tuple[type[BaseModel], FieldInfo | None]:
    """The section that a place lies in, and its field, if it has one."""
    field: FieldInfo | None = None
    for part in loc:
        if isinstance(part, int):
            if field is not None:
                field = _item(field)
            continue
        if field is not None:
            inner = section_of(field.annotation)
            if inner is None:
                return model, field
            model = inner
        field = model.model_fields.get(part)
        if field is None:
            return model, None
    return model, field


def _item(field: FieldInfo) -> FieldInfo:
    """The field of a list's items."""
    args = get_args(field.annotation)
    return FieldInfo.from_annotation(args[0]) if args else field


def section_of(annotation: Any) -> type[BaseModel] | None:
    """The section that a field of this type holds, if it holds one."""
    if isinstance(annotation, type) and issubclass(annotation, BaseModel):
        return annotation
    if get_origin(annotation) is Annotated:
        return section_of(get_args(annotation)[0])
    found = (section_of(inner) for inner in get_args(annotation))
    return next((section for section in found if section is not None), None)
