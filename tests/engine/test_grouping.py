"""Events by stream and pane: every event once, in its group, in the order in which it came."""

from __future__ import annotations

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st

from monitor.engine.grouping import groups_of

pairs = st.lists(
    st.tuples(st.integers(0, 5) | st.integers(0, 3000), st.integers(-2, 3) | st.integers(-(10**6), 10**9)),
    min_size=1,
    max_size=60,
)


@given(pairs, st.booleans())
@settings(max_examples=300)
def test_groups_hold_every_event_in_order(listed: list[tuple[int, int]], ordered: bool) -> None:
    if ordered:
        listed = sorted(listed)
    groups = groups_of(np.array([c for c, _ in listed], np.int32), np.array([p for _, p in listed], np.int64))
    expected: dict[tuple[int, int], list[int]] = {}
    for i, key in enumerate(listed):
        expected.setdefault(key, []).append(i)
    order = list(range(len(listed))) if groups.order is None else groups.order.tolist()
    found = {
        (int(c), int(p)): order[first : first + size]
        for c, p, first, size in zip(
            groups.codes, groups.panes, groups.firsts.tolist(), groups.sizes.tolist(), strict=True
        )
    }
    assert found == expected
    assert list(found) == sorted(expected)
