"""The live screen: once a second, or at a key, look at the store and paint what changed."""

from __future__ import annotations

import time
from collections.abc import Callable

import msgspec
from rich.console import Console
from rich.text import Text

from monitor.cli.acting import Acting
from monitor.cli.terminal import Terminal
from monitor.cli.watching import StoreWatch
from monitor.errors import MonitorError
from monitor.render.attention import Sorted, in_order
from monitor.render.focus import Focused, Side, focus_page
from monitor.render.frame import Asked, Look
from monitor.render.help import help_page
from monitor.render.screen import overview
from monitor.render.seen import Seen, StreamSeen
from monitor.service.clock import Clock, SystemClock
from storage.errors import StoreError

SECOND = 1_000_000_000
ANSWER_LOOK = 0.1
"""Seconds between looks for an answer that is waited for."""


class Page(msgspec.Struct, frozen=True, kw_only=True):
    """Where the reader is: which stream is marked, if it is looked at closely and which side of it, if help is open.

    chosen  the reader moved the mark; until then it stays on the first stream, whichever that is
    """

    selected: str | None = None
    chosen: bool = False
    close: bool = False
    help: bool = False
    side: Side = "tail"


def turned(page: Page, key: str, names: list[str], step: int) -> Page:
    """The page after a key. `names` are the streams in the order shown, `step` the rows of half a page."""
    if key == "help":
        return msgspec.structs.replace(page, help=not page.help)
    if key == "back":
        return msgspec.structs.replace(page, help=False, close=page.close and page.help)
    if page.help or not names:
        return page
    if key == "side" and page.close:
        return msgspec.structs.replace(page, side="watch" if page.side == "tail" else "tail")
    at = names.index(page.selected) if page.selected in names else 0
    moves = {"up": -1, "down": 1, "page up": -step, "page down": step, "first": -len(names), "last": len(names)}
    if page.close:
        moves |= {"left": -1, "right": 1}
    if key in moves:
        at = max(0, min(at + moves[key], len(names) - 1))
    chosen = page.chosen or key in moves or key == "enter"
    return msgspec.structs.replace(page, selected=names[at], chosen=chosen, close=page.close or key == "enter")


class _Glance:
    """What was last read, and why it could not be read anew if so."""

    def __init__(self, watch: StoreWatch) -> None:
        self._watch = watch
        self.seen: Seen = watch.look()
        self.focused: Focused | None = None
        self.notice: str | None = None
        self._order_of: tuple[Seen, int] | None = None
        self._order: list[Sorted] = []

    def renew(self, page: Page) -> None:
        """Look again. A store that cannot be read keeps the last state on the screen, with a notice."""
        try:
            before, self.seen = self.seen, self._watch.look()
            if not page.close or page.selected is None:
                self.focused = None
            elif self.focused is None or self.focused.stream.name != page.selected or before is not self.seen:
                self.focused = self._watch.focus(page.selected)
            self.notice = None
        except (StoreError, MonitorError) as error:
            self.notice = f"Shown is the last that could be read. {error}"

    def stream(self, name: str | None) -> StreamSeen | None:
        """The stream of this name."""
        return next((one for one in self.seen.streams if one.name == name), None)

    def order(self, now: int) -> list[Sorted]:
        """Streams in the order shown; made again for a new state, and each minute for the times in its words."""
        key = (self.seen, now // (60 * SECOND))
        if self._order_of is None or self._order_of[0] is not key[0] or self._order_of[1] != key[1]:
            self._order_of, self._order = key, in_order(self.seen, now)
        return self._order

    def lines(self, page: Page, look: Look, now: int, asked: Asked | None) -> list[Text]:
        """The page, painted."""
        if page.help:
            return help_page(look)
        if self.focused is not None and page.close:
            return focus_page(
                self.focused, self.seen, now, look, notice=self.notice, live=True, side=page.side, asked=asked
            )
        return overview(
            self.seen, now, look, order=self.order(now), selected=page.selected, notice=self.notice, live=True,
            asked=asked,
        )  # fmt: skip


def run_live(
    watch: StoreWatch,
    console: Console,
    look: Look,
    stream: str | None,
    *,
    clock: Clock | None = None,
    over: Callable[[], bool] = lambda: False,
) -> None:
    """Show the screen until the reader quits or it is over. Raises what the first look at the store raises.

    Parameters: clock, on the scale of the events' time, the machine's by default; over, asked before each look.
    """
    clock = clock or SystemClock()
    glance = _Glance(watch)
    acting = Acting(watch, clock)
    page = Page(selected=stream, chosen=stream is not None, close=stream is not None)
    with acting, Terminal(console) as terminal:
        while not over():
            now = clock.now()
            glance.renew(page)
            names = [one.stream.name for one in glance.order(now)]
            if page.selected not in names:
                page = msgspec.structs.replace(page, chosen=False, close=False)
            if not page.chosen:
                page = msgspec.structs.replace(page, selected=names[0] if names else None)
            look = msgspec.structs.replace(look, width=max(1, console.width), height=max(1, console.height))
            terminal.paint(glance.lines(page, look, now, acting.asked()))
            for key in terminal.keys(_next_look(acting.waiting)):
                if acting.takes(key):
                    continue
                if key.name == "quit":
                    return
                if key.name == "acknowledge" and not page.help:
                    acting.begin(glance.stream(page.selected))
                page = turned(page, key.name, names, look.height // 2)


def _next_look(waiting: bool) -> float:
    """When to look again: just after the clock's next second, so that the time shown is never stale by more than that.

    An answer that is waited for is looked for more often.
    """
    second = (SECOND - time.time_ns() % SECOND) / SECOND + 0.005
    return time.monotonic() + (min(ANSWER_LOOK, second) if waiting else second)
