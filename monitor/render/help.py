"""The help page of the live screen: keys, and what the figures mean."""

from __future__ import annotations

from rich.text import Text

from monitor.render.charts import STRIP_LETTERS
from monitor.render.frame import STRONG, Look, Part, cut_to, paragraph, styled
from monitor.render.words.common import CAUTION

KEYS = (
    ("Up, Down", "move between streams (also j and k)"),
    ("Enter", "look at the marked stream closely"),
    ("Left, Right", "the stream before or after, while looking closely"),
    ("Esc", "back to all streams (also Backspace)"),
    ("h", "this help (also ?)"),
    ("q", "quit"),
)
MEANINGS = (
    "A stream needs a look when its newest refit finds the tail changed, a power law ruled out, or the limit passed "
    "too often. Refits are judged one by one: now and then luck flags one, so see whether the next agree.",
    "alpha: how fast large sizes get rare; smaller is heavier. base: alpha planned, or of the first window.",
    "p: how often a true power law fits this badly. Large is good; at or below rule_out it is ruled out.",
    "95 %: the range for the figure before it. level: the size that one event in so many passes.",
    f"last: the last refits, newest at the right: {', '.join(f'{letter} {word}' for letter, word in STRIP_LETTERS)}.",
    "Drawing: a plus sign shows where the fit departs from the data. late: counted, but stamped too late.",
    CAUTION,
)
FOOT = "Esc: back   q: quit"


def help_page(look: Look) -> list[Text]:
    """Exactly look.height lines."""
    lines = [styled(look, Part("Tailgauge screen: keys and figures", STRONG))]
    lines += [styled(look, Part(f"  {key:<12} {meaning}")) for key, meaning in KEYS]
    for meaning in MEANINGS:
        lines += paragraph(look, meaning, indent="  ", first="")
    return cut_to(look, lines, [styled(look, Part(FOOT))])
