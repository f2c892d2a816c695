"""Counts of many cells at once: a number of events is split in two, and each half again, down to single cells.

A multinomial count is a tree of binomials, one a node (the share of the left half among both). The tree of one law is
made once and serves all its replicates. The nodes of a level do not wait for one another, as the conditional binomials
of one cell after another would, so that the processor works on several at a time.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from monitor.tail.kernels.arithmetic import exp_nonpositive
from monitor.tail.kernels.chance import MIDDLE, REJECTED_FROM, binomial, by_rejection, picked, uniform
from monitor.tail.kernels.compiling import inner, int64, kernel

NO_TREE: NDArray[np.float64] = np.zeros(0)


@kernel
def _fill(weights: Any, sums: Any, shares: Any) -> None:
    """Sums of all nodes (float64 (2 k,), leaves in the second half) and shares of the left halves (float64 (k,))."""
    k = shares.size
    for i in range(k):
        sums[k + i] = weights[i]
    for node in range(k - 1, 0, -1):
        both = sums[2 * node] + sums[2 * node + 1]
        sums[node] = both
        shares[node] = sums[2 * node] / both if both > 0.0 else 0.0
    shares[0] = 0.0


def tree_of(weights: NDArray[np.float64]) -> NDArray[np.float64]:
    """The tree that splits events among cells of these weights (float64 (k,), >= 0, any scale): float64 (k,).

    Node 1 holds all, node i splits into the nodes 2 i and 2 i + 1, entry i being the share of the former, and node
    k + i is cell i.
    """
    shares = np.empty(weights.size)
    _fill(weights, np.empty(2 * weights.size), shares)
    return shares


@kernel
def fill_geometric(rate: float, out: Any) -> None:
    """Chances of the first cells under a geometric law, exp(-rate i)(1 - exp(-rate)), and in the last that of all
    further ones: float64 (k,)."""
    here = 1.0
    for i in range(out.size - 1):
        beyond = exp_nonpositive(-rate * (i + 1))
        out[i] = here - beyond
        here = beyond
    out[out.size - 1] = here


@inner
def _foreseen(here: Any, shares: Any, noise: Any) -> None:
    """Left halves of a level's nodes wherever one uniform number settles them, -1 elsewhere; written over `noise`.

    The same as chance.by_rejection up to its first return, without a branch, so that it compiles to vector
    instructions.
    """
    for i in range(here.size):
        n = here[i]
        p = min(shares[i], 1.0 - shares[i])
        spread = np.sqrt(n * p * (1.0 - p))
        b = 1.15 + 2.53 * spread
        a = -0.0873 + 0.0248 * b + 0.01 * p
        u = noise[i] / (0.92 - 4.2 / b)
        away = u - 0.5 * MIDDLE
        k = np.floor((2.0 * a / (0.5 - abs(away)) + b) * away + (n * p + 0.5))
        k = k if shares[i] <= 0.5 else n - k
        noise[i] = k if (u <= MIDDLE) & (n * p >= REJECTED_FROM) else -noise[i]


@kernel
def split(state: Any, total: int, tree: Any, held: Any, noise: Any) -> None:
    """Split `total` events among the leaves of `tree` (see tree_of): held[tree.size + i] is the count of cell i.

    Parameters: held float64 (at least 2 tree.size,), noise float64 (at least tree.size,); both overwritten.
    """
    held[1] = total
    first = 1
    while first < tree.size:
        end = min(2 * first, tree.size)
        for i in range(end - first):
            noise[i] = uniform(state)
        _foreseen(held[first:end], tree[first:end], noise[: end - first])
        for node in range(first, end):
            here = held[node]
            left = noise[node - first]
            if left < 0.0:
                left = _unforeseen(state, here, tree[node], -left)
            held[2 * node] = left
            held[2 * node + 1] = here - left
        first = end


@inner
def _unforeseen(state: Any, n: float, p: float, v: float) -> Any:
    """The left half of a node that the uniform number v alone does not settle."""
    q = min(p, 1.0 - p)
    if n * q < REJECTED_FROM:
        return np.float64(binomial(state, int64(n), p))
    k = by_rejection(state, n, q, v)
    return k if p <= 0.5 else n - k


@kernel
def resampled(state: Any, draws: int, body: Any, held: Any, noise: Any, counts: Any) -> None:
    """Histogram `counts` of `draws` events drawn with replacement from the rows of `body` (see replicating.Body).

    Picks are made one by one where body.owner tells the row of each event, or that each row holds one; else the draws
    are split among the rows, at the cost of the rows and not of the draws. held and noise as in split.
    """
    counts[:] = 0
    if draws == 0:
        return
    if body.owner.size == 1:
        picked(state, draws, body.owner[:0], counts.size, counts)
    elif body.owner.size > 1:
        picked(state, draws, body.owner, body.owner.size, counts)
    else:
        split(state, draws, body.tree, held, noise)
        for i in range(counts.size):
            counts[i] = int64(held[body.tree.size + i])
