"""No file so long that nobody reads it, no function longer than a screen."""

from __future__ import annotations

import ast
from pathlib import Path

MAX_FILE_LINES = 400
MAX_FUNCTION_LINES = 60


def size_problems(source: str) -> list[str]:
    """Too long a file or function. A docstring does not count: length there is a service."""
    problems = []
    if (lines := len(source.splitlines())) > MAX_FILE_LINES:
        problems.append(f"{lines} lines in the file, at most {MAX_FILE_LINES}")
    for node in ast.walk(ast.parse(source)):
        if isinstance(node, ast.FunctionDef | ast.AsyncFunctionDef):
            lines = function_lines(node)
            if lines > MAX_FUNCTION_LINES:
                problems.append(f"{lines} lines in {node.name}, at most {MAX_FUNCTION_LINES}")
    return problems


def function_lines(node: ast.FunctionDef | ast.AsyncFunctionDef) -> int:
    last = node.end_lineno or node.lineno
    lines = last - node.lineno + 1
    if ast.get_docstring(node) is not None:
        docstring = node.body[0]
        lines -= (docstring.end_lineno or docstring.lineno) - docstring.lineno + 1
    return lines


def test_files_and_functions_stay_short(repo_root: Path, production_files: list[Path]) -> None:
    problems = [
        f"{path.relative_to(repo_root)}: {problem}"
        for path in production_files
        for problem in size_problems(path.read_text())
    ]
    assert not problems, "\n".join(problems)


def test_a_long_file_and_a_long_function_are_seen() -> None:
    body = "    x = 1\n" * MAX_FUNCTION_LINES
    docstring = '    """' + "Text.\n" * 100 + '"""\n'
    assert size_problems("def f():\n" + body) == ["61 lines in f, at most 60"]
    assert size_problems("def f():\n" + docstring + body[10:]) == []
    assert size_problems("x = 1\n" * 401) == ["401 lines in the file, at most 400"]
