"""The layer table: which layer each package or module belongs to. Changing it is a commit of its own."""

# 0 words · 1 pure parts · 2 pure whole · 3 rim (I/O) · 4 service · 5 command line.
# A module takes the layer of its longest listed prefix.
LAYERS = {
    "storage": 0,
    "storage.errors": 0,
    "storage.facts": 0,
    "storage.grid": 0,
    "storage.pane": 0,
    "storage.window": 1,
    "storage.schema": 3,
    "storage.store": 3,
    "storage.history": 3,
    "storage.audit": 3,
    "storage.requests": 3,
    "monitor": 0,
    "monitor.errors": 0,
    "monitor.tail": 1,
    "monitor.watch": 1,
    "monitor.alarms": 1,
    "monitor.parse": 1,
    "monitor.plan": 2,
    "monitor.propose": 2,
    "monitor.engine": 2,
    "monitor.render": 2,
    "monitor.sources": 3,
    "monitor.deliver": 3,
    "monitor.service": 4,
    "monitor.fleet": 4,
    "monitor.cli": 5,
    "monitor.__main__": 5,
    "demo": 5,
}

# Layers up to this one are pure: no I/O, no clock, no randomness of their own making.
PURE_UP_TO = 2

# Parts of one layer that must not know one another.
STRANGERS = (
    "monitor.tail",
    "monitor.watch",
    "monitor.alarms",
    "monitor.parse",
    "monitor.sources",
    "monitor.deliver",
)
