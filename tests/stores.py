"""Scripted stores for tests of what people see: a warehouse with docks, as the daemon would have left it.

Judgements are written by hand, so that a frame can be checked figure by figure; panes hold drawn sizes.
"""

from __future__ import annotations

from math import log, log1p
from pathlib import Path

import msgspec
import numpy as np

from monitor.alarms.alarm import Spoke
from monitor.alarms.machine import raise_alarm, step
from monitor.alarms.priorities import POLICIES
from monitor.alarms.stimuli import Acknowledge, Shelve, Stimulus
from monitor.plan import STARTER
from monitor.render.words.alarm import PlanFacts, alarm_message
from monitor.tail.judgement import GoodnessOfFit, Judgement, Level, Limit, NearMinimum, Rival
from monitor.watch.baseline import planned as planned_baseline
from monitor.watch.dependence import Ground
from monitor.watch.flags import Flag
from monitor.watch.level import Allowance
from monitor.watch.rules import Reading, Ruled, begin, start
from monitor.watch.slots import Yardstick
from storage.facts import (
    AlarmMoved,
    AlarmStood,
    BaselineSet,
    ChainState,
    Fact,
    NoteWritten,
    PanePart,
    PaneSealed,
    RefitStored,
    RejectedSample,
    SettingsTaken,
    StreamState,
    WatchBegun,
    WatchStood,
)
from storage.gathering import PaneBuilder
from storage.pane import line_digest
from storage.store import Store, open_store

SECOND = 1_000_000_000
HOUR = 3600 * SECOND
NOW = 1_796_133_909 * SECOND  # 2026-12-01 14:05:09 UTC
LAST_PANE = NOW // HOUR * HOUR  # 14:00
EVIL = "\x1b[2J[red]dock\u202e\r\nnight"
WIDE = "倉庫-十番"

SETTINGS = (
    STARTER.replace('timezone = "UTC"', 'timezone = "Europe/Lisbon"').replace("# limit = 6000", "limit = 6000")
    + '\n[stream."north-dock".plan]\nalpha = 2.5\nxmin = 120\n'
)


def gof(p: float, low: float, high: float, *, replicates: int = 2500, doubtful: bool = False) -> GoodnessOfFit:
    """A bootstrap's answer against rule_out 0.1."""
    return GoodnessOfFit(
        p=p, p_interval=(low, high), replicates=replicates, at_least_as_far=round(p * replicates), stopped="decided",
        rule_out=0.1, plausible=p > 0.1, doubtful=doubtful,
    )  # fmt: skip


def judged(
    alpha: float, half: float, fit: GoodnessOfFit, *, xmin: float = 120.0, n: int = 81_050, n_tail: int = 2_310,
    rivals: tuple[Rival, ...] = (), limit: Limit | None = None,
    beyond: float | None = 2.1, by_rival: dict[str, object] | None = None,
) -> Judgement:  # fmt: skip
    """A judgement with a usable tail; its level follows from alpha, its interval from that of alpha."""

    def passed(exponent: float) -> float:
        return float(round(xmin * (10_000 * n_tail / n) ** (1 / (exponent - 1))))

    return Judgement(
        n=n, counting="measured", resolution="exact", alpha=alpha, alpha_se=half / 1.96,
        alpha_interval=(alpha - half, alpha + half), xmin=xmin, n_tail=n_tail, ks_distance=0.0123, gof=fit,
        near_minimum=NearMinimum(xmin=(96.0, 140.0), alpha=(alpha - 0.02, alpha + 0.03)), rivals=rivals,
        levels=(Level(one_in=10_000, size=passed(alpha), interval=(passed(alpha + half), passed(alpha - half)),
                      beyond_data=beyond, by_rival=by_rival),),
        mean_finite=True, variance_finite=False, smallest_size=1.0, largest_size=4_400.0, limit=limit,
    )  # fmt: skip


def refit(
    stream: str, end: int, judgement: Judgement | None, *, flags: tuple[Flag, ...] = (),
    against: dict[str, object] | None = None, state: str = "done", reason: str | None = None,
) -> RefitStored:  # fmt: skip
    """A stored refit of the 14 days up to `end`."""
    return RefitStored(
        id=f"{line_digest(stream.encode())}-{end // HOUR}", stream=stream, start=end - 14 * 24 * HOUR, end=end,
        state=state, panes=336, window_digest="ab", settings="cd", seed=7,  # type: ignore[arg-type]
        judgement=msgspec.json.encode(judgement).decode(),
        comparison=None if against is None else msgspec.json.encode(against).decode(),
        flags=msgspec.json.encode(flags).decode(), reason=reason, attempts=1, seconds=0.5,
        versions='{"tailgauge":"0.1.0"}', known_at=end + 5 * SECOND,
    )  # fmt: skip


