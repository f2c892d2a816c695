"""Frames of the screen as plain text, reviewed by eye; and what holds for every size and every stream name."""

from __future__ import annotations

import re
from pathlib import Path

import msgspec
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from rich.text import Text

from monitor.cli.watching import StoreWatch
from monitor.render.focus import Focused, focus_page
from monitor.render.frame import ABNORMAL, Asked, Look, as_text
from monitor.render.help import help_page
from monitor.render.screen import overview
from monitor.render.seen import Seen, StreamSeen
from monitor.render.words import fit_word
from storage.facts import AlarmMoved
from tests.stores import HOUR, NOW, chain, make, settings_fact, stream

FRAME_80 = """\
Tailgauge  orders.db                                     1 Dec 2026 14:05:09 WET
2 of 6 streams need a look: 3 alarms, 1 acknowledged, 1 shelved; 1 stream
flagged by refits alone.

\\x1b[2J[red]dock\\u202e\\x0d\\x0anight: no events, seen at 13:00 WET; none for 1
  hour, usually one every 12 seconds (unacknowledged)
north-dock: tail heavier since about 12:00 WET (11:00 to 13:00); one event in
  10 000 passes 13 000 units now (planned 5 200), above the limit of 6 000 units
  (unacknowledged)
north-dock: the limit of 6 000 units has been passed more often than agreed,
  seen at 13:00 WET; now once in 14 days (agreed once in 30 days) (acknowledged
  by ana)
(2 refits) east-dock: a power law does not describe the tail, since 13:00 WET,..

  stream                   state      alpha  base      p   level  newest  last 6
  \\x1b[2J[red]dock\\u202..  no events   2.48  2.45   0.62   5 500     1 h  ======
  north-dock               heavier     2.21  2.50   0.31  13 000    12 s  ===HHH
  east-dock                2 refits    2.70  2.45  0.002   3 300   1 min  ====MM
> south-dock               steady      2.48  2.45   0.62   5 500     4 s  ======
  west-dock                new        not judged yet: 312 events so far
  倉庫-十番                steady      2.51  2.50   0.62   5 000     7 s  =====
orders: 199 955 events, 17 late; 5 of 200 000 lines (0.0025 %) rejected: 3 not
  JSON, 2 zero
Up, Down: move   Enter: look closer   a: acknowledge   h: help   q: quit"""

FRAME_60 = """\
Tailgauge  orders.db                 1 Dec 2026 14:05:09 WET
2 of 6 streams need a look: 3 alarms, 1 acknowledged, 1
shelved; 1 stream flagged by refits alone.

\\x1b[2J[red]dock\\u202e\\x0d\\x0anight: no events, seen at 13..
and 2 alarms or faults more

  stream     state  alpha  base  p  level  newest  last
> west-dock  new    not judged yet: 312 events so far
  5 streams not shown (4 above, 1 below)
orders: 199 955 events, 17 late; 5 of 200 000 lines
Up, Down: move   Enter: look closer   a: acknowledge   h:.."""

FOCUS_80_ASCII = """\
north-dock  (orders.db)                                  1 Dec 2026 14:05:09 WET
north-dock: tail heavier since about 12:00 WET (11:00 to 13:00); one event in
  10 000 passes 13 000 units now (planned 5 200), above the limit of 6 000 units
  (unacknowledged)
seen: north-dock: the limit of 6 000 units has been passed more often than agr..
Watch: exponent 7 % of the way to speaking, the others 2 % or less; not
  watched: no events, rejects, body.
Alpha 2.21 (2.15 to 2.27), planned 2.50; the tail starts at 120 units (as good
  from 96 to 140) and holds 2 310 of 81 050 events.
  (10 more lines in a taller terminal)
Share of events at or above a size: # data, + fit, b baseline, | limit
        all ###################                                   limit 6 000 |
                              #######                                         |
    1 in 10                         ##                                        |
                                     #########                                |
   1 in 100                                 b########+++                      |
 1 in 1 000                                         ########+++++++           |
                                                           ###bbbbb+++++++++++|
            +-----------------------+----------------------+--------------------
      units 10                     100                   1 000
window end (WET)  alpha  95 %          p   1 in 10 000  result
2026-12-01 13:00   2.21  2.15-2.27  0.31  13 000 units  heavier than planned
2026-12-01 14:00   2.21  2.15-2.27  0.31  13 000 units  heavier than planned
Left, Right: other streams   w: watch   a: acknowledge   Esc: back   h: help"""

