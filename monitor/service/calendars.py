"""Calendars that the settings name, read into the plan's known changes."""

from __future__ import annotations

from pathlib import Path

import msgspec

from monitor.alarms.calendar import Reading, read_calendar
from monitor.errors import SettingsError
from monitor.plan import Plan
from monitor.plan.spans import DAY
from monitor.service.log import Log

BEHIND, AHEAD = 400 * DAY, 800 * DAY
"""Occurrences are wanted from so long before now to so long after."""


def with_calendars(plan: Plan, folder: Path, now: int, log: Log) -> Plan:
    """The plan with the changes that its calendars announce. What is refused in them is told, the rest is taken.

    Raises SettingsError for a calendar that cannot be read.
    """
    known = list(plan.known)
    for one in plan.calendars:
        path = folder / one.path
        try:
            text = path.read_text(encoding="utf-8")
        except (OSError, UnicodeDecodeError) as error:
            reason = getattr(error, "strerror", None) or "not UTF-8"
            raise SettingsError(f"known.calendar: {path}: cannot be read ({reason}).") from None
        how = Reading(
            timezone=plan.timezone, streams=one.streams, effect=one.effect, start=now - BEHIND, end=now + AHEAD
        )
        found = read_calendar(text, how)
        for sentence in found.refused:
            log.warning(f"{path}: {sentence}")
        known += found.known
    return msgspec.structs.replace(plan, known=tuple(known))
