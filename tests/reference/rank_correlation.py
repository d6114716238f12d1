"""Rank correlation and its significance from the definitions: slow, short, obviously right.

Plain Python on lists; None of it knows the program under test.
"""

from __future__ import annotations

import math
from itertools import permutations


def midranks(values):
    """1 + number below + half the number of others that are equal."""
    return [1 + sum(b < a for b in values) + (sum(b == a for b in values) - 1) / 2 for a in values]


def pearson(a, b):
    """Product-moment correlation; NaN when a side is constant."""
    n = len(a)
    if n == 0 or len(set(a)) == 1 or len(set(b)) == 1:
        return math.nan
    mean_a, mean_b = math.fsum(a) / n, math.fsum(b) / n
    top = math.fsum((p - mean_a) * (q - mean_b) for p, q in zip(a, b, strict=True))
    return top / math.sqrt(math.fsum((p - mean_a) ** 2 for p in a) * math.fsum((q - mean_b) ** 2 for q in b))


def spearman(a, b):
    """Correlation of the midranks."""
    return pearson(midranks(a), midranks(b))


def sign(value):
    return (value > 0) - (value < 0)


def kendall(a, b):
    """tau-b: concordant minus discordant pairs over the geometric mean of the pairs untied in each."""
    n = len(a)
    both = [(i, j) for i in range(n) for j in range(i)]
    score = sum(sign(a[i] - a[j]) * sign(b[i] - b[j]) for i, j in both)
    untied_a = sum(a[i] != a[j] for i, j in both)
    untied_b = sum(b[i] != b[j] for i, j in both)
    return score / math.sqrt(untied_a * untied_b) if untied_a and untied_b else math.nan


def pairs_at(x, y, end, window, lag):
    """The complete pairs of the window that ends at row ``end``: a pair belongs to its later row."""
    first, second = [], []
    for t in range(end - window + 1, end + 1):
        i, j = (t - lag, t) if lag >= 0 else (t, t + lag)
        if min(i, j) >= 0 and x[i] == x[i] and y[j] == y[j]:
            first.append(float(x[i]))
            second.append(float(y[j]))
    return first, second


def rolling(x, y, window, step, lags, method, min_pairs):
    """(statistic, n_pairs) by window and lag."""
    measure = {"spearman": spearman, "kendall": kendall}[method]
    table = []
    for end in range(window - 1, len(x), step):
        row = []
        for lag in lags:
            first, second = pairs_at(x, y, end, window, lag)
            row.append((measure(first, second) if len(first) >= min_pairs else math.nan, len(first)))
        table.append(row)
    return table


def standardised(values, present):
    """Midranks over the present rows with mean 0 and variance 1; 0 elsewhere."""
    kept = [value for value, here in zip(values, present, strict=True) if here]
    ranks = midranks(kept)
    mean = sum(ranks) / len(ranks)
    spread = math.sqrt(math.fsum((r - mean) ** 2 for r in ranks) / len(ranks))
    scores = iter([(r - mean) / spread for r in ranks])
    return [next(scores) if here else 0.0 for here in present]


