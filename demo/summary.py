"""What the story's end tells: each scripted change, when the watch saw it, and whether every line was counted."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from demo.warehouse import DOCKS, OPENING, Change
from monitor.render.numbers import count_text, estimate
from monitor.render.seen import Refit, decode_refit
from monitor.render.times import moment_text, plural, span_words
from storage.history import Reader


@dataclass(frozen=True, slots=True)
class Seen:
    """When a change was first flagged: the refit, and the tail events that had come since."""

    refit: Refit
    tail_events: int


def summary(reader: Reader, changes: Sequence[Change], written: int | None) -> list[str]:
    """The story's end in sentences. `written` is the number of lines in the log, None when it was cut short."""
    refits = {dock.name: [decode_refit(stored) for stored in reader.refits(dock.name)] for dock in DOCKS}
    lines = ["What was scripted, and what the watch saw:"]
    for change in changes:
        lines += _change_lines(reader, change, refits[change.dock])
    lines.append(_unscripted(refits, changes))
    lines.append(_accounts(reader, written))
    return lines


def _change_lines(reader: Reader, change: Change, refits: list[Refit]) -> list[str]:
    head = f"  {change.dock}, {moment_text(change.at, 'UTC')}: {change.words}."
    last = refits[-1].end if refits else OPENING
    if last <= change.at:
        return [head, "    The story ended before this."]
    seen = _first_flag(reader, change, refits)
    if seen is None:
        return [head, "    Not flagged by the end of the story."]
    return [head, f"    {_seen_words(change, seen)}"]


def _seen_words(change: Change, seen: Seen) -> str:
    after = seen.refit.end - change.at
    when = f"Flagged by the refit of {moment_text(seen.refit.end, 'UTC')}, {span_words(after)} and "
    when += f"{plural(seen.tail_events, 'tail event')} later"
    judgement, comparison = seen.refit.judgement, seen.refit.against
    if change.rule == "exponent" and comparison is not None:
        return (
            f"{when}: alpha {estimate(comparison.alpha_later or 0.0)} where "
            f"{estimate(comparison.alpha_earlier or 0.0)} was planned; smaller is heavier."
        )
    if judgement is not None and judgement.gof is not None:
        return f"{when}: a power law no longer describes the tail (p {judgement.gof.p:.2f})."
    return f"{when}."


def _first_flag(reader: Reader, change: Change, refits: list[Refit]) -> Seen | None:
    """The first refit after the change that flags it: by the rule the change should trip."""
    for refit in refits:
        if refit.end > change.at and any(flag.rule == change.rule for flag in refit.flags):
            window = reader.window(change.dock, change.at, refit.end, 10**7).content
            judgement = refit.judgement
            xmin = judgement.xmin if judgement and judgement.xmin else 0.0
            return Seen(refit, int(window.counts[window.sizes >= xmin].sum()))
    return None


def _unscripted(refits: dict[str, list[Refit]], changes: Sequence[Change]) -> str:
    """Flags that nothing in the script accounts for: the price of judging refit by refit."""
    starts = {change.dock: change.at for change in changes}
    quiet = [refit for dock, listed in refits.items() for refit in listed if refit.end <= starts.get(dock, refit.end)]
    flagged = sum(bool(refit.flags) for refit in quiet)
    return (
        f"Where nothing had changed, {flagged} of {plural(len(quiet), 'refit')} carried a flag: flags are judged refit "
        "by refit and do cry wolf now and then."
    )


def _accounts(reader: Reader, written: int | None) -> str:
    chains = reader.chains()
    read = sum(chain.lines for chain in chains)
    events = sum(chain.events for chain in chains)
    rejected = sum(sum(chain.rejected.values()) for chain in chains)
    head = f"{count_text(written)} lines written, " if written is not None else ""
    return f"{head}{count_text(read)} read: {count_text(events)} events, {count_text(rejected)} spoilt lines rejected."
