"""The daemon's loop: poll, step, commit, then effects. One thread; `turn` never waits."""

from __future__ import annotations

from monitor.engine import alarming, refits
from monitor.engine.state import State
from monitor.engine.step import committed, step
from monitor.engine.stimuli import Asked, CommitDue, Ended, Judged
from monitor.service.clock import Clock
from monitor.service.feeds import OpenFeed
from monitor.service.log import Log
from monitor.service.telling import Telling
from monitor.service.worker import Worker
from storage.errors import StoreError
from storage.facts import BaselineSet, ChainState, Fact, Forget, RefitStored
from storage.store import Store

BLOCK = 4 << 20
"""Bytes taken from a feed in one turn."""
COMMIT_EVENTS = 500_000
COMMIT_BYTES = 64 << 20
"""What is held between commits at most; the second is of lines read. Each of the many streams costs something a
commit, whatever it brought, so commits should be few."""
COMMIT_SECONDS = 1.0
AWAITED_SECONDS = 0.05
"""Between commits while a sender waits for one."""
HURRY_SECONDS = 0.5
"""After an answer the sender's next batch is probably on its way."""
PAGES_GIVEN_BACK = 2000
"""Free pages returned to the file system after a deletion; what is left is returned after the next."""
REMIND_SECONDS = 5.0
"""Between looks for reminders that are due."""
FIRST_RETRY, LAST_RETRY = 1.0, 60.0
"""Seconds between tries of a commit that failed, doubling."""


