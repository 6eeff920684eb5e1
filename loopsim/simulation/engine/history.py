# Restricted Python: the history of watched signals, and what comes out of dead times. See DEVELOPERS.md, "The generated text".
# A piece is [start, length, samples at 0, 1/4, 1/2, 3/4, 1]; piece 0 stands for all time before the start.


def quartic(h, base, w, share):
    u = 4.0 * share
    at = base + 2 + w
    s0 = h[at]
    s1 = h[at + NW]
    s2 = h[at + 2 * NW]
    s3 = h[at + 3 * NW]
    s4 = h[at + 4 * NW]
    d2 = s2 - 2.0 * s1 + s0
    d3 = s3 - 3.0 * s2 + 3.0 * s1 - s0
    d4 = s4 - 4.0 * s3 + 6.0 * s2 - 4.0 * s1 + s0
    return s0 + u * ((s1 - s0) + 0.5 * (u - 1.0) * (d2 + (u - 2.0) / 3.0 * (d3 + 0.25 * (u - 3.0) * d4)))


def delayed(k, w, s, side, h, n):
    # at a tie between two pieces `side` decides: +1 the later one, -1 the earlier one
    last = n[0] - 1 + n[2]
    i = n[8 + k]
    if i > last:
        i = last
    tie = 1e-10 * (1.0 + abs(s))
    moving = 1
    while moving == 1 and i < last:
        end = h[i * STRIDE] + h[i * STRIDE + 1]
        if s > end + tie or (s > end - tie and side >= 0):
            i += 1
        else:
            moving = 0
    moving = 1
    while moving == 1 and i > 0:
        start = h[i * STRIDE]
        if s < start - tie or (s < start + tie and side < 0):
            i -= 1
        else:
            moving = 0
    n[8 + k] = i
    base = i * STRIDE
    length = h[base + 1]
    if length <= 0.0:
        if i == last and i > 0:
            n[3] = 1
        return h[base + 2 + w]
    if s > h[base] + length + tie and i == last:
        n[3] = 1
        return h[base + 2 + 4 * NW + w]
    share = (s - h[base]) / length
    if share < 0.0:
        share = 0.0
    if share > 1.0:
        share = 1.0
    return quartic(h, base, w, share)


def transported(k, w, v, target, side, h, n):
    # the signal w at the time when the swept volume v equalled the target
    last = n[0] - 1 + n[2]
    i = n[8 + k]
    if i > last:
        i = last
    tie = 1e-11 * abs(target) + 1e-300
    moving = 1
    while moving == 1 and i < last:
        end = h[i * STRIDE + 2 + 4 * NW + v]
        if target > end + tie or (target > end - tie and side >= 0):
            i += 1
        else:
            moving = 0
    moving = 1
    while moving == 1 and i > 0:
        start = h[i * STRIDE + 2 + v]
        if target < start - tie or (target < start + tie and side < 0):
            i -= 1
        else:
            moving = 0
    n[8 + k] = i
    base = i * STRIDE
    if i == 0:
        return h[base + 2 + w]
    low = h[base + 2 + v]
    high = h[base + 2 + 4 * NW + v]
    if target > high + tie and i == last:
        n[3] = 1
        return h[base + 2 + 4 * NW + w]
    if high <= low:
        return h[base + 2 + w]
    return quartic(h, base, w, crossing(h, base, v, target))


def crossing(h, base, v, target):
    # Newton with bisection for the share of the piece at which the swept volume is the target
    low = 0.0
    high = 1.0
    first = h[base + 2 + v]
    swept = h[base + 2 + 4 * NW + v] - first
    share = (target - first) / swept
    if share < 0.0:
        return 0.0
    if share > 1.0:
        return 1.0
    count = 0
    while count < 60:
        count += 1
        gap = quartic(h, base, v, share) - target
        if abs(gap) <= 1e-13 * swept + 1e-16 * abs(target):
            return share
        if gap > 0.0:
            high = share
        else:
            low = share
        near = share + 1e-4 if share < 0.5 else share - 1e-4
        slope = (quartic(h, base, v, near) - target - gap) / (near - share)
        trial = share - gap / slope if slope > 0.0 else 0.5 * (low + high)
        if not (trial > low and trial < high):
            trial = 0.5 * (low + high)
        if abs(trial - share) <= 1e-14:
            return trial
        share = trial
    return share


def draw(k, every, t, side, n, z):
    # standard normal number of source k: draw floor(t/every); just before a new draw (side -1) the old one stands
    index = int(t / every + (-1e-9 if side < 0 else 1e-9))
    count = n[8 + ND + NZ + k]
    if index >= count:
        index = count - 1
    return z[n[8 + ND + k] + index]
