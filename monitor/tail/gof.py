"""Goodness of fit by a bootstrap that runs no further than the question needs.

p is the share of replicate distances at or above the observed one (Clauset, Shalizi & Newman 2009, section 4.1;
every replicate chooses its own xmin). The first DRAWN replicates are fitted in full and their exponents, lower
ends and tails are kept for intervals; the rest only answer whether they are at least as far. Replicate r depends
on nothing but the key and r, so a tally comes out the same for any number of threads, any cutting into chunks and
any interruption and resumption.
"""

from __future__ import annotations

from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Literal

import numpy as np
from numpy.typing import NDArray

from monitor.tail.judgement import GoodnessOfFit, Options
from monitor.tail.stopping import first_decision, interval_at_any_stop
from monitor.tail.tail_fit import Draws, TailFit

if TYPE_CHECKING:
    from monitor.tail.laws.law import Chunk, Law, Replicate

DRAWN = 400
"""Replicates fitted in full: their 10th and 391st are the ends of a 95 % interval."""

MODEL_KEY = 1
DATA_KEY = 2

# Rows to draw before cancellation and progress are looked at again: some tens of milliseconds.
_ROWS_A_CHUNK = 2_000_000

Progress = Callable[[int, int], None]
Cancelled = Callable[[], bool]


class Interrupted(Exception):  # noqa: N818 - it is no error: somebody asked for it
    """The caller's `cancelled` said yes."""


@dataclass(frozen=True, slots=True)
class Tally:
    """Replicates so far, in the order of their numbers; hand it back to go on.

    far     bool (m,)     at least as far as the data?
    alpha   float64 (d,)  of the first d <= DRAWN replicates, fitted in full; so xmin, n_tail
    """

    far: NDArray[np.bool_] = field(default_factory=lambda: np.zeros(0, np.bool_))
    alpha: NDArray[np.float64] = field(default_factory=lambda: np.zeros(0))
    xmin: NDArray[np.float64] = field(default_factory=lambda: np.zeros(0))
    n_tail: NDArray[np.int64] = field(default_factory=lambda: np.zeros(0, np.int64))

    @property
    def replicates(self) -> int:
        """How many replicates are in the tally."""
        return self.far.size

    def draws(self, n: int) -> Draws:
        """The full refits among them that had a tail."""
        return _draws_of(self.alpha, self.xmin, self.n_tail, n, "model")


