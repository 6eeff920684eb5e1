# Restricted Python: from boundary to boundary. See DEVELOPERS.md, "The generated text".
# e: floats - 0 time, 1 proposed step, 2 record interval (0: none), 3 time of the last flips, 4 of the last flip of the
#    switch in j[8], 5 last step that ended without a flip,
#    6 span over which a tie is looked at, 16 + k last execution of task k
# n[7]: 1 + the switch that rests on its tie, 0 for none
# j: ints - 0 steps, 1 rejections, 2 flips at one place, 3 number of the next row, 4 rows written, 5 index that a status
#    speaks of, 6 rates at t are stale, 7 the state at t is a boundary still to be carried out, 8 and 9 the switch that turned last and how often at one place
# Statuses: 0 reached, 1 pieces full, 2 step too small, 3 not finite, 4 steps used up, 5 equation unsolved, 6 condition,
# 7 chatter


def tie_of(t):
    return 1e-10 * (1.0 + abs(t))


def next_boundary(t, until, p, period, phase, every, scans, draws, c, pending, waiting):
    # the nearest of: the end, scans, draws, and echoes whose time can be told
    nearest = until
    for k in range(NC):
        if period[k] > 0.0:
            at = phase[k] + scans[k] * period[k]
            if at < nearest:
                nearest = at
    for k in range(NZ):
        if every[k] > 0.0:
            at = draws[k] * every[k]
            if at < nearest:
                nearest = at
    for k in range(ND):
        if waiting[k] > 0 and dead_time_kind(k) == 0:
            at = t + (pending[k * ECHOES] - c[k])
            if at < nearest and at > t:
                nearest = at
    return nearest


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


def wants_to_turn(i, b, n, g):
    # whether a switch stands against what it compares; one that rests on its tie does not
    if i == n[7] - 1:
        return 0
    if g[i] > 0.0:
        return 1 if b[i] < 0.5 else 0
    if g[i] < 0.0:
        return 1 if b[i] > 0.5 else 0
    return 0


def leave_share(t, step, x, m, p, b, h, n, z, f, g):
    # the share of the step at which a switch leaves its tie, 2.0 when it stays
    y = f[16]
    share = share_of(t + step, f[8], m, p, b, h, n, z, f, g)
    if share >= 0.0 and share <= 1.0:
        return 2.0
    low = 0.0
    high = 1.0
    count = 0
    while count < 60 and high - low > 1e-14:
        count += 1
        middle = 0.5 * (low + high)
        dense(middle, step, x, f, y)
        share = share_of(t + middle * step, y, m, p, b, h, n, z, f, g)
        if share >= 0.0 and share <= 1.0:
            low = middle
        else:
            high = middle
    return high


def watch_ties(now, e, j, n, f):
    # a switch that turns again and again at one place rests on its tie from now on
    marks = f[12]
    for i in range(NB - NQ):
        if marks[i] > 0.5:
            if j[8] == i + 1 and now - e[4] <= 1e-4 * e[5]:
                j[9] = j[9] + 1
            else:
                j[9] = 0
            j[8] = i + 1
            e[4] = now
            if j[9] >= 3 and n[7] == 0:
                n[7] = i + 1
                j[9] = 0
                f[17][0] = greater(1e-3 * e[5], 1e-6)
                e[6] = f[17][0]
    return 0.0


def flip_share(t, step, x, m, p, b, h, n, z, f, g):
    # the share of the step at which the first switch turns over, 2.0 when none does
    y = f[7]
    switches(0, t + step, -1, f[8], m, p, b, h, n, z, g)
    wrong = 0
    for i in range(NB):
        if wants_to_turn(i, b, n, g) == 1:
            wrong = 1
    if wrong == 0:
        return 2.0
    low = 0.0
    high = 1.0
    count = 0
    while count < 60 and high - low > 1e-14:
        count += 1
        share = 0.5 * (low + high)
        dense(share, step, x, f, y)
        switches(0, t + share * step, 0, y, m, p, b, h, n, z, g)
        wrong = 0
        for i in range(NB):
            if wants_to_turn(i, b, n, g) == 1:
                wrong = 1
        if wrong == 1:
            high = share
        else:
            low = share
    return high


