"""What one refit says against its baseline, refit by refit, in the plainest way.

These are findings for people to read beside a refit. Their false-alarm rate is per refit and refits of
overlapping windows are correlated, so nothing is promised about the time between false ones.
"""

from __future__ import annotations

from typing import Literal

import msgspec


class Flag(msgspec.Struct, frozen=True, kw_only=True):
    """One finding worth a person's look.

    rule       'exponent': alpha differs from the baseline's; 'fit': a power law is ruled out
    direction  'heavier' or 'lighter' for 'exponent', else None
    p          of the test that speaks
    """

    rule: Literal["exponent", "fit"]
    direction: Literal["heavier", "lighter"] | None
    p: float


def flags_of(
    *,
    gof_p: float | None,
    plausible: bool | None,
    differs_p: float | None,
    direction: Literal["heavier", "lighter"] | None,
    differs_at: float,
) -> tuple[Flag, ...]:
    """The findings of one refit.

    Parameters: gof_p and plausible, of the refit's bootstrap, None without one; differs_p, of the exact test
    of the exponent against the baseline at the baseline's xmin, None when there is nothing to compare;
    differs_at, the level at which a difference counts.
    """
    flags = []
    if differs_p is not None and differs_p < differs_at:
        flags.append(Flag(rule="exponent", direction=direction, p=differs_p))
    if gof_p is not None and plausible is False:
        flags.append(Flag(rule="fit", direction=None, p=gof_p))
    return tuple(flags)
