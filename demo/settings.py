"""The settings that the story runs on: an ordinary settings file."""

from __future__ import annotations

from demo.warehouse import TAIL_FROM

SETTINGS = f"""\
# The invented parts warehouse of `tailgauge demo`. An ordinary settings file: try the commands on it.
store = "orders.db"

[feed.orders]
follow = ["logs/orders.jsonl"]
lines  = "json"
size   = "kg"
time   = "placed_at"
stream = "dock"
unit   = "kg"

[watch]
pane = "6h"
window = "2d"
idle = "12h"
limit = 15000                # kg that a dock can stage for one order
limit_at_most = "1 per 7d"
baseline_tail = 2000
replicates = 200             # fewer than usual, to keep pace with ten days in a minute
differs_at = 0.001

[stream.north.plan]          # what the dock was planned on
alpha = 2.8
xmin = {TAIL_FROM:g}
"""
