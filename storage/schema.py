"""The tables, as migrations: one function each, never edited once released."""

from __future__ import annotations

from sqlite_utils import Database
from sqlite_utils.migrations import Migrations

APPLICATION_ID = 0x54474701
"""Marks the file as one of our stores (SQLite's application_id)."""

migrations = Migrations("tailgauge")


def _time(column: str) -> str:
    """SQL that shows a time in ns as UTC text."""
    return f"strftime('%Y-%m-%dT%H:%M:%SZ', {column} / 1000000000, 'unixepoch')"


@migrations()
def m001_first_tables(db: Database) -> None:
    """Settings, chains, streams, panes, refits and baselines."""
    for statement in (
        "create table meta (key text primary key, value text not null) strict",
        """create table settings (
            digest text not null, text text not null, effective_from integer not null,
            known_at integer not null) strict""",
        """create table chain (
            feed text not null, chain text not null, bookmark text not null, running_max integer, edge integer,
            idle integer not null, waiting text, lines integer not null, events integer not null,
            late integer not null, skipped text not null, rejected text not null,
            primary key (feed, chain)) strict""",
        """create table rejected_sample (
            id integer primary key, feed text not null, chain text not null, reason text not null,
            position integer not null, text blob not null, known_at integer not null) strict""",
        "create index rejected_sample_of on rejected_sample (feed, chain, reason)",
        """create table stream (
            stream text primary key, feed text not null, unit text not null, first_ns integer not null,
            newest_ns integer not null, events integer not null, late integer not null) strict""",
        """create table advance (
            id integer primary key, feeds text not null, to_ns integer not null, known_at integer not null) strict""",
        """create table pane_part (
            id integer primary key, stream text not null, from_ns integer not null, to_ns integer not null,
            events integer not null, content blob not null) strict""",
        "create index pane_part_of on pane_part (stream, from_ns)",
        """create table pane (
            stream text not null, from_ns integer not null, to_ns integer not null, events integer not null,
            late integer not null, distinct_sizes integer not null, resolution text not null,
            smallest real not null, largest real not null, digest text not null, content blob not null,
            known_at integer not null, primary key (stream, from_ns)) strict""",
        """create table refit_job (
            stream text not null, from_ns integer not null, to_ns integer not null, settings text not null,
            attempts integer not null, primary key (stream, to_ns)) strict""",
        """create table refit (
            id text primary key, stream text not null, from_ns integer not null, to_ns integer not null,
            state text not null, panes integer not null, window_digest text not null, settings text not null,
            seed integer not null, judgement text not null, comparison text, flags text not null, reason text,
            attempts integer not null, seconds real not null, versions text not null,
            known_at integer not null) strict""",
        "create index refit_of on refit (stream, to_ns)",
        """create table baseline (
            id text primary key, stream text not null, source text not null, refit text, alpha real not null,
            xmin real not null, n_tail integer, n integer, p real, plausible integer, counting text not null,
            panes_to integer not null, effective_from integer not null, known_at integer not null,
            by text, note text) strict""",
        "create index baseline_of on baseline (stream, effective_from)",
        """create table watch (
            id text primary key, stream text not null, baseline text not null, effective_from integer not null,
            watch text not null, ground text, known_at integer not null) strict""",
        "create index watch_of on watch (stream, effective_from)",
        """create table watch_state (
            stream text primary key, watch text not null, at_ns integer not null, state text not null,
            readings text not null) strict""",
        """create table spoken (
            id text primary key, stream text not null, rule text not null, at_ns integer not null,
            watch text not null, spoken text not null, change text, known_at integer not null) strict""",
        "create index spoken_of on spoken (stream, at_ns)",
        """create table alarm (
            id text primary key, stream text not null, rule text not null, state text not null,
            raised_at integer not null, open integer not null, alarm text not null,
            known_at integer not null) strict""",
        "create index alarm_open on alarm (open, raised_at)",
        """create table alarm_change (
            id text primary key, alarm text not null, at_ns integer not null, from_state text not null,
            to_state text not null, cause text not null, by text, note text, known_at integer not null) strict""",
        "create index alarm_change_of on alarm_change (alarm, at_ns)",
        """create table notice (
            id text primary key, alarm text not null, stream text not null, kind text not null, at_ns integer not null,
            data text not null, known_at integer not null) strict""",
        """create table errand (
            notice text not null, receiver text not null, alarm text not null, at_ns integer not null,
            due integer not null, state text not null, tries integer not null, first_try integer, ended_at integer,
            detail text, known_at integer not null, primary key (notice, receiver)) strict""",
        "create index errand_waiting on errand (state, at_ns)",
        """create table note (
            id text primary key, at_ns integer not null, by text not null, text text not null,
            known_at integer not null) strict""",
        """create table known_change (
            id text primary key, from_ns integer not null, to_ns integer not null, streams text not null,
            reason text not null, effect text not null, by text not null, known_at integer not null) strict""",
        """create table accepted_change (
            id text primary key, stream text not null, since integer not null, by text not null, note text not null,
            known_at integer not null) strict""",
        """create table request (
            id text primary key, act text not null, made_at integer not null, done integer, answer text,
            known_at integer) strict""",
        """create table quarantine (
            id integer primary key, stream text not null, from_ns integer not null, events integer not null,
            reason text not null, content blob not null, known_at integer not null) strict""",
        """create table forgotten (
            id integer primary key, stream text not null, from_ns integer not null, to_ns integer not null,
            panes integer not null, events integer not null, refits integer not null, digest text not null,
            known_at integer not null) strict""",
        f"""create view refits_readable as select
            stream, {_time("from_ns")} as window_from_utc, {_time("to_ns")} as window_to_utc, state,
            json_extract(judgement, '$.n') as events, json_extract(judgement, '$.alpha') as alpha,
            json_extract(judgement, '$.xmin') as xmin_in_unit, json_extract(judgement, '$.n_tail') as tail_events,
            json_extract(judgement, '$.ks_distance') as ks_distance, json_extract(judgement, '$.gof.p') as p,
            flags, id from refit""",
        f"""create view panes_readable as select
            stream, {_time("from_ns")} as from_utc, {_time("to_ns")} as to_utc, events, late, distinct_sizes,
            resolution, smallest, largest, digest from pane""",
    ):
        db.execute(statement)


VERSION = len(migrations._migrations)
"""Schema version of this program; kept as SQLite's user_version, which Migrations does not know."""