def mark_flips(share, t, step, x, m, p, b, h, n, z, f, g):
    # note which switches have turned at a share of the step; they are set once the step has been cut there
    y = f[7]
    marks = f[12]
    dense(share, step, x, f, y)
    switches(0, t + share * step, 0, y, m, p, b, h, n, z, g)
    for i in range(NB):
        marks[i] = 1.0 if wants_to_turn(i, b, n, g) == 1 else 0.0
    return 0.0


def flip_marked(b, f, j):
    # turn over the switches noted; returns the number of a condition among them, -1 when there is none
    marks = f[12]
    turned = -1
    for i in range(NB):
        if marks[i] > 0.5:
            b[i] = 1.0 - b[i]
            j[5] = i
            if i >= NB - NQ:
                turned = i
    return turned


def set_switches(t, x, m, p, b, h, n, z, g, f):
    # all positions from the values now; a few rounds, since loops of algebra see the positions they set
    old = f[12]
    turned = -1
    count = 0
    changed = 1
    while changed == 1 and count < 6:
        count += 1
        for i in range(NB):
            old[i] = b[i]
        switches(1, t, 1, x, m, p, b, h, n, z, g)
        changed = 0
        for i in range(NB):
            if old[i] != b[i]:
                changed = 1
                if i >= NB - NQ:
                    turned = i
    return turned


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


def carry_out(event, e, j, x, m, p, b, h, n, z, f, g, c, period, phase, every, scans, draws, pending, waiting, rows):
    # the boundary at the present time: scans that are due, switches, latches, echoes, the row of this instant
    t = e[0]
    turned = -1
    if event == 1:
        timing(p, period, phase, every)
        for k in range(NC):
            if period[k] > 0.0:
                scans[k] = 0
                if t > phase[k]:
                    scans[k] = int((t - tie_of(t) - phase[k]) / period[k]) + 1
                if abs(phase[k] + scans[k] * period[k] - e[16 + k]) <= tie_of(t):
                    scans[k] = scans[k] + 1
    for k in range(NC):
        if period[k] > 0.0:
            if phase[k] + scans[k] * period[k] <= t + tie_of(t):
                scan(k, t, x, m, p, b, h, n, z)
                scans[k] = scans[k] + 1
                e[16 + k] = t
        elif event == 1:
            scan(k, t, x, m, p, b, h, n, z)
    for k in range(NZ):
        if every[k] > 0.0:
            while draws[k] * every[k] <= t + tie_of(t):
                draws[k] = draws[k] + 1
    n[7] = 0
    turned = set_switches(t, x, m, p, b, h, n, z, g, f)
    latches(t, 1, x, m, p, b, h, n, z)
    if ND > 0:
        note_echoes(t, event, x, m, p, b, h, n, z, f, pending, waiting)
        drop_echoes(t, x, m, p, b, h, n, z, c, pending, waiting)
    j[6] = 1
    j[7] = 0
    if e[2] > 0.0 and abs(j[3] * e[2] - t) <= tie_of(t):
        write_row(t, 1, x, m, p, b, h, n, z, f, rows, j)
    return turned


def write_row(t, side, x, m, p, b, h, n, z, f, rows, j):
    r = f[13]
    recorded(t, side, x, m, p, b, h, n, z, r)
    base = j[4] * (NR + 1)
    rows[base] = t
    for i in range(NR):
        rows[base + 1 + i] = r[i]
    j[3] = j[3] + 1
    j[4] = j[4] + 1
    return 0.0


def write_rows(t, step, end, x, m, p, b, h, n, z, f, rows, j, e):
    # rows inside the step just committed; one at its very end only where no boundary follows
    y = f[7]
    until = t + step + tie_of(t) if end == 1 else t + step - tie_of(t)
    while j[3] * e[2] <= until:
        at = j[3] * e[2]
        share = (at - t) / step
        if share > 1.0:
            share = 1.0
        dense(share, step, x, f, y)
        write_row(at, 0, y, m, p, b, h, n, z, f, rows, j)
    return 0.0


def commit(t, step, at_boundary, x, m, p, b, h, n, z, f, rows, j, e):
    # the step just tried becomes the past
    n[0] = n[0] + 1
    if e[2] > 0.0:
        write_rows(t, step, 1 - at_boundary, x, m, p, b, h, n, z, f, rows, j, e)
    new = f[8]
    k1 = f[0]
    k7 = f[6]
    for i in range(NX):
        x[i] = new[i]
        k1[i] = k7[i]
    j[0] = j[0] + 1
    j[6] = 0
    return 0.0