def against(
    earlier: float, later: float, p: float, *, xmin: float = 120.0, n_earlier: int | None = None
) -> dict[str, object]:
    """A comparison as the refit stores it."""
    return {
        "xmin": xmin, "n_earlier": n_earlier, "n_later": 2_310, "alpha_earlier": earlier, "alpha_later": later,
        "ratio": (earlier - 1) / (later - 1), "p": p, "direction": "heavier" if later < earlier else "lighter",
        "method": "exact F test", "share_earlier": None if n_earlier is None else 0.0285, "share_later": 0.0285,
    }  # fmt: skip


def stream(name: str, *, age: int = 12, events: int = 90_480, late: int = 0) -> StreamState:
    """A stream whose newest event is `age` seconds old."""
    return StreamState(
        stream=name, feed="orders", unit="units", first=NOW - 30 * 24 * HOUR, newest=NOW - age * SECOND,
        events=events, late=late,
    )  # fmt: skip


def planned(name: str) -> BaselineSet:
    """The plan of the settings as a baseline."""
    return BaselineSet(
        id=f"plan-{name}", stream=name, source="plan", refit=None, alpha=2.5, xmin=120.0, n_tail=None, n=None, p=None,
        plausible=None, counting="measured", panes_to=0, effective_from=0, known_at=0,
    )  # fmt: skip


def first_window(name: str, alpha: float = 2.45, xmin: float = 120.0) -> BaselineSet:
    """A baseline judged on the first window with enough tail."""
    return BaselineSet(
        id=f"first-{name}", stream=name, source="first window", refit="r1", alpha=alpha, xmin=xmin, n_tail=2_200,
        n=77_200, p=0.44, plausible=True, counting="measured", panes_to=NOW - 20 * 24 * HOUR,
        effective_from=NOW - 20 * 24 * HOUR, known_at=NOW - 20 * 24 * HOUR,
    )  # fmt: skip


PASSED = Limit(
    size=6_000.0, period="30d", chance=0.88, expected=2.1, interval=(0.8, 0.94), at_most=1.0, chance_of_more=0.62
)
HEAVIER = (Flag(rule="exponent", direction="heavier", p=0.00021),)
LIGHTER = (Flag(rule="exponent", direction="lighter", p=0.004),)
MISFIT = (Flag(rule="fit", direction=None, p=0.002),)


def quiet_refits(name: str, count: int = 12, alpha: float = 2.48) -> list[Fact]:
    """Refits that say what the baseline says."""
    quiet = judged(alpha, 0.06, gof(0.62, 0.58, 0.66))
    return [
        refit(name, LAST_PANE - k * HOUR, quiet, against=against(2.45, alpha, 0.4, n_earlier=2_200))
        for k in reversed(range(count))
    ]


def north_dock() -> list[Fact]:
    """Planned on 2.5, quiet, then heavier in the last three refits."""
    heavy = judged(2.21, 0.06, gof(0.31, 0.27, 0.35), limit=PASSED)
    calm = judged(2.49, 0.06, gof(0.55, 0.5, 0.6))
    early = [refit("north-dock", LAST_PANE - k * HOUR, calm, against=against(2.5, 2.49, 0.7)) for k in range(11, 2, -1)]
    late = [
        refit("north-dock", LAST_PANE - k * HOUR, heavy, flags=HEAVIER, against=against(2.5, 2.208, 0.00021))
        for k in range(2, -1, -1)
    ]
    return [stream("north-dock", events=120_480, late=17), planned("north-dock"), *early, *late]


