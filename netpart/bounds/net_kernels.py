"""Kernel of the tightened nets: what each net costs in vectors, and how its weight is best spread over its pairs."""

from __future__ import annotations

from numba import njit

__all__ = ["evaluate_nets"]


@njit(cache=True, nogil=True)
def evaluate_nets(offsets, cells, share_offsets, pair_costs, whole_costs, vectors, power, gradient, shares):
    """Σ_e (mean over parts T of q_T^power)^(1/power) over the nets that have shares; half its gradient is added.

    The parts of a net are its pairs in the order (0, 1), (0, 2) …, then, for three cells or more, the net as a whole;
    q_T is the part's weight times the sum of |v_i − v_j|² over its pairs. ``shares`` receives the derivative of each
    net's mean by q_T.
    """
    rank = vectors.shape[1]
    total = 0.0
    for e in range(len(offsets) - 1):
        first = offsets[e]
        size = offsets[e + 1] - first
        base = share_offsets[e]
        num = share_offsets[e + 1] - base
        if num == 0:
            continue
        num_pairs = size * (size - 1) // 2
        largest = 0.0
        whole = 0.0
        part = base
        for i in range(size):
            u = cells[first + i]
            for j in range(i + 1, size):
                v = cells[first + j]
                square = 0.0
                for t in range(rank):
                    difference = vectors[u, t] - vectors[v, t]
                    square += difference * difference
                whole += square
                shares[part] = pair_costs[e] * square
                largest = max(largest, shares[part])
                part += 1
        if num > num_pairs:
            shares[part] = whole_costs[e] * whole
            largest = max(largest, shares[part])
        if largest < 1e-30:
            shares[base : base + num] = 1.0 / num
        else:
            mean = 0.0
            for part in range(base, base + num):
                mean += (shares[part] / largest) ** power
            norm = (mean / num) ** (1.0 / power) * largest
            total += norm
            for part in range(base, base + num):
                shares[part] = (shares[part] / norm) ** (power - 1.0) / num
        spread = shares[base + num - 1] * whole_costs[e] if num > num_pairs else 0.0
        part = base
        for i in range(size):
            u = cells[first + i]
            for j in range(i + 1, size):
                v = cells[first + j]
                factor = shares[part] * pair_costs[e] + spread
                for t in range(rank):
                    pull = factor * (vectors[u, t] - vectors[v, t])
                    gradient[u, t] += pull
                    gradient[v, t] -= pull
                part += 1
    return total
