"""Every number of a stream counted by hand: RFC 3550 A.3 and RFC 4737 3.3, packet by packet."""


def account(extended, segment, duplicate):
    received = {}
    arrivals = list(zip(segment, extended, duplicate, strict=True))
    for number_space, number, copy in arrivals:
        if not copy:
            received.setdefault(number_space, set()).add(number)
    missing = []
    for number_space in sorted(received):
        numbers = received[number_space]
        for number in range(min(numbers), max(numbers) + 1):
            if number not in numbers:
                missing.append((number_space, number))
    reordered, highest = 0, None
    for number_space, number, copy in arrivals:
        if copy:
            continue
        if highest is not None and (number_space, number) < highest:
            reordered += 1
        else:
            highest = (number_space, number)
    distinct = sum(len(numbers) for numbers in received.values())
    return {
        "segments": len(received),
        "captured": len(arrivals),
        "received": distinct,
        "expected": distinct + len(missing),
        "lost": len(missing),
        "duplicated": len(arrivals) - distinct,
        "reordered": reordered,
        "runs": runs(missing),
    }


def runs(missing):
    """[(segment, first number, how many)] of consecutive missing numbers."""
    found = []
    for number_space, number in missing:
        if found and found[-1][0] == number_space and found[-1][1] + found[-1][2] == number:
            found[-1] = (number_space, found[-1][1], found[-1][2] + 1)
        else:
            found.append((number_space, number, 1))
    return found


def mask(extended, segment, duplicate):
    """One element per expected number, segment after segment."""
    received = {(s, e) for e, s, copy in zip(extended, segment, duplicate, strict=True) if not copy}
    found = []
    for number_space in sorted({s for s, _ in received}):
        numbers = [e for s, e in received if s == number_space]
        found += [(number_space, number) in received for number in range(min(numbers), max(numbers) + 1)]
    return found


def arrival_of(extended, segment, duplicate, number_space, number):
    """Index of the packet in order of arrival."""
    for i, (e, s, copy) in enumerate(zip(extended, segment, duplicate, strict=True)):
        if not copy and (s, e) == (number_space, number):
            return i
    raise LookupError(number)