WATCH_80 = """\
north-dock  (orders.db)                                  1 Dec 2026 14:05:09 WET
north-dock: tail heavier since about 12:00 WET (11:00 to 13:00); one event in..
seen: north-dock: the limit of 6 000 units has been passed more often than agr..
How far each rule is on its way to an alarm, 14:00 WET
  exponent            7 %  #.........  alarm open, since then far from speaking
  tail share          2 %  ..........  far from speaking
  fit                 2 %  ..........  far from speaking
  level               2 %  ..........  alarm open, since then far from speaking
  single event                         no way to show, speaks at once
  rival               2 %  ..........  far from speaking
  no events: not watched: the usual hours are not known yet
  rejects: not watched: lines were not counted
  body: not watched: the usual number of events is not known yet
Promise: at most one false alarm in 540 days on average, all rules of this
  stream together; rests on independence: a plan brings no past to measure it
  on.
Alarms of this stream, newest first
  13:00 WET: exponent, heavier, unacknowledged; last: the condition outlasted
    the on-delay, 13:00 WET
  13:00 WET: level, heavier, acknowledged; last: acknowledged by ana ("dock
    told"), 13:01 WET
Notes of people
  12:00 WET ana: new customer\\x1b[2J at north-dock
Left, Right: other streams   w: tail   a: acknowledge   Esc: back   h: help"""


def test_the_overview_at_80x24(watch: StoreWatch) -> None:
    frame = overview(watch.look(), NOW, Look(width=80, height=24), selected="south-dock", live=True)
    assert as_text(frame) == FRAME_80


def test_a_low_terminal_still_tells_what_needs_a_look_and_counts_what_it_hides(watch: StoreWatch) -> None:
    frame = overview(watch.look(), NOW, Look(width=60, height=12), selected="west-dock", live=True)
    assert as_text(frame) == FRAME_60


def test_one_stream_at_80x24_in_ascii(watch: StoreWatch) -> None:
    look = Look(width=80, height=24, ascii_only=True)
    assert as_text(focus_page(watch.focus("north-dock"), watch.look(), NOW, look, live=True)) == FOCUS_80_ASCII


def test_help_fits_80x24_and_ends_with_the_caution() -> None:
    text = as_text(help_page(Look(width=80, height=24)))
    assert "licensed practice." in " ".join(text.split())
    assert text.endswith("Esc: back   q: quit")


def test_the_watch_of_one_stream_at_80x24_in_ascii(watch: StoreWatch) -> None:
    look = Look(width=80, height=24, ascii_only=True)
    frame = focus_page(watch.focus("north-dock"), watch.look(), NOW, look, live=True, side="watch")
    assert as_text(frame) == WATCH_80


def test_colour_only_for_what_is_abnormal_and_new(watch: StoreWatch) -> None:
    for line in overview(watch.look(), NOW, Look(width=170, height=40), live=True):
        coloured = [line.plain[span.start : span.end] for span in line.spans if span.style == ABNORMAL]
        quiet = any(name in line.plain for name in ("south-dock", "west-dock", "倉庫", "east-dock"))
        assert not (quiet and coloured)
        if line.plain.startswith(("north-dock: tail", "\\x1b[2J[red]dock\\u202e\\x0d\\x0anight: no events")):
            assert coloured == [line.plain]
        if line.plain.startswith("north-dock: the limit"):  # acknowledged
            assert coloured == []


def test_a_bigger_terminal_tells_more(watch: StoreWatch) -> None:
    text = as_text(overview(watch.look(), NOW, Look(width=150, height=50)))
    assert "Look for what changed then, and decide whether the plan still holds." in text
    assert "    unacknowledged; medium priority, rule exponent, raised 13:00 WET" in text
    assert "    acknowledged by ana; high priority, rule level, raised 13:00 WET" in text
    assert "Better described by: power law with cut-off." in text
    assert "exponent 50 %" in text
    assert "level: one event in 10 000 passes it, in units; limit 6 000" in text
    assert "watch: 5 of 6 streams watched; false alarms at most one in 90 days on average" in text
    close = as_text(focus_page(watch.focus("north-dock"), watch.look(), NOW, Look(width=150, height=60)))
    assert "luck alone would show a difference this large 2 times in 10 000" in close
    assert "how fast large sizes get rare" in close
    assert "Share of events at or above a size" in close


