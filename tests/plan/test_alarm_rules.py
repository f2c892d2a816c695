"""[alarm.RULE]: priorities, responses and delays from the settings, and each refusal."""

from __future__ import annotations

import pytest

from monitor.alarms.priorities import POLICIES, RULES
from monitor.errors import SettingsError
from monitor.plan import read_plan
from monitor.plan.spans import DAY, SECOND
from tests.plan.test_receivers import BASE


def test_every_rule_has_its_defaults() -> None:
    assert read_plan(BASE, "w").policies == POLICIES
    assert set(POLICIES) == set(RULES)


def test_what_is_given_replaces_the_defaults_and_the_rest_stays() -> None:
    lines = """
[alarm."tail share"]
priority = "high"
response = "Call Ana.\\n She knows. "
on_delay = "10m"
off_delay = "2d"
return_below = 0.5
longest_shelf = "7d"
[alarm.fit]
priority = "medium"
"""
    found = read_plan(BASE + lines, "w").policies
    share = found["tail share"]
    assert (share.priority, share.response) == ("high", "Call Ana. She knows")
    assert (share.on_delay, share.off_delay, share.longest_shelf) == (600 * SECOND, 2 * DAY, 7 * DAY)
    assert share.return_below == 0.5
    assert (found["fit"].priority, found["fit"].response) == ("medium", POLICIES["fit"].response)
    assert found["level"] == POLICIES["level"]


@pytest.mark.parametrize(
    ("lines", "message"),
    [
        ("[alarm.levels]", 'alarm.levels: is no rule. Did you mean "level"?'),
        ("[alarm.xyzzy]", "alarm.xyzzy: is no rule. Known are: exponent, tail share"),
        ('[alarm.fit]\npriority = "urgent"', 'alarm.fit.priority: "urgent" is none of high, medium, low.'),
        ('[alarm."tail share"]\nprioritty = "low"', 'prioritty: unknown key. Did you mean "priority"?'),
        ('[alarm.fit]\nresponse = " . "', "alarm.fit.response: an alarm that asks for nothing should be none"),
        (f'[alarm.fit]\nresponse = "{"x" * 400}"', "alarm.fit.response: is longer than 300 characters"),
        ('[alarm.fit]\non_delay = "soon"', 'alarm.fit.on_delay: "soon" is not a span of time'),
        ('[alarm.fit]\noff_delay = "0s"', 'alarm.fit.off_delay: "0s" is too short'),
        ('[alarm.fit]\nlongest_shelf = "400d"', 'alarm.fit.longest_shelf: "400d" is too long; expected at most 365d.'),
        ("[alarm.fit]\nreturn_below = 1.5", "alarm.fit.return_below: 1.5 is out of range"),
        ("[alarm.fit]\npriority = 1", "alarm.fit.priority: expected `str | null`, got `int`"),
    ],
)
def test_refusals_name_the_key_and_what_was_expected(lines: str, message: str) -> None:
    with pytest.raises(SettingsError) as caught:
        read_plan(BASE + lines, "w.toml")
    assert message in str(caught.value)