class Bootstrap:
    """The replicates of one fit. `run` goes on from any tally, its own or one that was stored."""

    def __init__(self, law: Law, fit: TailFit, options: Options) -> None:
        from monitor.tail.kernels.chance import key_of  # loads the compiler, hence not above
        from monitor.tail.laws.law import HAIR

        self._fit = fit
        self._options = options
        self._reach = fit.ks_distance * (1.0 - HAIR)
        self._replicate = law.replicate(fit, "model", key_of(options.seed, MODEL_KEY))
        self._resample = law.replicate(fit, "data", key_of(options.seed, DATA_KEY))

    def run(
        self,
        tally: Tally | None = None,
        *,
        progress: Progress | None = None,
        cancelled: Cancelled | None = None,
    ) -> Tally:
        """Replicates until p is decided or the budget is spent; raises Interrupted if cancelled.

        With stop_early the tally ends with the replicate that settled on which side of rule_out p lies (see
        stopping.first_decision). If that speaks for the power law, the tally still gets its DRAWN full refits,
        since intervals rest on them. progress is told (replicates so far, budget).
        """
        tally = Tally() if tally is None else tally
        with _pool(self._options.threads) as pool:
            while not self.finished(tally):
                if cancelled is not None and cancelled():
                    raise Interrupted
                tally = self._trimmed(self._extended(tally, pool))
                if progress is not None:
                    progress(tally.replicates, self._options.replicates)
        return tally

    def finished(self, tally: Tally) -> bool:
        """True when nothing is left to be done for this tally."""
        return tally.replicates >= self._end(tally)

    def decided(self, tally: Tally) -> bool:
        """True when p is known to lie on one side of rule_out."""
        return self._options.stop_early and first_decision(tally.far, self._options.rule_out) is not None

    def _end(self, tally: Tally) -> int:
        """Where the tally must end, by what is known from it."""
        budget = self._options.replicates
        if not self._options.stop_early:
            return budget
        decision = first_decision(tally.far, self._options.rule_out)
        if decision is None:
            return budget
        plausible = bool(tally.far[:decision].mean() > self._options.rule_out)
        return min(max(decision, DRAWN if plausible else 0), budget)

    def _extended(self, tally: Tally, pool: ThreadPoolExecutor | None) -> Tally:
        """One more chunk for each worker. Full refits and mere decisions are never mixed in one chunk."""
        begin = tally.replicates
        full = begin < DRAWN
        limit = min(DRAWN, self._options.replicates) if full else self._options.replicates
        size = max(1, min(100, _ROWS_A_CHUNK // self._rows()))
        # Growing with the tally, the chunks stay few enough that looking for a decision costs nothing.
        size = size if full else max(size, begin // 50)
        starts = range(begin, min(begin + size * self._options.threads, limit), size)
        chunks = _in_order(pool, self._replicate, [(s, min(size, limit - s), not full) for s in starts])
        far = np.concatenate([self._far(chunk, full) for chunk in chunks])
        if not full:
            return Tally(np.concatenate([tally.far, far]), tally.alpha, tally.xmin, tally.n_tail)
        return Tally(
            np.concatenate([tally.far, far]),
            np.concatenate([tally.alpha, *(chunk.alpha for chunk in chunks)]),
            np.concatenate([tally.xmin, *(chunk.xmin for chunk in chunks)]),
            np.concatenate([tally.n_tail, *(chunk.n_tail for chunk in chunks)]),
        )

    def _rows(self) -> int:
        return min(self._fit.n, 200_000)

    def _far(self, chunk: Chunk, full: bool) -> NDArray[np.bool_]:
        return chunk.distance >= self._reach if full else chunk.distance > 0.5

    def _trimmed(self, tally: Tally) -> Tally:
        """Cut off what a chunk drew beyond the replicate that decided."""
        end = self._end(tally)
        if end >= tally.replicates:
            return tally
        return Tally(tally.far[:end], tally.alpha[:end], tally.xmin[:end], tally.n_tail[:end])

    def answer(self, tally: Tally) -> GoodnessOfFit:
        """What the tally says about the power law."""
        far, m, rule_out = int(tally.far.sum()), tally.replicates, self._options.rule_out
        low, high = interval_at_any_stop(far, m)
        p = far / m
        stopped: Literal["budget", "decided"] = "decided" if self.decided(tally) else "budget"
        return GoodnessOfFit(
            p=p,
            p_interval=(low, high),
            replicates=m,
            at_least_as_far=far,
            stopped=stopped,
            rule_out=rule_out,
            plausible=p > rule_out,
            doubtful=low <= rule_out <= high,
        )

    def resampled(self, *, progress: Progress | None = None, cancelled: Cancelled | None = None) -> Draws:
        """Refits of the data drawn with replacement: intervals that assume no law (DRAWN of them)."""
        total = min(DRAWN, self._options.replicates)
        size = max(1, min(50, _ROWS_A_CHUNK // self._rows())) * self._options.threads
        done: list[Chunk] = []
        with _pool(self._options.threads) as pool:
            for begin in range(0, total, size):
                if cancelled is not None and cancelled():
                    raise Interrupted
                end = min(begin + size, total)
                step = -(-(end - begin) // self._options.threads)
                jobs = [(s, min(step, end - s), False) for s in range(begin, end, step)]
                done += _in_order(pool, self._resample, jobs)
                if progress is not None:
                    progress(end, total)
        alpha = np.concatenate([chunk.alpha for chunk in done])
        xmin = np.concatenate([chunk.xmin for chunk in done])
        n_tail = np.concatenate([chunk.n_tail for chunk in done])
        return _draws_of(alpha, xmin, n_tail, self._fit.n, "data")


def _draws_of(
    alpha: NDArray[np.float64],
    xmin: NDArray[np.float64],
    n_tail: NDArray[np.int64],
    n: int,
    source: Literal["model", "data"],
) -> Draws:
    """Draws without the replicates that had no tail at all."""
    usable = n_tail > 0
    return Draws(alpha=alpha[usable], xmin=xmin[usable], n_tail=n_tail[usable], n=n, source=source)


class _NoPool:
    def __enter__(self) -> None:
        return None

    def __exit__(self, *_: object) -> None:
        return None


def _pool(threads: int) -> ThreadPoolExecutor | _NoPool:
    return ThreadPoolExecutor(threads) if threads > 1 else _NoPool()


def _in_order(pool: ThreadPoolExecutor | None, replicate: Replicate, jobs: list[tuple[int, int, bool]]) -> list[Chunk]:
    """Run the jobs, side by side if there is a pool; results in the order of the jobs."""
    if pool is None:
        return [replicate(*job) for job in jobs]
    return list(pool.map(lambda job: replicate(*job), jobs))
