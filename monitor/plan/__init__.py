"""Settings text into one frozen plan, or a SettingsError with the path of the key.

No environment variable, no default file and no clock takes part: the same text is always the same plan.
"""

from monitor.alarms.known import KnownChange
from monitor.plan.reading import read_plan
from monitor.plan.receivers import CommandWay, Hours, PostWay, Receiver, SyslogWay
from monitor.plan.records import FeedPlan, KnownCalendar, Passages, Plan, PlannedTail, StreamPlan
from monitor.plan.starter import STARTER

__all__ = [
    "STARTER", "CommandWay", "FeedPlan", "Hours", "KnownCalendar", "KnownChange", "Passages", "Plan", "PlannedTail",
    "PostWay", "Receiver", "StreamPlan", "SyslogWay", "read_plan",
]  # fmt: skip
