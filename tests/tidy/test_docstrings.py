"""Every number of `properties` and `column` has unit and source; every package says what it is."""

from __future__ import annotations

import ast
import re
from collections.abc import Iterator
from pathlib import Path

import pytest

NUMERICAL_ROOMS = ("properties", "column")

Function = ast.FunctionDef | ast.AsyncFunctionDef

# `Any` is a float, an array or a symbol: what `xp` functions work on.
NUMBER = re.compile(r"\b(float|int|Any|NDArray|ndarray|ArrayLike|Vector|Matrix|Array)\b")
UNIT = re.compile(r"\[[^\]\n]+\]")
SECTION = re.compile(r"^(\w[\w ]*)\n-{3,}$", re.MULTILINE)
SOURCE = re.compile(
    r"^References\n-+$|\((1[89]|20)\d\d\)|common practice|own choice|by definition|from memory",
    re.MULTILINE,
)


def docstring_problems(source: str) -> list[str]:
    """What the docstrings of one numerical module lack."""
    tree = ast.parse(source)
    module_doc = ast.get_docstring(tree) or ""
    problems = [] if module_doc else ["the module has no docstring"]
    for node in tree.body:
        if isinstance(node, Function) and is_public(node.name):
            problems += function_problems(node, node.name, SOURCE.search(module_doc) is not None)
        elif isinstance(node, ast.ClassDef) and is_public(node.name):
            problems += class_problems(node, documented_methods(tree))
    return problems


def class_problems(node: ast.ClassDef, inherited: set[str]) -> Iterator[str]:
    if not ast.get_docstring(node):
        yield f"{node.name}: no docstring"
    for item in node.body:
        if not isinstance(item, Function) or not is_public(item.name):
            continue
        # A method that fills in a documented interface of the same file need not repeat it,
        # and `def exp(self, x: Any) -> Any: ...` in an interface says all by its name.
        is_named_only = ast.unparse(item.body[0]) == "..."
        if ast.get_docstring(item) is None and (item.name in inherited or is_named_only):
            continue
        # Methods rest on the functions of their module, whose sources are asked for.
        yield from function_problems(item, f"{node.name}.{item.name}", has_source=True)


def function_problems(node: Function, name: str, has_source: bool) -> Iterator[str]:
    doc = ast.get_docstring(node)
    if doc is None:
        yield f"{name}: no docstring"
        return
    parameters = dict(parameter_annotations(node))
    sections = split_sections(doc)
    entries = section_entries(sections.get("Parameters", ""))
    numbers = [key for key, annotation in parameters.items() if NUMBER.search(annotation)]
    is_method = "." in name
    if entries and list(entries) != list(parameters):
        yield f"{name}: documents {list(entries)}, takes {list(parameters)}"
    if numbers and not entries and not is_method:
        yield f"{name}: no Parameters section for {numbers}"
    for key in numbers:
        if key in entries and not UNIT.search(entries[key]):
            yield f"{name}: no [unit] for {key}"
    if returns_number(node):
        if not UNIT.search(sections.get("Returns", sections[""])):
            yield f"{name}: no [unit] for what it returns"
        if not has_source and not SOURCE.search(doc):
            yield f"{name}: no source (References section)"


def documented_methods(tree: ast.Module) -> set[str]:
    classes = [node for node in tree.body if isinstance(node, ast.ClassDef)]
    return {
        item.name
        for node in classes
        for item in node.body
        if isinstance(item, Function) and ast.get_docstring(item)
    }


def parameter_annotations(node: Function) -> Iterator[tuple[str, str]]:
    arguments = node.args
    for argument in (*arguments.posonlyargs, *arguments.args, *arguments.kwonlyargs):
        if argument.arg not in ("self", "cls"):
            yield argument.arg, ast.unparse(argument.annotation) if argument.annotation else ""


def returns_number(node: Function) -> bool:
    return node.returns is not None and NUMBER.search(ast.unparse(node.returns)) is not None


def split_sections(doc: str) -> dict[str, str]:
    """Section title to text; the text before the first section is under ''."""
    pieces = SECTION.split(doc)
    return {"": pieces[0]} | dict(zip(pieces[1::2], pieces[2::2], strict=True))


def section_entries(text: str) -> dict[str, str]:
    """Parameter name to everything said of it; `a, b : float` counts for both."""
    entries: dict[str, str] = {}
    names: list[str] = []
    for line in text.splitlines():
        if line and not line[0].isspace():
            names = [name.strip().lstrip("*") for name in line.split(":")[0].split(",")]
        for name in names:
            entries[name] = entries.get(name, "") + line + "\n"
    return entries


def is_public(name: str) -> bool:
    return not name.startswith("_")


@pytest.mark.parametrize("room", NUMERICAL_ROOMS)
def test_numerical_docstrings_are_complete(room: str, repo_root: Path) -> None:
    problems = [
        f"{path.relative_to(repo_root)}: {problem}"
        for path in sorted((repo_root / "edgectl" / room).rglob("*.py"))
        if path.name != "__init__.py"
        for problem in docstring_problems(path.read_text())
    ]
    assert not problems, "\n".join(problems)


def test_every_package_says_what_it_is(repo_root: Path, production_files: list[Path]) -> None:
    inits = [path for path in production_files if path.name == "__init__.py"]
    folders = {path.parent for path in production_files}
    without_init = sorted(
        str(f.relative_to(repo_root)) for f in folders - {p.parent for p in inits}
    )
    silent = [
        str(path.relative_to(repo_root))
        for path in inits
        if not ast.get_docstring(ast.parse(path.read_text()))
    ]
    assert not without_init, f"folders with code and without __init__.py: {without_init}"
    assert not silent, f"packages without a docstring: {silent}"


GOOD_SAMPLE = '''"""Good."""

def weir_crest_m(flow_m3_s: float, side: str) -> float:
    """Crest.

    Parameters
    ----------
    flow_m3_s : float
        Flow [m3/s].
    side : str
        Which.

    Returns
    -------
    float
        Crest [m].

    References
    ----------
    Francis formula (from memory).
    """


class Interface:
    """What both offer."""

    def crest(self, flow: Any) -> Any:
        """Crest [m], by definition."""


class Weir:
    """A weir."""

    def crest(self, flow: Any) -> Any:
        return flow
'''

FAULTS = {
    "no docstring": ('"""A weir."""', "pass"),
    "documents ['flow', 'side']": ("flow_m3_s : float", "flow : float"),
    "no Parameters section": ("Parameters\n    ----------", "Nothing"),
    "no [unit] for flow_m3_s": ("Flow [m3/s]", "Flow"),
    "no [unit] for what it returns": ("Crest [m].\n\n    Ref", "Crest.\n\n    Ref"),
    "no source": ("References\n    ----------\n    Francis formula (from memory).", ""),
    "the module has no docstring": ('"""Good."""', ""),
}


def test_a_good_sample_has_no_problem() -> None:
    assert docstring_problems(GOOD_SAMPLE) == []


@pytest.mark.parametrize("fault", sorted(FAULTS))
def test_each_fault_is_seen(fault: str) -> None:
    old, new = FAULTS[fault]
    assert old in GOOD_SAMPLE
    problems = docstring_problems(GOOD_SAMPLE.replace(old, new, 1))
    assert any(fault in problem for problem in problems), problems


def test_a_method_without_documented_interface_is_seen() -> None:
    sample = GOOD_SAMPLE.replace('"""Crest [m], by definition."""', "...")
    assert "Weir.crest: no docstring" in docstring_problems(sample)