def test_what_an_alarm_tells_is_not_told_again_by_a_flag(watch: StoreWatch) -> None:
    text = as_text(overview(watch.look(), NOW, Look(width=170, height=60)))
    assert "heavier than planned" not in text  # the exponent's alarm tells it
    assert "expected to be passed" not in text  # and the level's alarm this
    assert "(2 refits) east-dock: a power law does not describe the tail" in text
    assert "7 100" not in text  # shelved: counted only
    assert "3 alarms, 1 acknowledged, 1 shelved; 1 stream flagged by refits alone." in text


def test_an_old_alarm_names_the_day_that_its_times_belong_to(watch: StoreWatch) -> None:
    text = as_text(overview(watch.look(), NOW + 24 * HOUR, Look(width=80, height=24)))
    assert "1 Dec, north-dock: tail heavier since about 12:00 WET" in text


@pytest.mark.parametrize("name", ["north-dock", "south-dock"])
def test_every_reading_on_the_page_is_the_stores(watch: StoreWatch, name: str) -> None:
    focused = watch.focus(name)
    seen = focused.stream.watch
    assert seen is not None
    lines = as_text(focus_page(focused, watch.look(), NOW, Look(width=150, height=50), side="watch")).splitlines()
    for reading in seen.readings:
        line = next(line for line in lines if line.startswith(f"  {reading.rule}  "))
        if reading.ln_statistic is None:
            assert "%" not in line
            continue
        shown = re.search(r"(\d+) %  ([#.]{10})", line)
        assert shown is not None
        assert abs(float(shown[1]) - 100 * reading.way) <= 0.5
        assert abs(shown[2].count("#") - 10 * reading.way) <= 0.5
        assert (reading.direction or "") in line or reading.way < 0.1
    assert len([line for line in lines if "not watched: " in line]) == len(seen.watch.unwatched)
    assert f"in {seen.promised_days:.0f} days on average" in " ".join(lines)


def test_rejected_lines_are_shown_in_a_tall_terminal_and_harmless(watch: StoreWatch) -> None:
    text = as_text(focus_page(watch.focus("west-dock"), watch.look(), NOW, Look(width=100, height=60)))
    assert "Feed orders: 5 of 200 000 lines (0.0025 %) rejected: 3 not JSON, 2 zero." in text
    assert "not JSON, logs/orders.jsonl at byte 17: \\x1b[31mbroken" in text


def test_a_store_without_streams_says_what_became_of_the_lines(tmp_path: Path) -> None:
    with make(tmp_path / "new.db") as store:
        store.commit([settings_fact(), chain({"not JSON": 60}, lines=100)])
    with StoreWatch(tmp_path / "new.db") as watch:
        text = as_text(overview(watch.look(), NOW, Look(width=100, height=24)))
    assert "No stream yet: no usable line has come. Of 1 feed many lines cannot be used." in text
    assert "60 of 100 lines (60 %) rejected: 60 not JSON" in text


def test_many_streams_are_counted_and_the_marked_one_is_always_shown(tmp_path: Path) -> None:
    names = [f"dock-{i:03d}" for i in range(300)]
    with make(tmp_path / "many.db") as store:
        store.commit([settings_fact(), chain(), *(stream(name) for name in names)])
    with StoreWatch(tmp_path / "many.db") as watch:
        seen = watch.look()
        for name in (names[0], names[150], names[299]):
            lines = as_text(overview(seen, NOW, Look(width=80, height=24), selected=name, live=True)).splitlines()
            assert any(line.startswith(f"> {name}") for line in lines)
            count = next(re.search(r"(\d+) streams not shown", line) for line in lines if "not shown" in line)
            assert count is not None
            assert int(count[1]) + sum("dock-" in line for line in lines) == 300


sizes = st.tuples(st.integers(1, 250), st.integers(1, 75), st.booleans())


def assert_fits(lines: list[Text], look: Look) -> None:
    assert len(lines) <= look.height
    for line in lines:
        assert line.cell_len <= look.width
        assert "\x1b" not in line.plain
        assert "\u202e" not in line.plain
        if look.ascii_only:
            assert line.plain.isascii()