def effective_pairs(x, y):
    """N over 1 + 2 Σ (c_k/N) r_xx(k) r_yy(k), k up to a fifth of the rows; between 3 and N."""
    n = len(x)
    present = [a == a and b == b for a, b in zip(x, y, strict=True)]
    u, v = standardised(x, present), standardised(y, present)
    n_pairs = sum(present)
    total = 1.0
    for k in range(1, n // 5 + 1):
        count = sum(present[t] and present[t + k] for t in range(n - k))
        if count:
            r_xx = math.fsum(u[t] * u[t + k] for t in range(n - k)) / count
            r_yy = math.fsum(v[t] * v[t + k] for t in range(n - k)) / count
            total += 2 * count / n_pairs * r_xx * r_yy
    return min(n_pairs, max(3.0, n_pairs / max(0.2, total)))


def influence_by_difference(a, b, weight=1e-6):
    """Influence of each pair on Spearman's rho: the slope of the weighted rho in the weight of that pair.

    Weighted midrank of a value: weight of those below plus half the weight of the equal ones.
    """
    n = len(a)

    def weighted_rho(weights):
        def ranks(values):
            return [
                sum(w * ((q < p) + 0.5 * (q == p)) for q, w in zip(values, weights, strict=True))
                for p in values
            ]

        r, s = ranks(a), ranks(b)
        mean_r = math.fsum(w * p for w, p in zip(weights, r, strict=True))
        mean_s = math.fsum(w * p for w, p in zip(weights, s, strict=True))
        top = math.fsum(w * (p - mean_r) * (q - mean_s) for w, p, q in zip(weights, r, s, strict=True))
        square_r = math.fsum(w * (p - mean_r) ** 2 for w, p in zip(weights, r, strict=True))
        square_s = math.fsum(w * (q - mean_s) ** 2 for w, q in zip(weights, s, strict=True))
        return top / math.sqrt(square_r * square_s)

    def mixed(i, share):
        return [(1 - share) / n + (share if j == i else 0.0) for j in range(n)]

    return [
        (weighted_rho(mixed(i, weight)) - weighted_rho(mixed(i, -weight))) / (2 * weight) for i in range(n)
    ]


def exact_p_value(a, b, measure):
    """Share of all orders of b whose |statistic| is at least as large (with a hair's breadth for rounding)."""
    seen = abs(measure(a, b))
    orders = list(permutations(b))
    return sum(abs(measure(a, list(order))) >= seen - 1e-9 for order in orders) / len(orders)


def partial_of_three(xy, xz, yz):
    """Partial correlation of x and y given one z from the three pairwise correlations."""
    return (xy - xz * yz) / math.sqrt((1 - xz**2) * (1 - yz**2))


def adjusted(p_values, yekutieli=False):
    """Benjamini-Hochberg (or Yekutieli): the smallest level at which each would be called."""
    n = len(p_values)
    price = sum(1 / k for k in range(1, n + 1)) if yekutieli else 1.0
    result = []
    for p in p_values:
        larger = [q for q in p_values if q >= p]
        result.append(min(1.0, *(q * n * price / sum(other <= q for other in p_values) for q in larger)))
    return result


def cycle_removed(scores, slots, rows, fewest):
    """Each score less the mean of the earlier scores of its slot at most ``rows`` back."""
    result = []
    for t, score in enumerate(scores):
        past = [
            scores[s] for s in range(max(0, t - rows), t) if slots[s] == slots[t] and scores[s] == scores[s]
        ]
        result.append(score - sum(past) / len(past) if len(past) >= fewest else math.nan)
    return result


def trailing_share(values, rows, fewest):
    """(number below + half the equal) / number in the last ``rows`` rows, the row itself included."""
    result = []
    for t, here in enumerate(values):
        past = [value for value in values[max(0, t - rows + 1) : t + 1] if value == value]
        enough = here == here and len(past) >= fewest
        result.append(sum((p < here) + 0.5 * (p == here) for p in past) / len(past) if enough else math.nan)
    return result


def rotated_rank_interval(x, y, t_quantile):
    """95 % interval of Spearman's rho, step by step from its definition; ``t_quantile(p, df)`` is Student's.

    p = (u + v)/√(2(1 + rho)), q = (u - v)/√(2(1 - rho)) of the standardised midranks u, v over the joint rows;
    P, Q their autocorrelations, X, Y their cross-correlations each way, weights c_k/N, lags up to n/8.
    """
    n = len(x)
    present = [a == a and b == b for a, b in zip(x, y, strict=True)]
    u, v = standardised(x, present), standardised(y, present)
    n_pairs = sum(present)
    rho = math.fsum(a * b for a, b in zip(u, v, strict=True)) / n_pairs
    p = [(a + b) / math.sqrt(2 * (1 + rho)) for a, b in zip(u, v, strict=True)]
    q = [(a - b) / math.sqrt(2 * (1 - rho)) for a, b in zip(u, v, strict=True)]

    def joint_count(k):
        return sum(present[t] and present[t + k] for t in range(n - k))

    def lagged(a, b, k):
        return math.fsum(a[t] * b[t + k] for t in range(n - k)) / max(joint_count(k), 1)

    lags = range(1, n // 8 + 1)
    w = [max(joint_count(k), 1) / n_pairs for k in lags]
    P, Q = [lagged(p, p, k) for k in lags], [lagged(q, q, k) for k in lags]
    X, Y = [lagged(p, q, k) for k in lags], [lagged(q, p, k) for k in lags]

    def weighted(values):
        return math.fsum(weight * value for weight, value in zip(w, values, strict=True))

    f = 1 - (1 + 2 * sum(w)) / n_pairs
    d_p, d_q = (max(1 + 2 * weighted(acf), 0) / n_pairs for acf in (P, Q))
    a_p, a_q = d_p / (f + d_p), d_q / (f + d_q)
    delta = weighted([a + b for a, b in zip(X, Y, strict=True)]) / (n_pairs * f)
    s = math.sqrt((1 - a_p) * (1 - a_q))
    v0 = 0.5 * (1 + 2 * weighted([(r * (1 - a_p) + a_p) ** 2 for r in P]))
    v0 += 0.5 * (1 + 2 * weighted([(r * (1 - a_q) + a_q) ** 2 for r in Q]))
    v0 -= weighted([(a * s + delta) ** 2 + (b * s + delta) ** 2 for a, b in zip(X, Y, strict=True)])
    kept = [t for t in range(n) if present[t]]
    slopes = influence_by_difference([x[t] for t in kept], [y[t] for t in kept])
    mean = math.fsum(slopes) / n_pairs
    psi_square = math.fsum((slope - mean) ** 2 for slope in slopes) / n_pairs
    kappa = max(1 + 0.28 * rho**2 + 0.15 * rho**4, psi_square / (1 - rho**2) ** 2)
    inflation = max(
        0.2,
        1
        + 2
        * math.fsum(
            joint_count(k) / n_pairs * lagged(u, u, k) * lagged(v, v, k) for k in range(1, n // 5 + 1)
        ),
    )
    variance = max(kappa * max(v0, 0.5), (1 - rho**2) * inflation)
    freedom = max(n_pairs / variance - 2, 3.2) - 2
    t = t_quantile(0.975, freedom)
    half = math.atanh(t / math.sqrt(freedom + t * t))
    own_p, own_q = 1 + 2 * weighted([r * r for r in P]), 1 + 2 * weighted([r * r for r in Q])
    centre = math.atanh(rho) + abs(rho) * 0.5 * (a_p - a_q + (own_p - own_q) / n_pairs)
    slow = [2 * weighted([lagged(side, side, k) ** 2 for k in lags]) / n_pairs for side in (u, v)]
    outer = half * (1 + 12 * abs(slow[0] - slow[1]) * math.sqrt(abs(rho)))
    below, above = (half, outer) if rho >= 0 else (outer, half)
    return math.tanh(centre - below), math.tanh(centre + above)
