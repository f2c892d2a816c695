"""Sentences: right figures, right number (one, many), p in plain words, cautions where they belong."""

from __future__ import annotations

import msgspec
import pytest

from monitor.plan import read_plan
from monitor.render.seen import FeedAccount, StreamSeen, decode_refit
from monitor.render.words import (
    CAUTION,
    findings,
    fit_sentences,
    flags_in_words,
    limit_words,
    moments_words,
    p_words,
    quiet_words,
    rejected_words,
    rival_words,
    times_in,
)
from monitor.render.words.fit import verdict_words
from monitor.tail.judgement import GoodnessOfFit, Judgement, Level, Limit, Rival
from storage.facts import Fact, RefitStored
from tests.stores import (
    HEAVIER,
    HOUR,
    LAST_PANE,
    LIGHTER,
    MISFIT,
    NOW,
    PASSED,
    SETTINGS,
    against,
    first_window,
    gof,
    judged,
    planned,
    refit,
    stream,
)
from tests.stores import quiet_refits as quiet

ZONE = "Europe/Lisbon"


@pytest.mark.parametrize(
    ("share", "words"),
    [
        (1.0, "nearly every time"),
        (0.62, "62 times in 100"),
        (0.03, "3 times in 100"),
        (0.01, "once in 100"),
        (0.0021, "2 times in 1 000"),
        (0.000012, "once in 100 000"),
        (1e-9, "less than once in 1 000 000"),
    ],
)
def test_chances_are_counts(share: float, words: str) -> None:
    assert times_in(share) == words


def test_p_is_said_in_plain_words_and_a_large_one_is_good() -> None:
    assert p_words(gof(0.03, 0.01, 0.07)) == (
        "p 0.03 (0.01 to 0.07): bad. A true power law would fit this badly only 3 times in 100"
    )
    assert p_words(gof(0.62, 0.58, 0.66)) == (
        "p 0.62 (0.58 to 0.66): good. A true power law would fit this badly 62 times in 100, "
        "so nothing speaks against it (large p is good)"
    )
    assert "doubtful" in p_words(gof(0.11, 0.09, 0.13, doubtful=True))
    none = GoodnessOfFit(
        p=0.0, p_interval=(0.0, 0.04), replicates=200, at_least_as_far=0, stopped="decided", rule_out=0.1,
        plausible=False, doubtful=False,
    )  # fmt: skip
    assert p_words(none) == ("p 0 (0 to 0.04): bad. A true power law would fit this badly less than 4 times in 100")


def seen(facts: list[Fact], *, plan: bool, limit: float | None = 6000.0) -> StreamSeen:
    """A stream as the screen sees it, made from a script of refits."""
    base = planned("dock") if plan else first_window("dock")
    settings = read_plan(SETTINGS, "test").stream("dock", "units")
    return StreamSeen(
        state=stream("dock"), plan=msgspec.structs.replace(settings, limit=limit), baseline=base, open_events=5,
        refits=tuple(decode_refit(fact) for fact in facts if isinstance(fact, RefitStored)), waiting=1,
    )  # fmt: skip


HEAVY = judged(2.21, 0.06, gof(0.31, 0.27, 0.35))


def heavy_refits(ages: list[int]) -> list[Fact]:
    return [
        refit("dock", LAST_PANE - k * HOUR, HEAVY, flags=HEAVIER, against=against(2.5, 2.208, 0.00021)) for k in ages
    ]


def test_heavier_than_planned_says_since_when_and_what_it_means_in_sizes() -> None:
    found = findings(seen([*quiet("dock", 6)[:3], *heavy_refits([2, 1, 0])], plan=True), ZONE, NOW)
    assert [one.kind for one in found] == ["heavier"]
    assert found[0].sentence == (
        "tail heavier than planned since 12:00 WET, 3 refits in a row; one event in 10 000 now passes 13 000 units, "
        "planned 5 200, limit 6 000"
    )
    assert found[0].detail[0] == (
        "Alpha above 120 units (2 310 events) 2.21, planned 2.50; smaller is heavier; luck alone would show a "
        "difference this large 2 times in 10 000."
    )


