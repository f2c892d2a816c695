"""The mathematics of the tail: arrays in, frozen results out. No I/O, no clock, no hidden randomness.

The public face for users of the library is listed here; everything else is reached by module, above all the function
that puts it all together, monitor.tail.judge.judge. The names load when they are first used, so that importing the
package costs nothing.
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from monitor.tail.judgement import Judgement, Options
    from monitor.tail.power_law import PowerLaw
    from monitor.tail.sample import Sample
    from monitor.tail.scan import find_tail
    from monitor.tail.tail_fit import NoTail, TailFit

__all__ = [
    "Judgement",
    "NoTail",
    "Options",
    "PowerLaw",
    "Sample",
    "TailFit",
    "find_tail",
]

_HOME = {
    "Judgement": "judgement",
    "NoTail": "tail_fit",
    "Options": "judgement",
    "PowerLaw": "power_law",
    "Sample": "sample",
    "TailFit": "tail_fit",
    "find_tail": "scan",
}


def __getattr__(name: str) -> Any:
    if name not in _HOME:
        raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
    return getattr(import_module(f"{__name__}.{_HOME[name]}"), name)
