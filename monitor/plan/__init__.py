"""Settings text into one frozen plan, or a SettingsError with the path of the key.

No environment variable, no default file and no clock takes part: the same text is always the same plan.
"""

from monitor.plan.reading import read_plan
from monitor.plan.records import FeedPlan, KnownChange, Passages, Plan, PlannedTail, StreamPlan
from monitor.plan.starter import STARTER

__all__ = ["STARTER", "FeedPlan", "KnownChange", "Passages", "Plan", "PlannedTail", "StreamPlan", "read_plan"]