def shortest_lag(t, c):
    # of the dead times in time; a lag far below the step is left to the repetition in step_with_history
    shortest = 1e300
    for k in range(ND):
        if dead_time_kind(k) == 0:
            lag = t - c[k]
            if lag > 0.0 and lag < shortest:
                shortest = lag
    return shortest


def advance(until, budget, e, j, x, m, p, b, h, n, z, f, g, c, q, period, phase, every, scans, draws, pending, waiting, rows):
    goal = j[0] + budget
    f[17][0] = e[6]
    while e[0] < until - tie_of(until):
        t = e[0]
        if j[7] == 1:
            turned = carry_out(0, e, j, x, m, p, b, h, n, z, f, g, c, period, phase, every, scans, draws, pending, waiting, rows)
            if turned >= 0:
                j[5] = turned
                return 6
        if n[0] + 2 > n[6]:
            return 1
        if j[0] >= goal:
            return 4
        if ND > 0:
            clocks(t, 1, x, m, p, b, h, n, z, c)
        limit = next_boundary(t, until, p, period, phase, every, scans, draws, c, pending, waiting)
        step = e[1]
        if ND > 0:
            lag = shortest_lag(t, c)
            if lag < step and lag * 8.0 > step:
                step = lag
        cut = 0
        if t + step * 1.000001 >= limit:
            step = limit - t
            cut = 1
        if step < 1e-13 * (1.0 + abs(t)):
            if cut == 0:
                return 2
            e[0] = limit
            if limit < until - tie_of(until):
                j[7] = 1
            continue
        n[1] = 0
        error = step_with_history(t, step, j[6], x, m, p, b, h, n, z, f, g, q)
        if not (error <= 1.0) or n[1] > 0:
            j[1] = j[1] + 1
            j[6] = 0 if error == error else 1
            shrink = 0.1
            if error > 1.0 and error < 1e8:
                shrink = 0.9 * power(error, -0.2)
                if shrink < 0.2:
                    shrink = 0.2
            e[1] = step * shrink
            if e[1] < 1e-12 * (1.0 + abs(t)):
                j[5] = n[1]
                return 5 if n[1] > 0 else (2 if error == error else 3)
            continue
        grow = 5.0
        if error > 1e-4:
            grow = 0.9 * power(error, -0.2)
        proposal = step * grow
        if cut == 1 and proposal < e[1] and grow >= 1.0:
            proposal = e[1]
        echo = 2.0
        if ND > 0:
            echo = echo_share(t, step, x, m, p, b, h, n, z, f, c, pending, waiting)
        share = echo
        flipping = 0
        if NB > 0:
            first = flip_share(t, step, x, m, p, b, h, n, z, f, g)
            if first <= share and first < 2.0:
                share = first
                flipping = 1
                mark_flips(first, t, step, x, m, p, b, h, n, z, f, g)
        leaving = 0
        if n[7] > 0:
            first = leave_share(t, step, x, m, p, b, h, n, z, f, g)
            if first <= share and first < 2.0:
                share = first
                leaving = 1
                flipping = 0
        boundary = cut
        if share < 1.0:
            step = step * share
            boundary = 1 if echo <= share else 0
            cut = 0
            if step > 1e-13 * (1.0 + abs(t)):
                step_with_history(t, step, 0, x, m, p, b, h, n, z, f, g, q)
        if step > 1e-13 * (1.0 + abs(t)):
            commit(t, step, boundary, x, m, p, b, h, n, z, f, rows, j, e)
            e[0] = limit if cut == 1 else t + step
            if flipping == 0:
                e[5] = step
        e[1] = proposal
        turned = -1
        if flipping == 1:
            turned = flip_marked(b, f, j)
            watch_ties(e[0], e, j, n, f)
            j[6] = 1
            if e[0] - e[3] > 1e-6 * (until - e[3]) + 1e-9:
                e[3] = e[0]
                j[2] = 0
            j[2] = j[2] + 1
            if j[2] > 2000:
                return 7
        if leaving == 1:
            share = share_of(e[0], x, m, p, b, h, n, z, f, g)
            b[n[7] - 1] = 1.0 if share > 0.5 else 0.0
            n[7] = 0
            j[6] = 1
        latches(e[0], 1, x, m, p, b, h, n, z)
        if boundary == 1 and e[0] < until - tie_of(until):
            j[7] = 1
        if turned >= 0:
            j[5] = turned
            return 6
    return 0
