"""Every sentence for people, made in one place: for the screen, the history, `fit` and the demo.

Each finding is words first, figures after; a technical term never stands without its plain meaning. All
functions are pure and give plain text without line ends or markup.
"""

from monitor.render.words.common import (
    CAUTION,
    beyond_words,
    fit_word,
    level_words,
    limit_words,
    moments_words,
    p_text,
    p_words,
    size_with_unit,
    times_in,
)
from monitor.render.words.findings import (
    Finding,
    feed_findings,
    findings,
    flag_words,
    flags_in_words,
    level_against,
    level_line,
    quiet_words,
    rejected_words,
)
from monitor.render.words.fit import fit_sentences, no_tail_words, rival_words, verdict_words

__all__ = [
    "CAUTION", "Finding", "beyond_words", "feed_findings", "findings", "fit_sentences", "fit_word",
    "flag_words", "flags_in_words",
    "level_against", "level_line", "level_words", "limit_words", "moments_words", "no_tail_words", "p_text",
    "p_words", "quiet_words", "rejected_words", "rival_words", "size_with_unit", "times_in", "verdict_words",
]  # fmt: skip
