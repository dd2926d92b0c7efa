"""Slow twins of the audio bench, written from the descriptions of the methods, sample by sample."""

import math


def active_level(samples, rate, received=None):
    """ITU-T P.56 method B: (active level, activity, long-term level) in dBov and %, with 15 counters of its own."""
    g = math.exp(-1.0 / (0.03 * rate))
    hangover = round(0.2 * rate)
    thresholds = [2.0 ** (k - 15) for k in range(15)]
    counts, idle = [0] * 15, [hangover] * 15
    p = q = energy = 0.0
    counted = known = missing = 0
    for place, sample in enumerate(samples):
        there = received is None or received[place]
        x = sample / 32768.0 if there else 0.0
        energy += x * x
        known += there
        missing = 0 if there else missing + 1
        if 0 < missing <= hangover:
            continue
        counted += 1
        # The envelope sees the sample whether it was received or not: a timeline holds silence where nothing came.
        p = g * p + (1.0 - g) * abs(sample / 32768.0)
        q = g * q + (1.0 - g) * p
        for k in range(15):
            idle[k] = 0 if q >= thresholds[k] else idle[k] + 1
            counts[k] += idle[k] <= hangover
    if counted == 0 or energy == 0.0:
        return math.nan, (0.0 if counted else math.nan), -127.0 if known else math.nan
    long_term = 10.0 * math.log10(energy / known)
    rows = [(10.0 * math.log10(energy / n), 20.0 * math.log10(c)) for n, c in zip(counts, thresholds, strict=True) if n]
    if not rows or rows[0][0] - rows[0][1] < 15.9:
        return math.nan, 0.0, long_term
    for k in range(1, len(rows)):
        if rows[k][0] - rows[k][1] <= 15.9:
            active = between(rows[k - 1], rows[k])
            return active, 100.0 * energy / counted / 10.0 ** (active / 10.0), long_term
    return math.nan, 0.0, long_term


def between(below, above):
    """Level at which level minus threshold is 15.9 dB within 0.5 dB, by halving."""
    for level, threshold in (above, below):
        if abs(level - threshold - 15.9) < 0.5:
            return level
    while True:
        level, threshold = (below[0] + above[0]) / 2, (below[1] + above[1]) / 2
        if abs(level - threshold - 15.9) <= 0.5:
            return level
        if level - threshold > 15.9:
            below = (level, threshold)
        else:
            above = (level, threshold)


def clipped(samples, low, high):
    """(samples in runs of two or more at one extreme, such runs, longest run)."""
    runs, run, before = [], 0, 0
    for sample in [*samples, 0]:
        side = 1 if sample >= high else -1 if sample <= low else 0
        if side and side == before:
            run += 1
        else:
            runs.append(run)
            run = 1 if side else 0
        before = side
    long = [one for one in runs if one >= 2]
    return sum(long), len(long), max(runs, default=0)
