"""The playout buffer packet by packet: plain loops over integers of nanoseconds, one packet after the other."""

import math

MS = 1_000_000


def talkspurts(sequence, segment, ticks, packet_ticks, pause_ticks, audio):
    """Numbers by walking along the sequence; a loss counts as media that was there."""
    order = sorted(range(len(sequence)), key=lambda i: (segment[i], sequence[i]))
    spurt, number, last, others = {}, 0, None, 0
    for i in order:
        if not audio[i]:
            others += 1
            continue
        if last is not None:
            lost = max(sequence[i] - sequence[last] - 1 - others, 0)
            silent = ticks[i] - ticks[last] - packet_ticks[last] * (1 + lost)
            if segment[i] != segment[last] or abs(silent) >= pause_ticks:
                number += 1
        spurt[i], last, others = number, i, 0
    return [spurt[i] for i in range(len(sequence)) if audio[i]]


def transits(time_ns, ticks, clock_hz):
    return [
        t - time_ns[0] - round((m - ticks[0]) * 1_000_000_000 / clock_hz) for t, m in zip(time_ns, ticks, strict=True)
    ]


def fixed(transit, spurt, nominal):
    """Each talkspurt waits for ``nominal`` after the packet that arrives first."""
    offset = {}
    for now, which in zip(transit, spurt, strict=True):
        offset.setdefault(which, now + nominal)
    return offset


def ideal(transit, spurt):
    return {
        which: max(now for now, other in zip(transit, spurt, strict=True) if other == which) for which in set(spurt)
    }


def ramjee(transit, spurt, nominal, minimum, maximum):
    """Algorithm 4: estimates in every packet, used at the first packet of a talkspurt."""
    offset, mode = {}, "normal"
    d, v, var = transit[0], nominal / 4, 0
    n1 = n2 = transit[0]
    for i, (n, which) in enumerate(zip(transit, spurt, strict=True)):
        update = i > 0
        if mode == "normal":
            if abs(n - n1) > 2 * v + 100 * MS:
                mode, var = "impulse", 0
        else:
            var = var / 2 + abs(2 * n - n1 - n2) / 8
            if var <= 63 * 0.125 * MS:
                mode, update = "normal", False
        if update:
            d = 0.125 * n + 0.875 * d if mode == "normal" else d + n - n1
            v = 0.125 * abs(n - d) + 0.875 * v
        n2, n1 = n1, n
        if which not in offset:
            least = min(transit[: i + 1])
            offset[which] = least + min(max(round(d + 4 * v) - least, minimum), maximum)
    return offset


def moon(transit, spurt, nominal, minimum, maximum, share):
    """Percentile of the last 10,000 delays outside spikes, on a raster of 1 ms that hangs on the first transit."""
    offset, spike, history = {}, False, []
    current = old = nominal
    for i, (n, which) in enumerate(zip(transit, spurt, strict=True)):
        least = min(transit[: i + 1])
        if spike:
            if n - least <= 2 * old:
                spike = False
        elif n - least > 4 * current:
            spike, old = True, current
        if not spike:
            history = [*history, n][-10_000:]
        if which not in offset:
            if i == 0:
                wanted = nominal
            elif spike:
                wanted = n - least
            else:
                rank = math.ceil(share * len(history))
                kth = sorted(history)[rank - 1]
                wanted = transit[0] + ((kth - transit[0]) // MS + 1) * MS - least
            current = min(max(wanted, minimum), maximum)
            offset[which] = least + current
    return offset


def burst_ratio(received):
    """Mean run of lost packets over 1 / (1 - p), counted along the sequence."""
    runs, inside = 0, False
    for one in received:
        runs += not one and not inside
        inside = not one
    lost = len(received) - sum(received)
    return lost / runs * (1 - lost / len(received)) if runs and lost < len(received) else math.nan
