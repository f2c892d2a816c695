"""Refits and screens as builtins, ready for one JSON document: numbers as numbers, times as RFC 3339 UTC."""

from __future__ import annotations

from typing import Any

import msgspec

from monitor.render.alarm_documents import alarm_document
from monitor.render.attention import telling_alarm, urgency
from monitor.render.planned import baseline_level
from monitor.render.safe import plain
from monitor.render.seen import FeedAccount, Refit, Seen, StreamSeen, WatchSeen
from monitor.render.times import utc_text
from monitor.render.words.findings import Finding, feed_findings, findings, flags_in_words
from monitor.render.words.watch import promise_words, unwatched_words, way_words
from monitor.tail.judgement import as_document
from storage.facts import BaselineSet


def refit_document(refit: Refit, unit: str, baseline: BaselineSet | None) -> dict[str, Any]:
    """One refit: the document of `fit`, and where and when it belongs. A failed refit has alpha null."""
    body: dict[str, Any] = {"n": None, "alpha": None, "reason": refit.reason}
    if refit.judgement is not None:
        body = as_document(refit.judgement)
    return {
        "id": refit.id,
        "stream": refit.stream,
        "state": refit.state,
        "at": utc_text(refit.end),
        "from": utc_text(refit.start),
        "to": utc_text(refit.end),
        "panes": refit.panes,
        "unit": unit,
        # Rejected lines belong to a feed, not to a window of one stream.
        "rejected": None,
        **body,
        "version": _version(refit.versions),
        "baseline": _against_document(refit, baseline),
        "flags": [
            {**msgspec.to_builtins(flag), "words": words}
            for flag, words in zip(
                refit.flags, flags_in_words(refit, None if baseline is None else baseline.source), strict=True
            )
        ],
    }


def _version(versions: str) -> Any:
    """The versions as they were stored: an object, or the text itself when it is none."""
    try:
        return msgspec.json.decode(versions)
    except msgspec.DecodeError:
        return versions or None


def _against_document(refit: Refit, baseline: BaselineSet | None) -> dict[str, Any] | None:
    if baseline is None and refit.against is None:
        return None
    found: dict[str, Any] = {
        "source": None, "alpha": None, "xmin": None, "n_tail": None, "alpha_now": None, "n_tail_now": None,
        "p": None, "direction": None,
    }  # fmt: skip
    if baseline is not None:
        found |= {"source": baseline.source, "alpha": baseline.alpha, "xmin": baseline.xmin, "n_tail": baseline.n_tail}
    against = refit.against
    if against is not None:
        found |= {
            "xmin": against.xmin, "alpha_now": against.alpha_later, "n_tail_now": against.n_later, "p": against.p,
            "direction": against.direction,
        }  # fmt: skip
        if against.alpha_earlier is not None:
            found["alpha"] = against.alpha_earlier
    return found


def screen_document(seen: Seen, now: int) -> dict[str, Any]:
    """Everything a frame shows, for machines; the histories of alarms are told by `tailgauge alarms`."""
    zone = seen.plan.timezone
    return {
        "store": seen.store,
        "at": utc_text(now),
        "timezone": zone,
        "feeds": [_feed_document(feed) for feed in seen.feeds],
        "needs_a_look": [
            {"feed": feed.feed, "kind": finding.kind, "words": plain(finding.sentence)}
            for feed, finding in feed_findings(seen)
        ],
        "streams": [_stream_document(stream, zone, now) for stream in seen.streams],
    }


def _feed_document(feed: FeedAccount) -> dict[str, Any]:
    document: dict[str, Any] = msgspec.to_builtins(feed)
    return document


def _stream_document(stream: StreamSeen, zone: str, now: int) -> dict[str, Any]:
    state, base, judged = stream.state, stream.baseline, stream.judged
    level = stream.level
    return {
        "stream": state.stream,
        "feed": state.feed,
        "unit": stream.plan.unit,
        "events": state.events,
        "late": state.late,
        "first": utc_text(state.first),
        "newest": utc_text(state.newest),
        "age_seconds": (now - state.newest) / 1e9,
        "open_events": stream.open_events,
        "waiting_windows": stream.waiting,
        "alarms": [alarm_document(alarm, ()) for alarm in sorted(stream.alarms, key=urgency)],
        "needs_a_look": [_finding_document(finding, stream) for finding in findings(stream, zone, now)],
        "watch": None if stream.watch is None else _watch_document(stream.watch),
        "not_watched": unwatched_words(stream) or None,
        "baseline": None if base is None else _baseline_document(base),
        "limit_size": stream.plan.limit,
        "baseline_level": None if level is None else baseline_level(stream, level.one_in),
        "refit": None if judged is None else refit_document(judged, stream.plan.unit, base),
        "last_refits": [
            {
                "id": refit.id, "at": utc_text(refit.end), "state": refit.state,
                "alpha": None if refit.judgement is None else refit.judgement.alpha,
                "p": None if refit.judgement is None or refit.judgement.gof is None else refit.judgement.gof.p,
                "flags": flags_in_words(refit, None if base is None else base.source),
            }
            for refit in stream.refits
        ],
    }  # fmt: skip


def _finding_document(finding: Finding, stream: StreamSeen) -> dict[str, Any]:
    """A finding of refits: how many in a row say it (0: no judgement), and the open alarm that tells it already."""
    telling = telling_alarm(finding, stream.alarms)
    return {
        "kind": finding.kind,
        "words": plain(finding.sentence),
        "detail": [plain(text) for text in finding.detail],
        "refits": finding.refits,
        "alarm": None if telling is None else telling.id,
    }


def _watch_document(watch: WatchSeen) -> dict[str, Any]:
    """The promise, what each rule read last, and what is not watched. ln_statistic null: nothing gathered."""
    ground = watch.ground
    return {
        "since": utc_text(watch.since),
        "at": utc_text(watch.at),
        "promised_days": watch.promised_days if ground is None or ground.kept else None,
        "budget_days": watch.watch.budget_days,
        "ground": None if ground is None else msgspec.to_builtins(ground),
        "words": promise_words(watch),
        "readings": [
            {
                "rule": one.rule, "way": one.way, "ln_statistic": one.ln_statistic, "ln_threshold": one.ln_threshold,
                "direction": one.direction, "words": way_words(one),
            }
            for one in watch.readings
        ],
        "unwatched": [{"rule": one.rule, "why": one.why} for one in watch.watch.unwatched],
    }  # fmt: skip


def _baseline_document(base: BaselineSet) -> dict[str, Any]:
    return {
        "id": base.id, "source": base.source, "refit": base.refit, "alpha": base.alpha, "xmin": base.xmin,
        "n_tail": base.n_tail, "n": base.n, "p": base.p, "plausible": base.plausible,
        "effective_from": utc_text(base.effective_from), "by": base.by, "note": base.note,
    }  # fmt: skip
