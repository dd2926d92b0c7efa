"""Jitter and delay variation packet by packet: RFC 3550 A.8 with exact fractions, RFC 5481 4.2."""

from fractions import Fraction

NS_PER_MS = 1_000_000


def jitter_ms(time_ns, ticks, segment, rate):
    """Estimator after each packet. No difference is taken between segments or clock rates."""
    estimates, jitter, before = [], Fraction(0), None
    for now in range(len(time_ns)):
        late = before is not None and segment[now] < segment[before]
        alike = before is not None and segment[now] == segment[before] and rate[now] == rate[before]
        if alike:
            arrival = Fraction(time_ns[now] - time_ns[before], NS_PER_MS)
            media = Fraction((ticks[now] - ticks[before]) * 1000, rate[now])
            # Rounded after each packet, or the fractions grow without bound.
            jitter = Fraction(float(jitter + (abs(arrival - media) - jitter) / 16))
        if not late:
            before = now
        estimates.append(float(jitter))
    return estimates


def delay_variation_ms(time_ns, ticks, segment, rate):
    """Delay against the smallest delay of the packets with the same segment and clock rate."""
    delays = [Fraction(t, NS_PER_MS) - Fraction(m * 1000, hz) for t, m, hz in zip(time_ns, ticks, rate, strict=True)]
    smallest = {}
    for line, delay in zip(zip(segment, rate, strict=True), delays, strict=True):
        smallest[line] = min(smallest.get(line, delay), delay)
    return [float(d - smallest[line]) for line, d in zip(zip(segment, rate, strict=True), delays, strict=True)]


def percentile(values, share):
    """Linear interpolation between the closest ranks."""
    ranked = sorted(values)
    rank = share / 100 * (len(ranked) - 1)
    below = int(rank)
    if below + 1 == len(ranked):
        return ranked[below]
    return ranked[below] + (ranked[below + 1] - ranked[below]) * (rank - below)


def line_under_all(at, level, weight, mean_at):
    """Slope of the line through two points, under all others, with the least sum of distances to all packets."""
    best = None
    n = len(at)
    for i in range(n):
        for j in range(n):
            if at[j] <= at[i]:
                continue
            slope = (level[j] - level[i]) / (at[j] - at[i])
            start = level[i] - slope * at[i]
            if any(level[k] < start + slope * at[k] - 1e-9 for k in range(n)):
                continue
            distance = sum(w * (-start - slope * x) for w, x in zip(weight, mean_at, strict=True))
            if best is None or distance < best[0]:
                best = (distance, slope)
    return best[1]