class Loop:
    """Wires feeds, engine, store and worker. The caller calls `turn` and waits when it returns False."""

    def __init__(
        self, state: State, store: Store, feeds: list[OpenFeed], worker: Worker, *, clock: Clock, log: Log
    ) -> None:
        self.state = state
        self.store = store
        self.feeds = feeds
        self.worker = worker
        self.clock = clock
        self.log = log
        self._pending: list[Fact] = []
        self._last_commit = clock.monotonic()
        self._retry_at = 0.0
        self._last_answer = -HURRY_SECONDS
        self._retry_after = FIRST_RETRY
        self._started = clock.monotonic()
        self._told_compiling = False
        self._compiled = False
        self.telling: Telling | None = None
        """Notices on their way, where the settings name receivers."""
        self._remind_at = 0.0

    def turn(self) -> bool:
        """One round. Returns True when lines came in, False when there was nothing to read."""
        active = self._failing_store() or self._poll_feeds()
        real = self.clock.monotonic()
        due = AWAITED_SECONDS if any(feed.awaited for feed in self.feeds) else COMMIT_SECONDS
        if self._much_held() or real - self._last_commit >= due:
            self.commit()
        self._heed_requests()
        self._poll_worker()
        self._tell_receivers()
        return active

    def _tell_receivers(self) -> None:
        """Move notices on; every change of an errand is committed before the next."""
        if self._pending or self.telling is None:
            return
        self._pending = self.telling.turn()
        if not self._pending and self.clock.monotonic() >= self._remind_at:
            self._remind_at = self.clock.monotonic() + REMIND_SECONDS
            self._pending = alarming.remind(self.state, self.telling.told, self.clock.now())
        if self._pending:
            self.commit()

    def _heed_requests(self) -> None:
        """What people asked for through the store, each answered in a commit of its own."""
        if self._pending:
            return
        for request, act, alarm in self.store.open_requests():
            self._pending = step(self.state, Asked(request=request, act=act, alarm=alarm, now=self.clock.now()))
            if not self.commit():
                return

    def _much_held(self) -> bool:
        return self.state.uncommitted >= COMMIT_EVENTS or sum(feed.held for feed in self.feeds) >= COMMIT_BYTES

    def _failing_store(self) -> bool:
        """While commits fail, nothing more is read: memory stays bounded and the positions stay true."""
        if not self._pending:
            return False
        if self.clock.monotonic() >= self._retry_at:
            self.commit()
        return False

    def _poll_feeds(self) -> bool:
        if self._pending:
            return False
        active = False
        for feed in self.feeds:
            for seen in feed.seen():
                step(self.state, seen)
            for arrived in feed.poll(BLOCK):
                step(self.state, arrived)
                active = True
            for trouble in feed.troubles():
                self.log.warning(trouble)
            active = active or feed.receiving
        return active

    def commit(self) -> bool:
        """Commit everything learnt. On failure it is kept and tried again later; returns whether it is on disk."""
        facts = self._pending or step(self.state, CommitDue(now=self.clock.now()))
        self._last_commit = self.clock.monotonic()
        try:
            self.store.commit(facts)
        except StoreError as error:
            self._pending = facts
            self._retry_at = self.clock.monotonic() + self._retry_after
            self._retry_after = min(2 * self._retry_after, LAST_RETRY)
            self.log.error(f"{error} Nothing is lost; reading stops until the store can be written.")
            return False
        self._pending = []
        for feed in self.feeds:
            feed.held = 0
        self._retry_after = FIRST_RETRY
        for sentence in self.store.damaged:
            self.log.error(sentence)
        self.store.damaged.clear()
        committed(self.state, facts)
        for fact in facts:
            self._tell(fact)
            self._answer(fact)
        if any(isinstance(fact, Forget) for fact in facts):
            self.store.give_back_space(PAGES_GIVEN_BACK)
        if self.telling is not None:
            self._pending = self.telling.heard(facts)
            return self.commit() if self._pending else True
        return True

    def _answer(self, fact: Fact) -> None:
        """A committed position: senders who waited for it are told."""
        if isinstance(fact, ChainState):
            for feed in self.feeds:
                if feed.plan.name == fact.feed and feed.awaited:
                    feed.committed(fact.bookmark)
                    self._last_answer = self.clock.monotonic()

    def _poll_worker(self) -> None:
        self._tell_compiling()
        if self._pending:
            return
        outcome = self.worker.poll()
        if self.worker.ready and not self._compiled:
            self._compiled = True
            for feed in self.feeds:
                feed.use_compiled_parser()
        if outcome is not None:
            if outcome.failure:
                self.log.warning(f"refit of {outcome.job.stream}: {outcome.failure}")
            self._pending = step(self.state, Judged(outcome=outcome, now=self.clock.now()))
            self.commit()
        if not self.worker.busy and not self._pending:
            request = refits.next_request(self.state)
            if request is not None:
                self.worker.submit(request)

    def _tell_compiling(self) -> None:
        if not self.worker.ready and not self._told_compiling and self.clock.monotonic() - self._started > 3.0:
            self._told_compiling = True
            self.log.info("first use: compiling the tail engine; events are taken in meanwhile")

    def _tell(self, fact: Fact) -> None:
        if isinstance(fact, BaselineSet):
            self.log.info(f"{fact.stream}: baseline from the {fact.source}: alpha {fact.alpha:.3f} above {fact.xmin:g}")
        elif isinstance(fact, RefitStored) and fact.state == "failed":
            self.log.error(f"{fact.stream}: a refit failed for good: {fact.reason}")
        elif isinstance(fact, RefitStored):
            self.log.debug(f"{fact.stream}: refit {fact.id} stored after {fact.seconds:.2f} s")

    def read_to_end(self) -> None:
        """Take in all that is there; the ends of the files count as their ends."""
        while self.turn():
            pass
        for feed in self.feeds:
            for arrived in feed.finish():
                step(self.state, arrived)
                if self._much_held():
                    self.commit()
            for trouble in feed.troubles():
                self.log.warning(trouble)
        step(self.state, Ended(now=self.clock.now()))

    @property
    def hurried(self) -> bool:
        """Senders wait, or did just now: the next turn should come soon."""
        lately = self.clock.monotonic() - self._last_answer < HURRY_SECONDS
        return lately or any(feed.awaited for feed in self.feeds)

    @property
    def refits_left(self) -> int:
        """Windows still to be judged."""
        return len(self.state.jobs)

    @property
    def failing(self) -> bool:
        """The last commit did not reach the disk."""
        return bool(self._pending)