@settings(max_examples=60, deadline=None)
@given(sizes, st.sampled_from(["north-dock", "west-dock", None]))
def test_no_line_is_wider_and_no_frame_higher_than_the_terminal(
    watch: StoreWatch, size: tuple[int, int, bool], name: str | None
) -> None:
    look = Look(width=size[0], height=size[1], ascii_only=size[2])
    seen = watch.look()
    for live in (False, True):
        assert_fits(overview(seen, NOW, look, selected=name, live=live, notice="Cannot be read now."), look)
    for one in seen.streams:
        for side in ("tail", "watch"):
            asked = Asked("Acknowledge?", "größer " * 30)
            page = focus_page(watch.focus(one.name), seen, NOW, look, live=True, side=side, asked=asked)  # type: ignore[arg-type]
            assert_fits(page, look)
    assert_fits(help_page(look), look)


def renamed(seen: Seen, name: str) -> Seen:
    """The same warehouse with one stream and its unit named otherwise."""

    def changed(one: StreamSeen) -> StreamSeen:
        state = msgspec.structs.replace(one.state, stream=name)
        return msgspec.structs.replace(one, state=state, plan=msgspec.structs.replace(one.plan, unit=name))

    return msgspec.structs.replace(seen, streams=(changed(seen.streams[1]), *seen.streams[2:]))


def noted(move: AlarmMoved, name: str) -> AlarmMoved:
    """The same row of a history with another author and note."""
    return msgspec.structs.replace(move, by=name, note=name)


@settings(max_examples=60, deadline=None)
@given(st.text(st.characters(), min_size=1, max_size=90), st.integers(20, 160))
def test_no_stream_name_breaks_a_frame(watch: StoreWatch, name: str, width: int) -> None:
    look = Look(width=width, height=24)
    seen = renamed(watch.look(), name)
    assert_fits(overview(seen, NOW, look, selected=name, live=True), look)
    focused = Focused(stream=seen.streams[0], feed=None, drawing=None, samples=())
    assert_fits(focus_page(focused, seen, NOW, look, live=True), look)
    told = watch.focus("north-dock")
    past = tuple(
        msgspec.structs.replace(one, moves=tuple(noted(move, name) for move in one.moves)) for one in told.past
    )
    notes = tuple(msgspec.structs.replace(note, by=name, text=name) for note in told.notes)
    focused = msgspec.structs.replace(told, past=past, notes=notes)
    assert_fits(focus_page(focused, seen, NOW, look, live=True, side="watch"), look)


def half_a_place(text: str) -> float:
    """Half of the last place that a number is shown to: 0.005 for '2.21', 500 for '13 000'."""
    whole, _, decimals = text.replace(" ", "").partition(".")
    zeros = len(whole) - len(whole.rstrip("0")) if not decimals else -len(decimals)
    return 0.5000001 * 10.0**zeros


@pytest.mark.parametrize("name", ["north-dock", "east-dock", "south-dock"])
def test_every_figure_of_a_row_is_the_stores(watch: StoreWatch, name: str) -> None:
    seen = watch.look()
    one = next(stream for stream in seen.streams if stream.name == name)
    judged = one.judgement
    assert judged is not None
    assert judged.gof is not None
    lines = as_text(overview(seen, NOW, Look(width=170, height=40))).splitlines()
    head, row = (next(line for line in lines if re.match(rf"{word} .*  ", line)) for word in ("stream", name))
    titles = [match.group() for match in re.finditer(r"\S+(?: \S+)*", head)]
    cells = re.split(r"  +", row)
    assert len(titles) == len(cells)
    shown = list(zip(titles, cells, strict=True))[2:]
    level = judged.levels[0]
    wanted = [
        judged.alpha, judged.alpha_interval, one.baseline and one.baseline.alpha, judged.gof.p, judged.gof.p_interval,
        level.size, level.interval, one.plan.limit, one.state.events, one.state.late,
    ]  # fmt: skip
    for (title, cell), value in zip(shown, wanted, strict=False):
        parts = cell.split("-") if title == "95 %" else [cell]
        values = value if isinstance(value, tuple) else (value,)
        for text, number in zip(parts, values, strict=True):
            assert abs(float(text.replace(" ", "")) - number) <= half_a_place(text), title
    assert fit_word(judged.gof) == ("bad" if name == "east-dock" else "good")
