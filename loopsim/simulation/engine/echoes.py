# Restricted Python: what jumps into a dead time comes out of it again, and a step ends there.


def echo_share(t, step, x, m, p, b, h, n, z, f, c, pending, waiting):
    # the share of the step at which the first pending echo comes out, 2.0 when none does
    y = f[7]
    clocks(t + step, -1, f[8], m, p, b, h, n, z, c)
    found = 2.0
    for k in range(ND):
        if waiting[k] > 0:
            target = pending[k * ECHOES]
            # a clock that gets there exactly with the step is handled at the boundary, not here
            if c[k] > target + 1e-9 * abs(target - c[k]) + 1e-11 * (1.0 + abs(target)):
                low = 0.0
                high = 1.0 if found > 1.0 else found
                count = 0
                while count < 70 and high - low > 1e-15:
                    count += 1
                    share = 0.5 * (low + high)
                    dense(share, step, x, f, y)
                    clocks(t + share * step, 0, y, m, p, b, h, n, z, c)
                    if c[k] >= target:
                        high = share
                    else:
                        low = share
                if high < found:
                    found = high
                clocks(t + step, -1, f[8], m, p, b, h, n, z, c)
    return found


def note_echoes(t, event, x, m, p, b, h, n, z, f, pending, waiting):
    # what jumps into a dead time now will come out of it: the place on its clock is kept
    w = f[10]
    watched(t, 1, x, m, p, b, h, n, z, w)
    last = (n[0] - 1) * STRIDE + 2 + 4 * NW
    for k in range(ND):
        a = dead_time_argument(k)
        jump = abs(w[a] - h[last + a])
        if event == 1 or jump > 1e-13 * (abs(w[a]) + 1e-9):
            target = t
            if dead_time_kind(k) == 1:
                target = x[dead_time_volume(k)]
            if waiting[k] < ECHOES and (waiting[k] == 0 or pending[k * ECHOES + waiting[k] - 1] < target):
                pending[k * ECHOES + waiting[k]] = target
                waiting[k] = waiting[k] + 1
    return 0.0


def drop_echoes(t, x, m, p, b, h, n, z, c, pending, waiting):
    # echoes that have come out by now
    clocks(t, 1, x, m, p, b, h, n, z, c)
    for k in range(ND):
        moving = 1
        while moving == 1 and waiting[k] > 0:
            target = pending[k * ECHOES]
            if c[k] >= target - 1e-10 * (1.0 + abs(target)):
                for i in range(waiting[k] - 1):
                    pending[k * ECHOES + i] = pending[k * ECHOES + i + 1]
                waiting[k] = waiting[k] - 1
            else:
                moving = 0
    return 0.0


def shortest_lag(t, c):
    # of the dead times in time
    shortest = 1e300
    for k in range(ND):
        if dead_time_kind(k) == 0:
            lag = t - c[k]
            if lag > 0.0 and lag < shortest:
                shortest = lag
    return shortest
