"""Statistics of builds: ranges that hold a share of all builds, and intervals of a yield."""

from __future__ import annotations

import math

import numpy as np

from synth.circuit.network import FloatArray

SHARE, CONFIDENCE = 0.99, 0.95


def discarded(count: int, share: float = SHARE, confidence: float = CONFIDENCE) -> int:
    """How many of the extreme values may lie outside a range that holds `share` of all builds with `confidence`.

    Distribution-free tolerance interval: with m values discarded, the coverage of the rest is Beta(n - m + 1, m),
    so P(coverage >= share) = P(Bin(n, 1 - share) >= m) (S. S. Wilks, Ann. Math. Statist. 12 (1941) 91; from memory).

    Returns:
        m >= 2 (smallest and largest are limits themselves), or 0 where the builds are too few.

    Example:
        >>> discarded(472), discarded(473)
        (0, 2)
    """
    log_pmf = count * math.log(share)  # of k = 0
    ratio = (1 - share) / share
    below, m = 0.0, 0
    while m < count:
        below += math.exp(log_pmf)
        if below > 1 - confidence:
            break
        log_pmf += math.log((count - m) / (m + 1) * ratio)
        m += 1
    return m if m >= 2 else 0


def tolerance_range(values: FloatArray) -> tuple[float, float] | None:
    """Limits that hold 99 % of all builds with 95 % confidence, equal numbers discarded at both ends.

    Args:
        values: one figure over builds, shape (builds,).

    Returns:
        None where there are fewer builds than it takes (473).
    """
    m = discarded(values.size)
    if m == 0:
        return None
    low_rank = m // 2  # discard what is below the low_rank-th smallest
    high_rank = values.size - (m - low_rank)
    part = np.partition(values, (low_rank - 1, high_rank))
    return float(part[low_rank - 1]), float(part[high_rank])


def yield_interval(passed: int, count: int, confidence: float = CONFIDENCE) -> tuple[float, float]:
    """Clopper-Pearson interval of a yield (C. J. Clopper, E. S. Pearson, Biometrika 26 (1934) 404; from memory).

    Example:
        >>> low, high = yield_interval(81, 263)  # R. G. Newcombe, Stat. Med. 17 (1998) 857
        >>> round(low, 4), round(high, 4)
        (0.2527, 0.3676)
    """
    from scipy.special import betaincinv  # heavy: only where builds are drawn

    tail = (1 - confidence) / 2
    low = 0.0 if passed == 0 else float(betaincinv(passed, count - passed + 1, tail))
    high = 1.0 if passed == count else float(betaincinv(passed + 1, count - passed, 1 - tail))
    return low, high
