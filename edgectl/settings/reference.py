"""The reference of every key, written from the models themselves.

`python -m edgectl.settings.reference > deploy/notes/site-file.md` renews it; a
test fails when it is stale.
"""

from __future__ import annotations

import inspect
import sys
from collections.abc import Iterator
from typing import Final, get_args, get_origin

from pydantic import BaseModel
from pydantic.fields import FieldInfo

from edgectl.records.units import UNITS
from edgectl.settings.checks import RULES
from edgectl.settings.checks_tags import UNITS_OF_ROLE
from edgectl.settings.fields import allowed_words
from edgectl.settings.findings import section_of
from edgectl.settings.load import LARGEST_FILE_BYTES, LONGEST_LINE
from edgectl.settings.parts import NAMED
from edgectl.settings.site import Site

_HEAD: Final = f"""# The site file

One TOML file describes a column, its tags, goals, limits and server.
`deploy/examples/methanol_water.toml` is a whole one, of an invented plant.

This page is written by `python -m edgectl.settings.reference` from the same
models that check the file; a test fails when it is stale.

- Unknown keys, NaN, infinities and numbers in quotes are refused; a whole
  number may stand where a number is asked for.
- Everything that is wrong is named at once: file, line, key, value, what is
  allowed, how to mend it. Exit code 78.
- UTF-8, at most {LARGEST_FILE_BYTES} bytes, lines of at most {LONGEST_LINE} characters.
- A password is never in the file: `password_env` or `password_file` say where it is.
- Nodes are `nsu=<namespace URI>;s=...` (or `i=`, `g=`, `b=`). A namespace index
  is refused: it may change when the server restarts.
- Without `[advisory]` nothing is published: cycles are planned and journalled only.

Advice only: the operator decides, and final authority stays with the site's
safety instrumented systems and its licensed people.
"""


def site_file_reference() -> str:
    """The reference as Markdown."""
    lines = [_HEAD]
    for key, field in Site.model_fields.items():
        model = NAMED.get(key) or section_of(field.annotation)
        assert model is not None, key
        header = f"[{key}.NAME]" if key in NAMED else f"[{key}]"
        lines += _section(header, model, needed=field.is_required())
    lines += _roles()
    lines += ["## Units", "", ", ".join(f"`{name}`" for name in UNITS) + ".", ""]
    lines += ["## Rules between keys", ""]
    lines += [f"- {' '.join((inspect.getdoc(rule) or '').split())}" for rule in RULES]
    return "\n".join(lines) + "\n"


def _section(header: str, model: type[BaseModel], *, needed: bool) -> Iterator[str]:
    yield f"## `{header}`"
    yield ""
    yield inspect.getdoc(model) or ""
    if not needed:
        yield ""
        yield "The section may be left out."
    yield ""
    yield "| key | allowed | default | meaning |"
    yield "|---|---|---|---|"
    inner: list[tuple[str, type[BaseModel], bool]] = []
    for key, field in model.model_fields.items():
        below = section_of(field.annotation)
        if below is None:
            yield _row(key, field)
        else:
            inner.append((_inner_header(header, key, field), below, field.is_required()))
    yield ""
    for name, below, below_needed in inner:
        yield from _section(name, below, needed=below_needed)


def _inner_header(header: str, key: str, field: FieldInfo) -> str:
    own = f"{header.strip('[]')}.{key}"
    if get_origin(field.annotation) is tuple:
        return f"[[{own}]]"
    named = get_args(field.annotation) and not field_is_optional(field)
    return f"[{own}.NAME]" if named else f"[{own}]"


def field_is_optional(field: FieldInfo) -> bool:
    """Whether the key may be absent with no value at all."""
    return type(None) in get_args(field.annotation)


def _row(key: str, field: FieldInfo) -> str:
    words = allowed_words(field.annotation, field.metadata).replace("|", "\\|")
    if field.is_required():
        default = "needed"
    elif field.default is None:
        default = "none"
    else:
        default = (
            str(field.default).lower() if isinstance(field.default, bool) else f"{field.default}"
        )
    meaning = " ".join((field.description or "").split())
    return f"| `{key}` | {words} | {default} | {meaning} |"


def _roles() -> Iterator[str]:
    yield "## Roles of tags"
    yield ""
    yield "| role | units |"
    yield "|---|---|"
    for role, units in UNITS_OF_ROLE.items():
        words = "any" if len(units) == len(UNITS) else ", ".join(f"`{unit}`" for unit in units)
        yield f"| `{role}` | {words} |"
    yield ""


if __name__ == "__main__":
    sys.stdout.write(site_file_reference())
