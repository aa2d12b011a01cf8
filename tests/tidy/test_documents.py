"""What the documents tell people to type and to open exists; no word of the workshop is left."""

from __future__ import annotations

import importlib
import re
from collections.abc import Iterator
from pathlib import Path

import click
import pytest

DOCUMENTS = ("README.md", "DEVELOPERS.md", "deploy/notes")

FENCED = re.compile(r"^```.*?\n(.*?)^```", re.MULTILINE | re.DOTALL)
INLINE = re.compile(r"`([^`\n]+)`")
COMMAND = re.compile(r"(?:^|[\s/;&|(])edgectl[ \t]+([a-z][a-z-]*)([^\n;&|`]*)")
OPTION = re.compile(r"(?<![\w-])--[a-z][a-z-]*")
PATH = re.compile(r"(?<![\w/.$~-])(\.?[A-Za-z_][\w-]*(?:/[\w.-]+)+/?)(?![\w*{<])")
MODULE = re.compile(r"python3? -m ([a-z_]\w*(?:\.\w+)*)")
NOT_OURS = {"venv", "pip", "pytest", "ruff", "mypy"}

# Spelt in two halves so that this file does not accuse itself.
STRAY_WORDS = (
    r"\blec" + r"tures?\b",
    r"\btrans" + r"cripts?\b",
    r"\.\./sha" + r"red",
    r"/work/" + r"(shared|main)",
    r"\bfa" + r"rm-\w",
    r"\biss" + r"ues (show|list|file)\b",
    r"\b(DESI" + r"GN|VOCABU" + r"LARY|FAU" + r"LTS|SOL" + r"VER|OPC" + r"UA)\.md",
    r"\bbefore-" + r"stop\b",
)
TWO_COMMANDS = (
    "python3 -m venv .venv && .venv/bin/pip install -c deploy/constraints.txt -e . "
    "&& .venv/bin/edgectl demo",
    "python3 -m venv .venv && .venv/bin/pip install -c deploy/constraints.txt -e '.[test]' "
    "&& .venv/bin/pytest",
)
TEXT_SUFFIXES = {
    "",
    ".csv",
    ".html",
    ".json",
    ".md",
    ".py",
    ".service",
    ".sql",
    ".svg",
    ".toml",
    ".txt",
    ".yaml",
    ".yml",
}


def code_of(text: str) -> list[str]:
    """Fenced blocks and inline code spans."""
    return FENCED.findall(text) + INLINE.findall(FENCED.sub("", text))


def command_problems(text: str, group: click.Group) -> Iterator[str]:
    for code in code_of(text):
        for name, rest in COMMAND.findall(code):
            command = group.commands.get(name)
            if command is None:
                yield f"`edgectl {name}` does not exist"
                continue
            known = {"--help"} | {
                option
                for parameter in (*command.params, *group.params)
                for option in (*parameter.opts, *parameter.secondary_opts)
            }
            yield from (
                f"`edgectl {name}` has no option {option}"
                for option in OPTION.findall(rest)
                if option not in known
            )


def path_problems(text: str, root: Path) -> Iterator[str]:
    """Paths that begin in one of our folders and lead nowhere; `runtime/x.py` is in `edgectl`."""
    for code in code_of(text):
        for path in PATH.findall(code):
            first = path.split("/")[0]
            bases = [base for base in (root, root / "edgectl") if (base / first).is_dir()]
            # What a run or an installation makes is not in the checkout.
            if first in (".venv", "runs") or not bases:
                continue
            if not any((base / path).exists() for base in bases):
                yield f"`{path}` does not exist"
        for module in MODULE.findall(code):
            if module.split(".")[0] in NOT_OURS:
                continue
            place = root.joinpath(*module.split("."))
            if not (place.with_suffix(".py").is_file() or (place / "__main__.py").is_file()):
                yield f"`python -m {module}` cannot run"


