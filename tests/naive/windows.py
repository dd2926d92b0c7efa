"""Windows of two seconds, filled packet by packet."""

WINDOW_NS = 2_000_000_000


def window_of(time_ns, started_ns, count):
    return min(max((time_ns - started_ns) // WINDOW_NS, 0), count - 1)


def received_per_window(time_ns, duplicate, started_ns, count):
    found = [0] * count
    for time, copy in zip(time_ns, duplicate, strict=True):
        if not copy:
            found[window_of(time, started_ns, count)] += 1
    return found


def missing_per_window(at_ns, packets, spacing_ns, started_ns, count):
    found = [0] * count
    for at, many, spacing in zip(at_ns, packets, spacing_ns, strict=True):
        for j in range(1, many + 1):
            found[window_of(at + j * spacing, started_ns, count)] += 1
    return found


def values_per_window(values, time_ns, started_ns, count):
    found = [[] for _ in range(count)]
    for value, time in zip(values, time_ns, strict=True):
        found[window_of(time, started_ns, count)].append(value)
    return found