def east_dock() -> list[Fact]:
    """A tail cut off by a new rule: the power law is ruled out, a cut-off describes it better."""
    rivals = (
        Rival(tail="lognormal", log_likelihood_ratio=-0.4, z=-0.5, p=0.62, favours="neither"),
        Rival(tail="power law with cut-off", log_likelihood_ratio=-9.1, z=None, p=0.00002, favours="rival"),
    )
    cut = judged(
        2.7,
        0.08,
        gof(0.002, 0.0004, 0.006),
        rivals=rivals,
        by_rival={"tail": "power law with cut-off", "size": 1_432.0},
    )
    calm = judged(2.46, 0.06, gof(0.5, 0.46, 0.54))
    ends = [LAST_PANE - k * HOUR for k in range(11, -1, -1)]
    return [
        stream("east-dock", age=95), first_window("east-dock"),
        *(refit("east-dock", end, calm, against=against(2.45, 2.46, 0.8, n_earlier=2_200)) for end in ends[:-2]),
        *(refit("east-dock", end, cut, flags=MISFIT, against=against(2.45, 2.52, 0.2, n_earlier=2_200))
          for end in ends[-2:]),
    ]  # fmt: skip


AT = LAST_PANE - HOUR
"""When the alarms below were raised: 13:00."""


def watch_of(
    name: str, evidence: dict[str, float] | None = None, *, measured: bool = True,
    directions: dict[str, str] | None = None,
) -> list[Fact]:  # fmt: skip
    """A watch and what its rules read last. evidence: of a rule, as a share of its threshold; else a thousandth."""
    yardstick = Yardstick(xmin=120.0, counting="measured", passage=6_000.0)
    watch = begin(planned_baseline(name, 2.5, yardstick, Allowance(a_day=1 / 30)), 540.0)
    begun = f"watch-{line_digest(name.encode())}"
    ground = Ground(
        budget_days=540.0, promised_days=450.0, blocks="days", number=40, alarms=2, days=900.0,
        words="measured on the stream's own past (40 days resampled)",
    )  # fmt: skip
    readings = [
        reading_of(ruled, name, (evidence or {}).get(ruled.rule, 0.001), (directions or {}).get(ruled.rule))
        for ruled in watch.rules
    ]
    return [
        WatchBegun(
            id=begun, stream=name, baseline=f"plan-{name}", effective_from=NOW - 20 * 24 * HOUR,
            watch=msgspec.json.encode(watch).decode(),
            ground=msgspec.json.encode(ground).decode() if measured else None, known_at=NOW - 20 * 24 * HOUR,
        ),
        WatchStood(
            stream=name, watch=begun, at=LAST_PANE, state=msgspec.json.encode(start(watch, LAST_PANE)).decode(),
            readings=msgspec.json.encode(readings).decode(),
        ),
    ]  # fmt: skip


def reading_of(ruled: Ruled, name: str, share: float, direction: str | None = None) -> Reading:
    """What a rule reads when its evidence is that share of its threshold; rules without evidence read none."""
    gathers = ruled.rule not in ("body", "single event")
    return Reading(
        rule=ruled.rule, stream=name, at_ns=LAST_PANE, ln_p=(), ln_q=(), ln_threshold=ruled.ln_threshold,
        ln_statistic=ruled.ln_threshold + log(share) if gathers else None,
        way=log1p(100 * share) / log(101) if gathers else 0.0, direction=direction,  # type: ignore[arg-type]
    )  # fmt: skip


def alarm(name: str, rule: str, *stimuli: Stimulus, at: int = AT, **spoken: object) -> list[Fact]:
    """An alarm and what was done with it since, a minute apart, as the engine stores it."""
    spoke = Spoke(stream=name, rule=rule, at=at, events=90_000, **spoken)  # type: ignore[arg-type]
    outcomes = [raise_alarm(spoke, POLICIES[rule])]  # type: ignore[index]
    facts = PlanFacts(timezone="Europe/Lisbon", unit="units", one_in=10_000, limit=6_000.0, planned=True)
    worded = msgspec.structs.replace(outcomes[0].alarm, message=alarm_message(outcomes[0].alarm, facts))
    for number, stimulus in enumerate(stimuli):
        outcomes.append(step(worded, stimulus, at + (number + 1) * 60 * SECOND))
        assert outcomes[-1].refused is None
        worded = outcomes[-1].alarm
    moves = [change for outcome in outcomes for change in outcome.changes]
    return [
        AlarmStood(
            id=worded.id, stream=name, rule=rule, state=worded.state, raised_at=at, open=worded.is_open,
            alarm=msgspec.json.encode(worded).decode(), known_at=at,
        ),
        *(
            AlarmMoved(
                id=f"{worded.id}-{number}", alarm=worded.id, at=move.at, from_state=move.from_state,
                to_state=move.to_state, cause=move.cause, by=move.by, note=move.note, known_at=move.at,
            )
            for number, move in enumerate(moves)
        ),
    ]  # fmt: skip


