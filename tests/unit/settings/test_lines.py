"""The line of every kind of key."""

from __future__ import annotations

from edgectl.settings.lines import LineIndex, Path

TEXT = '''\
# a = 1
top = "x # not a comment" # [no.table]
[a.b]          # comment
one = [1, 2,   # [three]
  3, "]", [4],
  { x = 5, y.z = 6 }]
long = """
[not.a.table]
two = 2 \\""" still
"""
raw = \'\'\'
key = "\'\'\'
"q.\\u0061" . 'r' . s = { t = 1979-05-27T07:32:00Z }
[[list]]
k = 1
[list.inner]
m = 2
[[list.deep]]
n = 1
[[list.deep]]
n = 2
[[ list ]]
k = ""
[a]
c = +inf
'''

EXPECTED: dict[Path, int] = {
    ("top",): 2,
    ("a",): 3,
    ("a", "b"): 3,
    ("a", "b", "one"): 4,
    ("a", "b", "one", 0): 4,
    ("a", "b", "one", 2): 5,
    ("a", "b", "one", 4, 0): 5,
    ("a", "b", "one", 5, "x"): 6,
    ("a", "b", "one", 5, "y", "z"): 6,
    ("a", "b", "long"): 7,
    ("a", "b", "raw"): 11,
    ("a", "b", "q.a", "r", "s", "t"): 13,
    ("list",): 14,
    ("list", 0, "k"): 15,
    ("list", 0, "inner"): 16,
    ("list", 0, "inner", "m"): 17,
    ("list", 0, "deep", 0, "n"): 19,
    ("list", 0, "deep", 1): 20,
    ("list", 0, "deep", 1, "n"): 21,
    ("list", 1): 22,
    ("list", 1, "k"): 23,
    ("a", "c"): 25,
    # Not written down: the nearest enclosing key that is.
    ("a", "b", "none"): 3,
    ("list", 1, "none", "none"): 22,
    ("none",): 1,
}


def test_every_kind_of_key_has_its_line() -> None:
    index = LineIndex(TEXT)
    assert {path: index.line(path) for path in EXPECTED} == EXPECTED


def test_line_ends_of_another_system_count_once() -> None:
    index = LineIndex(TEXT.replace("\n", "\r\n"))
    assert {path: index.line(path) for path in EXPECTED} == EXPECTED


def test_every_line_of_the_example_is_found(whole: str) -> None:
    index = LineIndex(whole)
    header = ""
    seen: dict[str, int] = {}
    for number, line in enumerate(whole.splitlines(), 1):
        if line.startswith("["):
            header = line.split("#")[0].strip().strip("[]")
            seen[header] = seen.get(header, -1) + 1
        elif " = " in line and not line.startswith("#"):
            path: Path = tuple(header.split("."))
            if header == "column.component":
                path = (*path, seen[header])
            assert index.line((*path, line.split(" = ")[0].strip())) == number
