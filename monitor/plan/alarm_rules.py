"""[alarm.RULE] as written: how urgent the alarms of a rule are, what to do, and their delays."""

from __future__ import annotations

from typing import Any

import msgspec

from monitor.alarms.priorities import PRIORITIES, RULES, Policy, Rule, policy_for
from monitor.errors import SettingsError
from monitor.plan.checks import in_range, nearest, quoted, span
from monitor.plan.spans import DAY, SECOND

LONGEST_RESPONSE = 300
"""Characters: it is read in the middle of the night."""


class AlarmTable(msgspec.Struct, frozen=True, forbid_unknown_fields=True, kw_only=True):
    """[alarm.RULE] as written: only what differs from the rule's defaults."""

    priority: str | None = None
    response: str | None = None
    on_delay: str | None = None
    off_delay: str | None = None
    return_below: float | None = None
    longest_shelf: str | None = None


def policies(name: str, tables: dict[str, AlarmTable]) -> dict[Rule, Policy]:
    """The policy of every rule. Raises SettingsError with the path of the key."""
    out = {rule: policy_for(rule) for rule in RULES}
    for key, given in tables.items():
        rule = next((one for one in RULES if one == key), None)
        if rule is None:
            raise SettingsError(f"{name}: alarm.{quoted(key)}: is no rule. {nearest(key, RULES)}")
        out[rule] = policy_for(rule, _changes(name, f"alarm.{quoted(key)}", given))
    return out


def _changes(name: str, path: str, given: AlarmTable) -> dict[str, object]:
    out: dict[str, Any] = {
        key: value for key in given.__struct_fields__ if (value := getattr(given, key)) is not None
    }  # fmt: skip
    if given.priority is not None and given.priority not in PRIORITIES:
        raise SettingsError(f'{name}: {path}.priority: "{given.priority}" is none of {", ".join(PRIORITIES)}.')
    if given.response is not None:
        out["response"] = _response(name, f"{path}.response", given.response)
    for key, low in (("on_delay", 0), ("off_delay", SECOND), ("longest_shelf", 60 * SECOND)):
        if key in out:
            out[key] = span(name, f"{path}.{key}", out[key], low=low)
    if out.get("longest_shelf", 0) > 365 * DAY:
        raise SettingsError(
            f'{name}: {path}.longest_shelf: "{given.longest_shelf}" is too long; expected at most 365d. What is silent '
            "for longer belongs out of service."
        )
    if given.return_below is not None:
        in_range(name, f"{path}.return_below", given.return_below, low=0.0, high=1.0, open_low=True)
    return out


def _response(name: str, path: str, text: str) -> str:
    """One sentence without its full stop; it is the second and last sentence of a message."""
    sentence = " ".join(text.split()).rstrip(".")
    if not sentence:
        raise SettingsError(f"{name}: {path}: an alarm that asks for nothing should be none; say what is to be done.")
    if len(sentence) > LONGEST_RESPONSE:
        raise SettingsError(f"{name}: {path}: is longer than {LONGEST_RESPONSE} characters; say what comes first.")
    return sentence