def watches_and_alarms() -> list[Fact]:
    """One dock's tail is heavier and its limit passed too often (seen by ana), one is silent, one alarm is shelved."""
    return [
        *watch_of("north-dock", {"exponent": 0.004}, measured=False),
        *watch_of("east-dock"),
        *watch_of("south-dock", {"exponent": 0.09}, directions={"exponent": "heavier", "tail share": "lighter"}),
        *watch_of(WIDE),
        *watch_of(EVIL),
        *alarm(
            "north-dock", "exponent", direction="heavier", changed_at=AT - HOUR, changed_between=(AT - 2 * HOUR, AT),
            unit="units", measure="level", before=5_200.0, after=13_000.0,
        ),
        *alarm("north-dock", "level", Acknowledge(by="ana", note="dock told"), unit="units", measure="rate",
               before=1 / 30, after=0.07, direction="heavier"),
        *alarm(EVIL, "no events", measure="silence", before=12.0, after=3_600.0),
        *alarm(WIDE, "single event", Shelve(by="rui", until=NOW + HOUR), unit="units", measure="size", after=7_100.0),
        NoteWritten(id="n1", at=AT - HOUR, by="ana", text="new customer\x1b[2J at north-dock", known_at=AT),
    ]  # fmt: skip


def settings_fact(text: str = SETTINGS) -> SettingsTaken:
    """The settings in force."""
    return SettingsTaken(digest="cd", text=text, effective_from=0, known_at=0)


def chain(rejected: dict[str, int] | None = None, lines: int = 200_000) -> ChainState:
    """The one chain of the feed."""
    rejected = {"not JSON": 3, "zero": 2} if rejected is None else rejected
    return ChainState(
        feed="orders", chain="logs/orders.jsonl", bookmark="{}", running_max=NOW, edge=None, idle=False, waiting=None,
        lines=lines, events=lines - sum(rejected.values()) - 40, late=17, skipped={"blank": 40}, rejected=rejected,
    )  # fmt: skip


def sizes_of(name: str, n: int = 2_000) -> np.ndarray:
    """Drawn sizes of a dock: a body and a power-law tail from 120 on."""
    draw = np.random.default_rng(sum(name.encode()) + 20_261_201)
    tail = np.round(120 * (1 - draw.random(n // 35)) ** (-1 / 1.4), 1)
    return np.concatenate([np.round(draw.uniform(1, 120, n - n // 35), 1), tail])


def panes(name: str) -> list[list[Fact]]:
    """Two commits that fill and seal a pane, and open the next."""
    start = LAST_PANE - HOUR
    builder = PaneBuilder()
    sizes = sizes_of(name)
    builder.add(
        sizes, np.full(sizes.size, start, np.int64), 0, lambda i: (line_digest(f"{name}{i}".encode()), f"orders @{i}")
    )
    content = builder.build(4096)
    return [
        [PanePart(stream=name, start=start, end=LAST_PANE, content=content)],
        [
            PaneSealed(stream=name, start=start, end=LAST_PANE, window_start=LAST_PANE - 14 * 24 * HOUR,
                       settings="cd", known_at=LAST_PANE),
            PanePart(stream=name, start=LAST_PANE, end=LAST_PANE + HOUR, content=content),
        ],
    ]  # fmt: skip


def warehouse(path: Path) -> Path:
    """The store of the warehouse: two docks have alarms, one is flagged by its refits alone, two are quiet, one new."""
    with make(path) as store:
        for name in ("north-dock", "east-dock", "south-dock"):
            for facts in panes(name):
                store.commit(facts)
        store.commit(
            [
                settings_fact(), chain(), *north_dock(), *east_dock(),
                stream("south-dock", age=4, late=2), first_window("south-dock"), *quiet_refits("south-dock"),
                stream(WIDE, age=7), first_window(WIDE, 2.5), *quiet_refits(WIDE, 5, 2.512),
                stream(EVIL, age=3700), first_window(EVIL), *quiet_refits(EVIL, 12),
                stream("west-dock", age=3, events=312), *watches_and_alarms(),
                RejectedSample(feed="orders", chain="logs/orders.jsonl", reason="not JSON", position=17,
                               text=b"\x1b[31mbroken", known_at=NOW),
            ]
        )  # fmt: skip
    return path


def make(path: Path) -> Store:
    """A new store."""
    return open_store(path, store_id="test", now=0, distinct=4096)
