# Restricted Python: comparisons that turn over inside a step, and those that rest on their tie.
# n[7] is 1 + the switch that rests on its tie, 0 for none.


def wants_to_turn(i, b, n, g):
    # whether a switch stands against what it compares; one that rests on its tie does not
    if i == n[7] - 1:
        return 0
    if g[i] > 0.0:
        return 1 if b[i] < 0.5 else 0
    if g[i] < 0.0:
        return 1 if b[i] > 0.5 else 0
    return 0


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


def leave_tie(t, j, x, m, p, b, h, n, z, f, g):
    # the switch that rested on its tie takes the side that no longer pushes back
    share = share_of(t, x, m, p, b, h, n, z, f, g)
    b[n[7] - 1] = 1.0 if share > 0.5 else 0.0
    n[7] = 0
    j[6] = 1
    return 0.0
