"""Bursts and gaps straight from the definition in RFC 3611 4.7.2, and the burst ratio of ITU-T G.107 7.5."""


def in_burst(received, gmin):
    """Whether each packet lies in a burst: between two lost ones that no ``gmin`` received packets in a row part."""
    n = len(received)
    inside = [False] * n
    for start in range(n):
        if received[start]:
            continue
        good = 0
        for end in range(start + 1, n):
            good = good + 1 if received[end] else 0
            if good >= gmin:
                break
            if not received[end]:
                for k in range(start, end + 1):
                    inside[k] = True
    return inside


def periods(flags, wanted):
    """Lengths of the runs of one value."""
    lengths, before = [], None
    for flag in flags:
        if flag == wanted:
            if before == wanted:
                lengths[-1] += 1
            else:
                lengths.append(1)
        before = flag
    return lengths


def bursts_and_gaps(received, packet_ms, gmin):
    inside = in_burst(received, gmin)
    figures = []
    for wanted in (True, False):
        lengths = periods(inside, wanted)
        packets = sum(lengths)
        lost = sum(1 for good, flag in zip(received, inside, strict=True) if flag == wanted and not good)
        figures.append(100.0 * lost / packets if packets else 0.0)
        figures.append(packet_ms * packets / len(lengths) if lengths else 0.0)
    return figures


def burst_ratio(received):
    lengths = periods(received, False)
    if not lengths or not any(received):
        return None
    share = sum(lengths) / len(received)
    return (sum(lengths) / len(lengths)) / (1.0 / (1.0 - share))
