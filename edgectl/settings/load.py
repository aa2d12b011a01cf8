"""Read a site file: every mistake at once, or a `Site`."""

from __future__ import annotations

import hashlib
import re
import tomllib
from collections.abc import Iterable
from pathlib import Path
from typing import Any, Final

from edgectl.settings.checks import cross_complaints
from edgectl.settings.findings import Complaint, Finding, SiteFileError
from edgectl.settings.lines import LineIndex
from edgectl.settings.parts import take_apart
from edgectl.settings.site import Site

LARGEST_FILE_BYTES: Final = 1024 * 1024
LONGEST_LINE: Final = 1000
DEEPEST: Final = 12
MOST_VALUES: Final = 20_000
MOST_FINDINGS: Final = 500


def load_site(path: Path | str) -> Site:
    """The site in that file. Raises SiteFileError, naming everything that is wrong."""
    path = Path(path)
    file = str(path)
    # Who may write the file will be checked here too, before it is read.
    if not path.is_file():
        what = "not a regular file" if path.exists() else "not found"
        raise _whole_file(file, what, "a readable TOML file", "give the path of the site file")
    try:
        with path.open("rb") as stream:
            data = stream.read(LARGEST_FILE_BYTES + 1)
    except OSError as error:
        raise _whole_file(
            file, str(error.strerror), "a readable TOML file", "let this user read it"
        ) from error
    return _parse(data, file)


def parse_site(text: str, name: str) -> Site:
    """The site in that text. Raises SiteFileError, naming everything that is wrong.

    Parameters
    ----------
    text : str
        TOML.
    name : str
        What to call the file in messages.
    """
    return _parse(text.encode("utf-8", "surrogatepass"), name)


def json_schema() -> dict[str, Any]:
    """JSON Schema (draft 2020-12) of a site file; the checks between keys are not in it."""
    return Site.model_json_schema()


def _parse(data: bytes, file: str) -> Site:
    text = _decoded(data, file)
    raw, index = _read_toml(text, file)
    parts, complaints = take_apart(raw)
    wrong = {complaint.path for complaint in complaints}
    # A key that is wrong in itself need not be told what else it does not fit.
    complaints += [found for found in cross_complaints(parts) if found.path not in wrong]
    if complaints:
        raise SiteFileError(file, _findings(complaints, index, file))
    site = Site.model_validate({**parts.single, **parts.named})
    site._hash = hashlib.sha256(data).hexdigest()
    return site


def _decoded(data: bytes, file: str) -> str:
    if len(data) > LARGEST_FILE_BYTES:
        raise _whole_file(
            file, "too large", f"at most {LARGEST_FILE_BYTES} bytes", "is this the right file?"
        )
    try:
        text = data.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = data.count(b"\n", 0, error.start) + 1
        raise _whole_file(
            file, "not UTF-8", "text in UTF-8", "save the file in UTF-8", line
        ) from error
    for number, line_text in enumerate(text.split("\n"), 1):
        # The parser takes quadratic time for one endless dotted key.
        if len(line_text) > LONGEST_LINE:
            raise _whole_file(
                file,
                f"a line of {len(line_text)} characters",
                f"lines of at most {LONGEST_LINE} characters",
                "break the list into several lines",
                number,
            )
    return text


def _read_toml(text: str, file: str) -> tuple[dict[str, Any], LineIndex]:
    allowed = "TOML 1.0"
    try:
        raw = tomllib.loads(text)
        if (excess := _excess(raw)) is not None:
            raise _whole_file(file, excess, "a site file", "is this the right file?", 1)
        return raw, LineIndex(text)
    except RecursionError as error:
        raise _whole_file(
            file, "nested too deeply", "a site file", "is this the right file?", 1
        ) from error
    except ValueError as error:
        # tomllib's own errors are ValueErrors; int() adds one for endless digits.
        message = str(error)
        place = re.search(r"\(at (?:line (\d+), column \d+|end of document)\)", message)
        line = text.count("\n") + 1 if place and not place[1] else int(place[1]) if place else 1
        what = message[: place.start()].strip() if place else message
        raise _whole_file(
            file, f"not TOML: {_printable(what)}", allowed, "mend the syntax on this line", line
        ) from error


def _excess(raw: dict[str, Any]) -> str | None:
    """What there is too much of: the rest may then recurse and count without care."""
    level: list[Any] = [raw]
    values = 0
    for _ in range(DEEPEST):
        level = [inner for value in level for inner in _children(value)]
        values += len(level)
        if values > MOST_VALUES:
            return f"more than {MOST_VALUES} values"
    return f"nested more than {DEEPEST} deep" if level else None


def _children(value: object) -> Iterable[Any]:
    if isinstance(value, dict):
        return value.values()
    return value if isinstance(value, list) else ()


def _printable(text: str) -> str:
    return "".join(c if c.isprintable() else f"\\u{ord(c):04x}" for c in text)[:200]


def _whole_file(
    file: str, what: str, allowed: str, mend: str, line: int | None = None
) -> SiteFileError:
    return SiteFileError(file, [Finding(file, line, "", what, allowed, mend)])


def _findings(complaints: Iterable[Complaint], index: LineIndex, file: str) -> list[Finding]:
    found = [complaint.at(file, index.line(complaint.path)) for complaint in complaints]
    if len(found) <= MOST_FINDINGS:
        return found
    more = len(found) - MOST_FINDINGS
    return [
        *found[:MOST_FINDINGS],
        Finding(file, None, "", f"{more} more", "a site file", "mend these first"),
    ]