def test_a_single_flag_and_a_row_that_began_before_what_is_known() -> None:
    one = findings(seen([*quiet("dock", 6)[:3], *heavy_refits([0])], plan=True), ZONE, NOW)[0]
    assert one.headline == "tail heavier than planned since the refit of 14:00 WET"
    all_of_them = findings(seen(heavy_refits([1, 0]), plan=False), ZONE, NOW)[0]
    assert all_of_them.headline == (
        "tail heavier than its baseline in all of the last 2 refits (at least since 13:00 WET)"
    )


def test_lighter_is_less_pressing_than_a_passed_limit() -> None:
    light = judged(2.8, 0.06, gof(0.5, 0.4, 0.6), limit=PASSED)
    facts: list[Fact] = [refit("dock", LAST_PANE, light, flags=LIGHTER, against=against(2.5, 2.8, 0.004))]
    assert [one.kind for one in findings(seen(facts, plan=True), ZONE, NOW)] == ["limit", "lighter"]


def test_a_failed_refit_is_told_with_its_reason_and_the_last_judgement_still_stands() -> None:
    facts = [*heavy_refits([1]), refit("dock", LAST_PANE, None, state="failed", reason="the worker died 3 times")]
    found = findings(seen(facts, plan=True), ZONE, NOW)
    assert [one.kind for one in found] == ["heavier", "failed"]
    assert found[1].headline == "the refit of 14:00 WET failed: the worker died 3 times"


def test_a_level_far_beyond_the_data_carries_its_caution() -> None:
    far = judged(2.21, 0.06, gof(0.31, 0.27, 0.35), beyond=14.0)
    facts: list[Fact] = [refit("dock", LAST_PANE, far, flags=HEAVIER, against=against(2.5, 2.21, 0.0002))]
    detail = " ".join(findings(seen(facts, plan=True), ZONE, NOW)[0].detail)
    assert "Caution: that is 14.0 times the largest size seen." in detail
    near = " ".join(fit_sentences(judged(2.21, 0.06, gof(0.31, 0.27, 0.35), beyond=9.9), "units"))
    assert "Caution" not in near


def test_quiet_streams_without_figures_say_why() -> None:
    assert quiet_words(seen([], plan=True), ZONE, NOW) == (
        "not judged yet: 90 480 events so far, 1 window waiting to be judged"
    )
    none = Judgement(n=8, counting="measured", resolution="exact", reason="8 events are fewer than the 10 needed")
    assert quiet_words(seen([refit("dock", LAST_PANE, none)], plan=True), ZONE, NOW) == (
        "no tail to judge yet: 8 events are fewer than the 10 needed"
    )
    assert quiet_words(seen(quiet("dock", 2), plan=False), ZONE, NOW) == ""


def test_limits_say_chance_expectation_and_tolerance() -> None:
    assert limit_words(PASSED, "units") == (
        "limit 6 000 units: expected to be passed 2.1 times in 30 days (tolerable: 1); chance of at least one passage "
        "88 % (80 to 94), of more than tolerable 62 %"
    )
    rare = Limit(size=5.0, period="12h", chance=0.01, expected=0.01, interval=(0.005, 0.02))
    assert limit_words(rare, "") == (
        "limit 5: expected to be passed 0.010 times in 12 hours; chance of at least one passage 1.0 % (0.5 to 2.0)"
    )


def test_infinite_moments_in_words() -> None:
    assert "mean is infinite" in (moments_words(False, False) or "")
    assert "variance is infinite" in (moments_words(True, False) or "")
    assert "undecided" in (moments_words(None, None) or "")
    assert moments_words(True, True) is None


