"""Finding rows by keys."""

import numpy as np
from hypothesis import given
from hypothesis import strategies as st

from linkwatch.voice.index import KeyIndex


def columns(keys):
    return tuple(np.array(word, np.uint64) for word in zip(*keys, strict=True))


keys = st.lists(st.tuples(*[st.integers(0, 3)] * 5), min_size=1, max_size=64, unique=True)


@given(known=keys, asked=keys, kept=st.data())
def test_each_key_finds_its_own_row_and_no_other(known, asked, kept):
    """Keys that were entered find their rows, others none, also after some were forgotten."""
    index = KeyIndex(64)
    index.add(np.arange(len(known)), columns(known))
    rows = {key: row for row, key in enumerate(known)}
    assert index.find(columns(asked)).tolist() == [rows.get(key, -1) for key in asked]
    keep = kept.draw(st.sets(st.sampled_from(range(len(known)))))
    index.keep(np.array(sorted(keep), np.int64))
    expected = [row if (row := rows.get(key, -1)) in keep else -1 for key in asked]
    assert index.find(columns(asked)).tolist() == expected


def test_a_full_index_still_answers():
    """With every row taken, keys that are not there are found not to be there."""
    index = KeyIndex(256)
    index.add(np.arange(256), columns([(0, 0, 0, 0, i) for i in range(256)]))
    asked = columns([(0, 0, 0, 0, i) for i in range(512)])
    assert index.find(asked).tolist() == [*range(256), *[-1] * 256]
