"""Whoever silences a check says why, on the same line or on the line above."""

from __future__ import annotations

import ast
import io
import re
import tokenize
from collections.abc import Iterator
from pathlib import Path

# The comments are spelt in two halves so that this file does not accuse itself.
NOQA = re.compile(r"#\s*no" + r"qa\b(?P<codes>:\s*[A-Z]+\d+(?:\s*,\s*[A-Z]+\d+)*)?(?P<rest>.*)")
IGNORE = re.compile(r"#\s*type:\s*ig" + r"nore\b(?P<codes>\[[\w\-, ]+\])?(?P<rest>.*)")
NO_COVER = re.compile(r"#\s*pragma:\s*no co" + r"ver(?P<codes>)(?P<rest>.*)")
WORDS = re.compile(r"[A-Za-z]{3,}.*[A-Za-z]{2,}")
BROAD = {"Exception", "BaseException"}


def hidden_problems(source: str) -> list[str]:
    """Silenced checks and swallowed errors without a reason."""
    comments = {
        token.start[0]: token.string
        for token in tokenize.generate_tokens(io.StringIO(source).readline)
        if token.type == tokenize.COMMENT
    }
    return [
        *silenced(comments),
        *(f"line {line}: {what}" for line, what in broad_handlers(source, comments)),
        *(f"line {line}: {what}" for line, what in unexplained_skips(source, comments)),
    ]


def silenced(comments: dict[int, str]) -> Iterator[str]:
    for line, comment in comments.items():
        for pattern, what in ((NOQA, "noqa"), (IGNORE, "type: ignore"), (NO_COVER, "no cover")):
            found = pattern.search(comment)
            if found is None:
                continue
            if found["codes"] is None:
                yield f"line {line}: {what} without the rule's code"
            if not WORDS.search(found["rest"]) and not explained_above(line, comments):
                yield f"line {line}: {what} without a reason"


def explained_above(line: int, comments: dict[int, str]) -> bool:
    return WORDS.search(comments.get(line - 1, "")) is not None


def explained(line: int, comments: dict[int, str]) -> bool:
    return WORDS.search(comments.get(line, "")) is not None or explained_above(line, comments)


def broad_handlers(source: str, comments: dict[int, str]) -> Iterator[tuple[int, str]]:
    for node in ast.walk(ast.parse(source)):
        if not isinstance(node, ast.ExceptHandler):
            continue
        kinds = node.type.elts if isinstance(node.type, ast.Tuple) else [node.type]
        broad = any(kind is None or ast.unparse(kind) in BROAD for kind in kinds)
        if broad and not explained(node.lineno, comments):
            yield node.lineno, "a handler that catches everything, without a reason"


def unexplained_skips(source: str, comments: dict[int, str]) -> Iterator[tuple[int, str]]:
    tree = ast.parse(source)
    with_reason = {
        id(node.func)
        for node in ast.walk(tree)
        if isinstance(node, ast.Call) and any(keyword.arg == "reason" for keyword in node.keywords)
    }
    for node in ast.walk(tree):
        if isinstance(node, ast.Attribute) and node.attr in ("skip", "skipif", "xfail"):
            is_mark = ast.unparse(node.value).endswith("mark")
            if is_mark and id(node) not in with_reason and not explained(node.lineno, comments):
                yield node.lineno, f"{node.attr} without a reason"


def test_nothing_is_hidden_without_a_reason(repo_root: Path, python_files: list[Path]) -> None:
    problems = [
        f"{path.relative_to(repo_root)}, {problem}"
        for path in python_files
        for problem in hidden_problems(path.read_text())
    ]
    assert not problems, "\n".join(problems)


def test_each_way_to_hide_is_seen() -> None:
    no_qa, ignore = "# no" + "qa", "# type: ig" + "nore"
    handler = "try:\n    x()\n{}except {}:{}\n    pass\n"
    bad = [
        f"x = 1  {no_qa}",
        f"x = 1  {no_qa}: E501",
        f"x = 1  {ignore}",
        f"x = 1  {ignore}[arg-type]",
        handler.format("", "Exception", ""),
        handler.format("", "(ValueError, BaseException)", ""),
        "try:\n    x()\nexcept:\n    pass\n",
        "@pytest.mark.skip\ndef test_x(): ...",
        "@pytest.mark.xfail(strict=True)\ndef test_x(): ...",
    ]
    for sample in bad:
        assert hidden_problems(sample + "\n"), sample


def test_a_reason_is_enough() -> None:
    no_qa, ignore = "# no" + "qa", "# type: ig" + "nore"
    handler = "try:\n    x()\n{}except {}:{}\n    pass\n"
    good = [
        f"x = 1  {no_qa}: E501 a table reads better unwrapped",
        f"# the library has no types here\nx = 1  {ignore}[arg-type]",
        f"x = 1  {ignore}[arg-type]  # the library has no types here",
        handler.format("# a plug-in may raise anything\n", "Exception", ""),
        handler.format("", "Exception", "  # a plug-in may raise anything"),
        handler.format("", "ValueError", ""),
        "@pytest.mark.skipif(True, reason='no server')\ndef test_x(): ...",
    ]
    for sample in good:
        assert hidden_problems(sample + "\n") == [], sample