def test_a_judgement_in_sentences_begins_with_the_verdict_and_ends_with_the_caution() -> None:
    rivals = (
        Rival(tail="lognormal", log_likelihood_ratio=None, z=None, p=None, favours="not determined"),
        Rival(tail="exponential", log_likelihood_ratio=31.2, z=5.0, p=0.000001, favours="power law"),
    )
    lines = fit_sentences(judged(2.5, 0.06, gof(0.62, 0.58, 0.66), rivals=rivals), "units")
    assert lines[0] == ("A power law is a fair description of the largest 2 310 of 81 050 events (120 units and more).")
    assert lines[1].startswith("alpha 2.50 (2.44 to 2.56) at 95 %, standard error 0.0306 at this xmin")
    assert "twice the size is 2.8 times rarer" in lines[1]
    assert lines[2] == "xmin 120 units: the tail starts here; as good from 96 to 140 (alpha 2.48 to 2.53)."
    assert "Against a lognormal: not determined (its fit runs off to the edge of its range)." in lines
    assert any(line.startswith("One event in 10 000 passes 5 200 units (4 500 to 6 100)") for line in lines)
    assert lines[-1] == CAUTION


def test_verdicts_for_bad_doubtful_and_untested_fits() -> None:
    assert verdict_words(judged(2.5, 0.1, gof(0.01, 0.0, 0.02)), "kB").endswith("and more): it is ruled out.")
    assert verdict_words(judged(2.5, 0.1, gof(0.11, 0.08, 0.14, doubtful=True)), "kB").startswith("It is doubtful")
    untested = msgspec.structs.replace(judged(2.5, 0.1, gof(0.5, 0.4, 0.6)), gof=None)
    assert "was not tested" in verdict_words(untested, "kB")


def test_no_tail_gives_the_reason_first_and_one_event_is_singular() -> None:
    none = Judgement(n=1, counting="measured", resolution="exact", reason="1 event is fewer than the 10 needed")
    assert fit_sentences(none, "units") == ["No usable tail among 1 event: 1 event is fewer than the 10 needed."]


def test_sentences_are_single_harmless_lines() -> None:
    evil = msgspec.structs.replace(judged(2.5, 0.1, gof(0.5, 0.4, 0.6)), warnings=("line\nbreak \x1b[2J",))
    for line in fit_sentences(evil, "u\x1b[31mnits\u202e"):
        assert line.isprintable()


def test_a_rival_that_is_better_is_named() -> None:
    better = Rival(tail="power law with cut-off", log_likelihood_ratio=-9.1, z=None, p=0.00002, favours="rival")
    assert rival_words(better) == (
        "Against a power law with an exponential cut-off: the power law with an exponential cut-off describes the "
        "tail better (log-likelihood ratio -9.10, p 0.00002)."
    )


def test_a_level_without_a_size_or_bounds_is_not_invented() -> None:
    level = Level(one_in=10, size=None, interval=(None, None))
    bare = msgspec.structs.replace(judged(2.5, 0.1, gof(0.5, 0.4, 0.6)), levels=(level,))
    assert "One event in 10 passes no size can be given." not in fit_sentences(bare, "kB")
    assert "No size can be given that one event in 10 passes." in fit_sentences(bare, "kB")


def test_accounts_of_a_feed() -> None:
    account = FeedAccount(feed="f", chains=1, idle=0, lines=1, events=0, late=0, skipped={}, rejected={"not JSON": 1})
    assert rejected_words(account) == "1 of 1 line (100 %) rejected: 1 not JSON"
    assert rejected_words(msgspec.structs.replace(account, rejected={})) == "no line rejected of 1"


def test_a_doubtful_fit_is_not_called_ruled_out() -> None:
    near = judged(2.5, 0.06, gof(0.083, 0.064, 0.106, doubtful=True))
    stored = refit("dock", LAST_PANE, near, flags=MISFIT, against=against(2.5, 2.49, 0.7))
    found = findings(seen([stored], plan=True), ZONE, NOW)
    assert found[0].headline == "it is doubtful whether a power law describes the tail, since the refit of 14:00 WET"
    assert flags_in_words(decode_refit(stored), "plan") == ["power law in doubt"]
