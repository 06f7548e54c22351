"""Kernels of the sparse factorisation: how much it will fill in, and how far its factors are from the matrix."""

from __future__ import annotations

import numpy as np
from numba import njit

_SMALL = 10_000
_CHUNK = 200_000

__all__ = ["count_fill", "find_supernodes", "measure_residual"]


@njit(cache=True, nogil=True)
def count_fill(offsets, rows, order, place):
    """(n,) entries of each column of the Cholesky factor, the diagonal included.

    ``order[i]`` is the vertex eliminated i-th, ``place`` its inverse; the pattern is symmetric. Elimination tree by path
    compression, then one walk up the tree for each entry (J. W. H. Liu, "The role of elimination trees in sparse
    factorization", SIAM J. Matrix Analysis and Applications 11, 1990). O(entries of the factor).
    """
    n = len(order)
    parent = np.full(n, -1, np.int64)
    ancestor = np.full(n, -1, np.int64)
    for i in range(n):
        v = order[i]
        for q in range(offsets[v], offsets[v + 1]):
            j = place[rows[q]]
            while j != -1 and j < i:
                above = ancestor[j]
                ancestor[j] = i
                if above == -1:
                    parent[j] = i
                j = above
    counts = np.ones(n, np.int64)
    seen = np.full(n, -1, np.int64)
    for i in range(n):
        seen[i] = i
        v = order[i]
        for q in range(offsets[v], offsets[v + 1]):
            j = place[rows[q]]
            if j < i:
                while seen[j] != i:
                    seen[j] = i
                    counts[j] += 1
                    j = parent[j]
    return counts


@njit(cache=True, nogil=True)
def find_supernodes(offsets, rows, widest):
    """Starts of the runs of columns that share their rows below the run; n stands at the end."""
    n = len(offsets) - 1
    starts = np.empty(n + 1, np.int64)
    count = 0
    for j in range(n):
        first, last = offsets[j - 1], offsets[j]
        joins = (
            j > 0
            and j - starts[count - 1] < widest
            and last - first >= 2
            and rows[first + 1] == j
            and last - first == offsets[j + 1] - last + 1
        )
        if joins:
            for q in range(last - first - 1):
                if rows[first + 1 + q] != rows[last + q]:
                    joins = False
        if not joins:
            starts[count] = j
            count += 1
    starts[count] = n
    return starts[: count + 1].copy()


@njit(cache=True, nogil=True)
def measure_residual(offsets, rows, lower, pivots, starts, matrix_offsets, matrix_rows, matrix, sums):
    """Add to ``sums`` (n,) the row sums of |F − L D Lᵀ| as computed in floating point; False if a pattern is not closed.

    L is unit lower triangular by columns with rows ascending, its diagonal stored; F is symmetric by columns. Entry (i, j)
    with i ≥ j is Σ_k (d_k l_jk) l_ik over the columns k ≤ j that reach row j, minus f_ij, in any order of summation.
    Supernode by supernode (``starts``) as in a left-looking factorisation: each waits in the list of the supernode that it
    reaches next, and adds a dense product to the panel there. O(multiplications of the factorisation).
    """
    n = len(pivots)
    num = len(starts) - 1
    owner = np.empty(n, np.int64)
    block_offsets = np.zeros(num + 1, np.int64)
    for s in range(num):
        owner[starts[s] : starts[s + 1]] = s
        size = offsets[starts[s] + 1] - offsets[starts[s]]
        block_offsets[s + 1] = block_offsets[s] + size * (starts[s + 1] - starts[s])
    blocks = np.zeros(block_offsets[num])
    for s in range(num):
        width = starts[s + 1] - starts[s]
        for t in range(width):
            j = starts[s] + t
            for q in range(offsets[j + 1] - offsets[j]):
                blocks[block_offsets[s] + (t + q) * width + t] = lower[offsets[j] + q]
    position = np.zeros(num, np.int64)
    head = np.full(num, -1, np.int64)
    link = np.full(num, -1, np.int64)
    relative = np.zeros(n, np.int64)
    stamp = np.full(n, -1, np.int64)
    for s in range(num):
        low, high = starts[s], starts[s + 1]
        width = high - low
        mine = rows[offsets[low] : offsets[low + 1]]
        panel = np.zeros((len(mine), width))
        for q in range(len(mine)):
            relative[mine[q]] = q
            stamp[mine[q]] = s
        # The supernode itself takes part first, from its own diagonal on.
        link[s] = head[s]
        head[s] = s
        k = head[s]
        while k != -1:
            following = link[k]
            own = starts[k + 1] - starts[k]
            theirs = rows[offsets[starts[k]] : offsets[starts[k] + 1]]
            block = blocks[block_offsets[k] : block_offsets[k + 1]].reshape(len(theirs), own)
            weights = pivots[starts[k] : starts[k + 1]]
            begin = position[k]
            end = begin
            while end < len(theirs) and theirs[end] < high:
                end += 1
            for q in range(begin, len(theirs)):
                if stamp[theirs[q]] != s:
                    return False
            if (len(theirs) - begin) * (end - begin) * own < _SMALL:
                for t in range(begin, end):
                    column = theirs[t] - low
                    for c in range(own):
                        factor = weights[c] * block[t, c]
                        entry = offsets[starts[k] + c] - c
                        for q in range(max(t, c), len(theirs)):
                            panel[relative[theirs[q]], column] += factor * lower[entry + q]
            else:
                # Chunks small enough that no BLAS starts threads for them: the starts of a run have threads of their own.
                chunk = max(1, _CHUNK // ((end - begin) * own))
                columns = block[begin:end].T
                for first in range(begin, len(theirs), chunk):
                    last = min(first + chunk, len(theirs))
                    product = np.dot(block[first:last] * weights, columns)
                    for q in range(first, last):
                        row = relative[theirs[q]]
                        for t in range(begin, end):
                            panel[row, theirs[t] - low] += product[q - first, t - begin]
            position[k] = end
            if end < len(theirs):
                target = owner[theirs[end]]
                link[k] = head[target]
                head[target] = k
            k = following
        for t in range(width):
            j = low + t
            for q in range(matrix_offsets[j], matrix_offsets[j + 1]):
                i = matrix_rows[q]
                if i >= j:
                    if stamp[i] != s:
                        return False
                    panel[relative[i], t] -= matrix[q]
            sums[j] += abs(panel[t, t])
            for q in range(t + 1, len(mine)):
                size = abs(panel[q, t])
                sums[mine[q]] += size
                sums[j] += size
    return True