def stray_words(text: str) -> Iterator[str]:
    for number, line in enumerate(text.splitlines(), start=1):
        for pattern in STRAY_WORDS:
            if found := re.search(pattern, line, re.IGNORECASE):
                yield f"line {number}: {found.group()!r}"


@pytest.fixture(scope="module")
def documents(repo_root: Path) -> list[Path]:
    named = [repo_root / name for name in DOCUMENTS]
    found = [path for path in named if path.is_file()]
    return found + [page for path in named if path.is_dir() for page in sorted(path.rglob("*.md"))]


def test_commands_in_the_documents_exist(repo_root: Path, documents: list[Path]) -> None:
    group = importlib.import_module("edgectl.console.commands").main
    assert isinstance(group, click.Group)
    problems = [
        f"{path.relative_to(repo_root)}: {problem}"
        for path in documents
        for problem in command_problems(path.read_text(), group)
    ]
    assert not problems, "\n".join(problems)


@pytest.mark.parametrize("command", TWO_COMMANDS)
def test_the_readme_gives_the_two_commands_in_one_piece(command: str, repo_root: Path) -> None:
    text = (repo_root / "README.md").read_text()
    assert any(command in code for code in code_of(text)), command


def test_ci_runs_the_second_command(repo_root: Path) -> None:
    script = (repo_root / ".ci/run").read_text()
    assert "-c deploy/constraints.txt -e '.[test]'" in script
    assert "exec .venv/bin/pytest" in script


def test_files_in_the_documents_exist(repo_root: Path, documents: list[Path]) -> None:
    assert documents
    problems = [
        f"{path.relative_to(repo_root)}: {problem}"
        for path in documents
        for problem in path_problems(path.read_text(), repo_root)
    ]
    assert not problems, "\n".join(problems)


def test_no_stray_words(repo_root: Path, own_files: list[Path]) -> None:
    problems = [
        f"{path.relative_to(repo_root)}, {problem}"
        for path in own_files
        if path.suffix in TEXT_SUFFIXES
        for problem in stray_words(path.read_text(encoding="utf-8"))
    ]
    assert not problems, "\n".join(problems)


def test_each_fault_of_a_document_is_seen(tmp_path: Path) -> None:
    @click.group()
    def group() -> None: ...

    @group.command()
    @click.option("--hours", type=float)
    def demo(hours: float) -> None: ...

    good = "Run `edgectl demo --hours 2`:\n```\n.venv/bin/edgectl demo && echo done\n```\n"
    assert list(command_problems(good, group)) == []
    assert list(command_problems("`edgectl demos`", group)) == ["`edgectl demos` does not exist"]
    assert list(command_problems("```\nedgectl demo --days 2\n```\n", group)) == [
        "`edgectl demo` has no option --days"
    ]

    (tmp_path / "edgectl/runtime").mkdir(parents=True)
    (tmp_path / "edgectl/runtime/loop.py").touch()
    good = "Open `runtime/loop.py` or `edgectl/runtime/`; `.venv/bin/pytest`; `kmol/h`; pip/venv."
    assert list(path_problems(good, tmp_path)) == []
    assert list(path_problems("`runtime/lop.py`", tmp_path)) == ["`runtime/lop.py` does not exist"]
    assert list(path_problems("`python -m sim`", tmp_path)) == ["`python -m sim` cannot run"]


def test_each_stray_word_is_seen() -> None:
    samples = [
        "lec" + "ture",
        "a Trans" + "cript",
        "../sha" + "red/data",
        "/work/" + "main/x",
        "fa" + "rm-search",
        "iss" + "ues show 2",
        "DESI" + "GN.md",
        "before-" + "stop",
    ]
    assert len(samples) == len(STRAY_WORDS)
    for sample in samples:
        assert list(stray_words(f"x\n# {sample}\n")), sample
    assert list(stray_words("a shared house, designed by an issuer of manuscripts")) == []
