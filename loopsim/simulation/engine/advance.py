# Restricted Python: from boundary to boundary. See DEVELOPERS.md, "The generated text".
# e: floats - 0 time, 1 proposed step, 2 record interval (0: none), 3 time of the last flips, 4 of the last flip of the
#    switch in j[8], 5 last step that ended without a flip,
#    6 span over which a tie is looked at, 7 the step to try, 8 and 9 see choose_method, 10 the step to try
#    first after a boundary, where something may have jumped, 16 + k last execution of task k
# n[7]: 1 + the switch that rests on its tie, 0 for none
# j: ints - 0 steps, 1 rejections, 2 flips at one place, 3 number of the next row, 4 rows written, 5 index that a status
#    speaks of, 6 rates at t are stale, 7 the state at t is a boundary still to be carried out, 8 and 9 the switch that turned last and how often
#    at one place, 10 the step ends at a boundary, 11 to 13 see first_stop, 14 the method (1: implicit), 15 to 18 see
#    choose_method, 19 a boundary has just been carried out
# Statuses: 0 reached, 1 pieces full, 2 step too small, 3 not finite, 4 steps used up, 5 equation unsolved, 6 condition,
# 7 chatter


def tie_of(t):
    # instants closer than this are one
    return 1e-10 * (1.0 + abs(t))


def smallest(t):
    # no step is shorter
    return 1e-13 * (1.0 + abs(t))


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
    j[19] = 1
    if e[2] > 0.0 and abs(j[3] * e[2] - t) <= tie_of(t):
        write_row(t, 1, x, m, p, b, h, n, z, f, rows, j)
    return turned


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
    j[6] = 1 if f[17][2] > 0.5 else 0
    return 0.0


def first_step(t, limit, e, j, c):
    # the step to try, into e[7]; j[10] tells whether it ends at the next boundary
    step = e[1]
    if j[19] == 1 and e[10] > 0.0:
        step = smaller(step, e[10])
    if ND > 0:
        lag = shortest_lag(t, c)
        # a lag far below the step is left to the repetition in step_with_history
        if lag < step and lag * 8.0 > step:
            step = lag
    j[10] = 0
    if t + step * 1.000001 >= limit:
        step = limit - t
        j[10] = 1
    e[7] = step
    return 0.0


def refuse(t, step, error, e, j, n):
    # a try that was not good enough: a shorter one next, or a status where there is none
    j[1] = j[1] + 1
    j[6] = 0 if error == error else 1
    shrink = 0.1
    if error > 1.0 and error < 1e8:
        shrink = greater(0.9 * power(error, -0.2), 0.2)
    e[1] = step * shrink
    if j[19] == 1:
        e[10] = e[1]
    if e[1] >= smallest(t):
        return 0
    j[5] = n[1]
    if n[1] > 0:
        return 5
    return 2 if error == error else 3


def next_step(step, error, e, j):
    # the step to propose next; one that was cut short by a boundary does not shorten the memory
    grow = 5.0
    if error > 1e-4:
        grow = 0.9 * power(error, -0.2)
    proposal = step * grow
    if j[19] == 1:
        e[10] = proposal
        j[19] = 0
    if j[10] == 1 and proposal < e[1] and grow >= 1.0:
        proposal = e[1]
    return proposal


def first_stop(t, step, j, x, m, p, b, h, n, z, f, g, c, pending, waiting):
    # where in the step something happens first, as a share of it (2.0: nowhere); j[11] a switch turns, j[12] one leaves
    # its tie, j[13] something comes out of a dead time
    share = 2.0
    j[11] = 0
    j[12] = 0
    j[13] = 0
    if ND > 0:
        share = echo_share(t, step, x, m, p, b, h, n, z, f, c, pending, waiting)
        j[13] = 1 if share < 2.0 else 0
    if NB > 0:
        first = flip_share(t, step, x, m, p, b, h, n, z, f, g)
        if first <= share and first < 2.0:
            j[13] = 1 if first == share else 0
            share = first
            j[11] = 1
            mark_flips(first, t, step, x, m, p, b, h, n, z, f, g)
    if n[7] > 0:
        first = leave_share(t, step, x, m, p, b, h, n, z, f, g)
        if first <= share and first < 2.0:
            j[13] = 1 if first == share and j[13] == 1 else 0
            share = first
            j[11] = 0
            j[12] = 1
    return share


def turn_over(until, e, j, b, n, f):
    # the switches that turn where the step ended; returns a status
    turned = flip_marked(b, f, j)
    watch_ties(e[0], e, j, n, f)
    j[6] = 1
    if e[0] - e[3] > 1e-6 * (until - e[3]) + 1e-9:
        e[3] = e[0]
        j[2] = 0
    j[2] = j[2] + 1
    if j[2] > 2000:
        return 7
    if turned >= 0:
        j[5] = turned
        return 6
    return 0


def take_step(share, limit, until, e, j, x, m, p, b, h, n, z, f, g, q, rows):
    # the step tried, cut where something happens in it, becomes the past; returns a status
    t = e[0]
    step = e[7]
    whole = 1
    if share < 1.0:
        step = step * share
        whole = 0
        if step > smallest(t):
            step_with_history(t, step, 0, x, m, p, b, h, n, z, f, g, q)
    boundary = j[10] if whole == 1 else 0
    if j[13] == 1:
        boundary = 1
    if step > smallest(t):
        commit(t, step, boundary, x, m, p, b, h, n, z, f, rows, j, e)
        e[0] = limit if whole == 1 and j[10] == 1 else t + step
        if j[11] == 0:
            e[5] = step
    status = 0
    if j[11] == 1:
        status = turn_over(until, e, j, b, n, f)
    if j[12] == 1:
        leave_tie(e[0], j, x, m, p, b, h, n, z, f, g)
    latches(e[0], 1, x, m, p, b, h, n, z)
    if boundary == 1 and e[0] < until - tie_of(until):
        j[7] = 1
    return status


def advance(until, budget, e, j, x, m, p, b, h, n, z, f, g, c, q, period, phase, every, scans, draws, pending, waiting, rows):
    goal = j[0] + budget
    f[17][0] = e[6]
    f[17][1] = 1.0 * j[14]
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
        first_step(t, limit, e, j, c)
        if e[7] < smallest(t):
            if j[10] == 0:
                return 2
            e[0] = limit
            j[7] = 1 if limit < until - tie_of(until) else 0
            continue
        n[1] = 0
        error = step_with_history(t, e[7], j[6], x, m, p, b, h, n, z, f, g, q)
        if not (error <= 1.0) or n[1] > 0:
            status = refuse(t, e[7], error, e, j, n)
            if status > 0:
                return status
            continue
        proposal = next_step(e[7], error, e, j)
        watch = 1 if j[14] == 1 or j[10] == 0 else 0
        fast = stiffness(e[7], x, f) if watch == 1 and j[14] == 0 and n[7] == 0 else 0.0
        share = first_stop(t, e[7], j, x, m, p, b, h, n, z, f, g, c, pending, waiting)
        status = take_step(share, limit, until, e, j, x, m, p, b, h, n, z, f, g, q, rows)
        e[1] = proposal
        if watch == 1:
            choose_method(e[0] - t, fast, e, j)
            f[17][1] = 1.0 * j[14]
        if status > 0:
            return status
    return 0
