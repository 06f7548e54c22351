"""Names kept as bytes behave as the list of strings they stand for."""

from __future__ import annotations

import pickle

import pytest
from hypothesis import given
from hypothesis import strategies as st

from netpart.netlist import Names, UnknownNameError

TEXTS = st.lists(st.text(max_size=6), max_size=12)


@given(TEXTS, st.data())
def test_a_sequence_of_strings(texts: list[str], data: st.DataObject) -> None:
    names = Names.from_strings(texts)
    assert list(names) == texts
    assert len(names) == len(texts)
    assert names[1:5:2] == texts[1:5:2]
    assert [names[i] for i in range(-len(texts), len(texts))] == texts + texts
    with pytest.raises(IndexError):
        names[len(texts)]
    assert pickle.loads(pickle.dumps(names)) == names
    repeat = names.first_repeat()
    assert repeat == next((i for i, name in enumerate(texts) if name in texts[:i]), None)
    wanted = data.draw(st.text(max_size=6))
    assert (wanted in names) == (wanted in texts)
    if repeat is None:
        assert [names.find(name) for name in texts] == list(range(len(texts)))


def test_names_that_are_no_utf8_survive() -> None:
    names = Names.from_bytes([b"\xff\xfe", b"ok"])
    assert names.find(names[0]) == 0
    assert Names.from_strings(list(names)) == names
    with pytest.raises(UnknownNameError, match="unknown name 'x'"):
        names.find("x")


def test_numbered_and_blank_names() -> None:
    assert list(Names.numbered("n", 3)) == ["n0", "n1", "n2"]
    assert list(Names.blank(2)) == ["", ""]
    assert repr(Names.numbered("n", 5)) == "<Names: 5 ('n0', 'n1', 'n2', …)>"
