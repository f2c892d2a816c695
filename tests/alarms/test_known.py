"""Known changes: which streams and moments they cover, and what they do to baselines."""

from __future__ import annotations

from monitor.alarms.known import KnownChange, hold, kept_out, new_baseline_after


def change(start: int, end: int, effect: str = "hold notices", streams: str = "*", reason: str = "fair") -> KnownChange:
    return KnownChange(start=start, end=end, streams=streams, reason=reason, effect=effect)  # type: ignore[arg-type]


def test_a_change_covers_its_start_but_not_its_end_and_only_its_streams() -> None:
    one = change(10, 20, streams="north-*")
    assert [one.covers("north-dock", t) for t in (9, 10, 19, 20)] == [False, True, True, False]
    assert not one.covers("south-dock", 15)
    assert not one.covers("North-dock", 15)


def test_of_several_holds_the_one_that_ends_last_counts() -> None:
    known = [change(0, 20, reason="a"), change(5, 30, reason="b"), change(0, 99, "not in baseline", reason="c")]
    assert hold(known, "x", 4).reason == "a"  # type: ignore[union-attr]
    assert hold(known, "x", 10).reason == "b"  # type: ignore[union-attr]
    assert hold(known, "x", 50) is None


def test_a_baseline_may_not_share_time_with_a_change_that_keeps_it_out() -> None:
    known = [change(50, 60, "new baseline after"), change(10, 20, "not in baseline"), change(0, 99)]
    assert kept_out(known, "x", 20, 50) == ()
    assert [one.start for one in kept_out(known, "x", 19, 51)] == [10, 50]


def test_a_new_baseline_starts_where_the_last_change_of_its_kind_ended() -> None:
    known = [change(10, 20, "new baseline after"), change(30, 40, "new baseline after", streams="y")]
    assert new_baseline_after(known, "x", since=0, t=19) is None
    assert new_baseline_after(known, "x", since=0, t=20) == known[0]
    assert new_baseline_after(known, "x", since=20, t=99) is None
    assert new_baseline_after(known, "y", since=0, t=99) == known[1]
