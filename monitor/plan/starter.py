"""The commented settings file that `tailgauge settings` prints. A test reads it as settings."""

STARTER = """\
# Settings of a Tailgauge watch (TOML). Save as tailgauge.toml, adapt, then:
#   tailgauge settings tailgauge.toml     checks it and prints what is in force
#   tailgauge run tailgauge.toml          follows the logs
#   tailgauge screen                      shows what is known (another terminal)

store = "orders.db"                    # the SQLite file that keeps everything; made when absent

[feed.orders]                          # one table a place that lines come from; the name is yours
follow = ["logs/orders-*.jsonl"]       # files to follow, through rotations; or: read = "-" (standard input)
                                       # or: listen = "http://127.0.0.1:7070" (batches), "tcp://...", "unix://..."
lines  = "json"                        # json | csv | number (also combined | pairs | pattern)
size   = "units"                       # where the size stands: field name, or column name or number
time   = "placed_at"                   # where the event time stands; without it the time of arrival counts
stream = "dock"                        # one stream a value of this field; without it the feed is one stream
unit   = "units"                       # what the size is counted in, as people say it
# where = { kind = ["order"] }         # only lines whose field equals one of these
# scale = 1.0                          # sizes are multiplied by this
# timezone = "Europe/Lisbon"           # of stamps that carry no zone, if other than [watch] timezone

[watch]                                # for every stream; [stream."north-*"] overrides, the longest match wins
counting = "measured"                  # "whole" judges by the discrete law: your choice, never guessed
pane = "1h"                            # one judgement each; divides a day, aligned to UTC
# slot = "1m"                          # understood; in this version the watch reads whole panes
window = "14d"                         # what one judgement looks back on
lateness = "2m"                        # how far lines of one file may be out of order
idle = "10m"                           # a file silent for so long no longer holds the clock back
ahead = "7d"                           # a stamp further ahead than this waits for the next line to confirm it
replicates = 2500                      # at most so many bootstrap samples a judgement
rule_out = 0.1                         # p at or below this rules a power law out
min_tail = 10                          # events that a candidate tail must hold
baseline_tail = 500                    # the first window with so many tail events becomes the baseline
differs_at = 0.01                      # level of the test against the baseline, one refit
one_in = 10000                         # tell the size passed once in so many events
# limit = 6000                         # the size that must not be passed more often than
# limit_at_most = "1 per 30d"
# keep_panes = "800d"                  # older panes are deleted, once no kept refit reads them; else kept for good
# keep_refits = "2000d"                # older refits are deleted; else kept for good
timezone = "UTC"                       # for reading stamps without a zone, and for what people see

false_alarm_every = "90d"              # at most one false alarm in so long on average, all streams and rules together

# [[known]]                            # planned changes: alarms are raised and shown, their notices wait
# from = 2026-11-27                    # or: calendar = "closures.ics" (iCalendar) instead of from, to and reason
# to = 2026-11-30
# streams = "*"
# reason = "autumn promotion"
# effect = "hold notices"              # or "not in baseline" ("new baseline after" is understood, not acted on yet)

# [notify.desk]                        # gets each notice as a CloudEvents 1.0 JSON document
# command = ["./page-the-desk"]        # on its standard input; or: post = "https://...", or syslog = "udp://..."
# streams = ["north-*"]
# repeat_after = "4h"                  # reminded while nobody has acknowledged

# [stream."north-dock".plan]           # what was planned on, if it is known: compared from the first window on
# alpha = 2.5
# xmin = 120
"""
