"""The hash covers every column, and no two rows share a framing."""

from __future__ import annotations

import hashlib
from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st

from edgectl.journal.chain import (
    META,
    ChainEnd,
    Row,
    break_between,
    framed,
    genesis,
    hash_of,
    row_bytes,
    sealed,
)

column = (
    st.none()
    | st.integers(-(2**63), 2**63 - 1)
    | st.floats(allow_nan=False)
    | st.text(max_size=5)
    | st.binary(max_size=5)
)
columns = st.lists(column, max_size=6)


def typed(values: list[Any]) -> list[tuple[str, str]]:
    """1, 1.0, "1" and -0.0 are four different things here."""
    return [(type(value).__name__, repr(value)) for value in values]


def chain_of(length: int) -> list[Row]:
    rows: list[Row] = []
    end = ChainEnd(0, genesis(META))
    for i in range(length):
        rows.append(sealed(end, "event", i, 1e9 + i, f'{{"n":{i}}}'))
        end = ChainEnd(rows[-1].seq, rows[-1].entry_hash)
    return rows


def first_break(rows: list[Row]) -> str | None:
    end = ChainEnd(0, genesis(META))
    for row in rows:
        if why := break_between(end, row):
            return why
        end = ChainEnd(row.seq, row.entry_hash)
    return None


def test_the_genesis_of_schema_1_is_fixed() -> None:
    by_hand = hashlib.sha256(b"t15:edgectl journalt14:schema_versiont1:1").hexdigest()
    assert by_hand == "f4beaba8859d045fd16e907f89d6638dcc934370c64b5fcf86d4b28f4f961830"
    assert genesis(META) == by_hand


def test_the_framing_of_a_row_by_hand() -> None:
    row = Row(7, "event", None, 1.5, "{}", "ab", "")
    by_hand = b"i1:7t5:eventn0:f8:\x3f\xf8\0\0\0\0\0\0t2:{}t2:ab"
    assert hash_of(row) == hashlib.sha256(by_hand).hexdigest()


@given(columns, columns)
def test_different_columns_have_different_framings(one: list[Any], other: list[Any]) -> None:
    assert (framed(one) == framed(other)) == (typed(one) == typed(other))


@given(st.lists(st.text(max_size=6), min_size=2, max_size=2), st.integers(0, 6))
def test_text_cannot_move_to_the_next_column(pair: list[str], cut: int) -> None:
    whole = pair[0] + pair[1]
    moved = [whole[:cut], whole[cut:]]
    assert (framed(pair) == framed(moved)) == (pair == moved)


@given(st.dictionaries(st.text(max_size=4), st.text(max_size=4), max_size=3))
def test_the_genesis_changes_with_the_meta_table(meta: dict[str, str]) -> None:
    assert (genesis(meta) == genesis(META)) == (meta == META)
    assert genesis(dict(reversed(meta.items()))) == genesis(meta)


def test_an_honest_chain_has_no_break() -> None:
    assert first_break(chain_of(8)) is None


@given(
    index=st.integers(0, 5),
    field=st.sampled_from(Row._fields),
    value=column,
)
def test_any_change_of_any_column_is_seen(index: int, field: str, value: Any) -> None:
    rows = chain_of(6)
    was = getattr(rows[index], field)
    rows[index] = rows[index]._replace(**{field: value})
    changed = typed([was]) != typed([value])
    assert (first_break(rows) is not None) == changed


@given(st.permutations(range(5)))
def test_any_reordering_is_seen(order: list[int]) -> None:
    rows = chain_of(5)
    assert (first_break([rows[i] for i in order]) is None) == (order == sorted(order))


@given(st.sets(st.integers(0, 5), max_size=5))
def test_any_removal_but_the_tails_is_seen(removed: set[int]) -> None:
    rows = [row for i, row in enumerate(chain_of(6)) if i not in removed]
    only_tail = removed == set(range(len(rows), 6))
    assert (first_break(rows) is None) == only_tail


def test_a_rehashed_row_breaks_the_next_one() -> None:
    rows = chain_of(4)
    forged = rows[1]._replace(body='{"n":99}')
    rows[1] = forged._replace(entry_hash=hash_of(forged))
    why = first_break(rows)
    assert why == "entry 3 does not follow entry 2: its previous_hash is another one"


@pytest.mark.parametrize(
    ("change", "why"),
    [
        ({"seq": 9}, "entry 1 is missing: the next one is 9"),
        ({"body": "{}"}, "entry 1 was altered: its columns do not give its hash"),
    ],
)
def test_a_break_says_where_and_how(change: dict[str, Any], why: str) -> None:
    assert first_break([chain_of(1)[0]._replace(**change)]) == why


def test_a_chain_of_another_meta_table_does_not_fit() -> None:
    row = sealed(ChainEnd(0, genesis({"schema_version": "2"})), "event", 1, 1.0, "{}")
    assert first_break([row]) == (
        "entry 1 does not follow the meta table: its previous_hash is another one"
    )


def test_row_bytes_counts_what_the_columns_hold() -> None:
    assert row_bytes(Row(1, "event", None, 1.0, '{"a":"°"}', "a" * 64, "b" * 64)) == (
        8 + 5 + 0 + 8 + 10 + 64 + 64
    )
