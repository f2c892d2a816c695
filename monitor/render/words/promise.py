"""What a watch promises, in sentences: false alarms, delays, what is not promised, and whether it is of use."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from monitor.render.numbers import count_text, estimate, percent
from monitor.render.safe import plain
from monitor.watch.runlength import Delay, Promise


def promise_sentences(stream: str, found: Promise, costs: Sequence[dict[str, Any]]) -> list[str]:
    """The promise of one stream (its name may be empty), and the yearly costs where they were asked for."""
    setting = found.setting
    head = f"{plain(stream)}: " if stream else ""
    lines = [
        f"{head}alpha {setting.alpha:.3g}, {estimate(setting.events_a_day)} events a day, "
        f"{percent(setting.share)} of them in the tail ({estimate(setting.exceedances_a_day)} a day).",
        f"False alarms: at most one in {found.days_between_false:.3g} days on average, all rules together "
        f"({found.false_a_year:.2g} a year).",
        _prior_words(found),
    ]
    lines += [_delay_words(delay) for delay in found.delays]
    lines += [
        f"Within {one.days} days, 9 times in 10: {_shift_words(one.heavier, 'heavier')}; "
        f"{_shift_words(one.lighter, 'lighter')}."
        for one in found.smallest
    ]
    lines.append("Not promised: " + "; ".join(found.not_promised) + ".")
    lines += _use_words(found)
    lines += [_cost_words(row) for row in costs]
    return lines


def _prior_words(found: Promise) -> str:
    prior = found.setting.prior
    if prior is None:
        return "The planned exponent counts as known."
    return f"Against a baseline of {count_text(prior)} tail events:"


def _delay_words(delay: Delay) -> str:
    if delay.what == "alpha":
        what = f"alpha {delay.shift:+g} ({'lighter' if delay.shift > 0 else 'heavier'})"
    else:
        what = f"tail share x{delay.shift:.3g}"
    if delay.exceedances_mean is None or delay.days_mean is None:
        if delay.exceedances_q90 is None or delay.days_q90 is None:
            return f"  {what}: not seen in time in more than one case in 10"
        return f"  {what}: 9 times in 10 within {estimate(delay.exceedances_q90)} tail events ({_days(delay.days_q90)})"
    q90 = ""
    if delay.exceedances_q90 is not None and delay.days_q90 is not None:
        q90 = f", 9 times in 10 within {estimate(delay.exceedances_q90)} ({_days(delay.days_q90)})"
    mean = f"{estimate(delay.exceedances_mean)} tail events on average ({_days(delay.days_mean)})"
    return f"  {what}: seen after {mean}{q90}"


def _days(days: float) -> str:
    if days < 1 / 24:
        return f"{estimate(days * 1440)} minutes"
    return f"{estimate(days * 24)} hours" if days < 2 else f"{estimate(days)} days"


def _shift_words(shift: float | None, direction: str) -> str:
    return f"no shift to {direction} on the list" if shift is None else f"{direction} by {shift:g} or more"


def _use_words(found: Promise) -> list[str]:
    use = found.usefulness
    if use.useful:
        return []
    wait = ""
    if use.useful_prior is not None and use.useful_in_days is not None:
        wait = f" It would be from {count_text(use.useful_prior)} tail events on, in about {_days(use.useful_in_days)}."
    return [
        f"Not of use yet: within one budget the exponent rule speaks in {percent(use.chance_false)} of cases without a "
        f"change and in {percent(use.chance_seen)} with one of 0.5.{wait}",
        "What helps: " + "; ".join(use.remedies) + ".",
    ]


def _cost_words(row: dict[str, Any]) -> str:
    late = (
        "not seen within a year"
        if row["late_days"] is None
        else f"a change of 0.3 seen after {_days(row['late_days'])}"
    )
    mark = "  <- cheapest" if row["cheapest"] else ""
    return (
        f"  one false alarm in {row['budget_days']:.4g} days: {row['false_a_year']:.2g} a year, {late}; "
        f"yearly cost {estimate(row['cost'])}{mark}"
    )
