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
    ("w", "while looking closely: its watch and past alarms, or its tail"),
    ("a", "acknowledge the marked stream's first alarm, with a note"),
    ("Esc", "back to all streams (also Backspace)"),
    ("h, q", "this help (also ?); quit"),
)
MEANINGS = (
    "Alarms are seldom false: the promise says how seldom. gone: its condition went by itself; seen: acknowledged; "
    "held: a known change explains it.",
    "(3 refits): so many refits in a row differ, without an alarm: at times by luck.",
    "way: at 100 % a rule speaks. alpha: smaller is heavier. base: the baseline's.",
    "p: how often a true power law fits this badly. Large is good; at or below rule_out it is ruled out.",
    "95 %: the range for the figure before it. level: one event in so many passes.",
    f"last: the last refits, newest at the right: {', '.join(f'{letter} {word}' for letter, word in STRIP_LETTERS)}.",
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
