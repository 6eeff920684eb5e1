# Restricted Python: one step of Dormand and Prince's method of order 5(4), its dense output, and its samples.
# Coefficients: Dormand, Prince, J. Comput. Appl. Math. 6 (1980) 19-26; dense output: Hairer, Norsett, Wanner,
# Solving Ordinary Differential Equations I, II.6. The sums over states (stage_2 … dense) are written out per model.


def share_of(t, x, m, p, b, h, n, z, f, g):
    # a switch that both sides push against: the share of its upper position that keeps it on its tie (Filippov's mean)
    place = n[7] - 1
    span = f[17][0]
    upper = f[14]
    lower = f[9]
    y = f[15]
    switches(0, t, 0, x, m, p, b, h, n, z, g)
    gap = g[place]
    b[place] = 0.0
    rates(t, 0, x, m, p, b, h, n, z, lower)
    for i in range(NX):
        y[i] = x[i] + span * lower[i]
    switches(0, t + span, 0, y, m, p, b, h, n, z, g)
    below = (g[place] - gap) / span
    b[place] = 1.0
    rates(t, 0, x, m, p, b, h, n, z, upper)
    for i in range(NX):
        y[i] = x[i] + span * upper[i]
    switches(0, t + span, 0, y, m, p, b, h, n, z, g)
    above = (g[place] - gap) / span
    return div(-below, above - below)


def field(t, side, x, m, p, b, h, n, z, f, g, dx):
    # the rates; on a tie that both sides push against, their mean
    if n[7] == 0:
        rates(t, side, x, m, p, b, h, n, z, dx)
        return 0.0
    share = share_of(t, x, m, p, b, h, n, z, f, g)
    upper = f[14]
    lower = f[9]
    for i in range(NX):
        dx[i] = lower[i] + share * (upper[i] - lower[i])
    return share


def attempt(t, step, fresh, x, m, p, b, h, n, z, f, g, q):
    # one try from t over `step`; f holds the work arrays one after the other, q the tolerances; returns the error norm
    f[17][2] = 0.0
    if f[17][1] > 0.5 and n[7] == 0:
        f[17][2] = 1.0
        return attempt_implicit(t, step, x, m, p, b, h, n, z, f, q)
    k1 = f[0]
    k2 = f[1]
    k3 = f[2]
    k4 = f[3]
    k5 = f[4]
    k6 = f[5]
    k7 = f[6]
    y = f[7]
    new = f[8]
    if fresh == 1:
        field(t, 1, x, m, p, b, h, n, z, f, g, k1)
    stage_2(x, k1, step, y)
    field(t + 0.2 * step, 0, y, m, p, b, h, n, z, f, g, k2)
    stage_3(x, k1, k2, step, y)
    field(t + 0.3 * step, 0, y, m, p, b, h, n, z, f, g, k3)
    stage_4(x, k1, k2, k3, step, y)
    field(t + 0.8 * step, 0, y, m, p, b, h, n, z, f, g, k4)
    stage_5(x, k1, k2, k3, k4, step, y)
    field(t + step * 8.0 / 9.0, 0, y, m, p, b, h, n, z, f, g, k5)
    stage_6(x, k1, k2, k3, k4, k5, step, y)
    field(t + step, -1, y, m, p, b, h, n, z, f, g, k6)
    stage_7(x, k1, k3, k4, k5, k6, step, new)
    field(t + step, -1, new, m, p, b, h, n, z, f, g, k7)
    return error_norm(x, new, k1, k3, k4, k5, k6, k7, step, q)


def stiffness(step, x, f):
    # the step just tried times the fastest slope, from two stages at the same instant: Hairer, Wanner II, IV.2
    new = f[8]
    k6 = f[5]
    k7 = f[6]
    y = f[9]
    stage_6(x, f[0], f[1], f[2], f[3], f[4], step, y)
    above = 0.0
    below = 0.0
    for i in range(NX):
        above = above + (k7[i] - k6[i]) * (k7[i] - k6[i])
        below = below + (new[i] - y[i]) * (new[i] - y[i])
    return step * root(above / below) if below > 0.0 else 0.0


def dense(share, step, x, f, y):
    # the states at a share of the step just tried
    if f[17][2] > 0.5:
        return dense_implicit(share, x, f, y)
    return dense_explicit(share, step, x, f, y)


def sample(t, step, x, m, p, b, h, n, z, f):
    # the watched signals of the step just tried, written as the piece behind the committed ones
    base = n[0] * STRIDE
    h[base] = t
    h[base + 1] = step
    w = f[10]
    y = f[7]
    watched(t, 1, x, m, p, b, h, n, z, w)
    for i in range(NW):
        h[base + 2 + i] = w[i]
    part = 1
    while part < 4:
        dense(0.25 * part, step, x, f, y)
        watched(t + 0.25 * part * step, 0, y, m, p, b, h, n, z, w)
        for i in range(NW):
            h[base + 2 + part * NW + i] = w[i]
        part += 1
    watched(t + step, -1, f[8], m, p, b, h, n, z, w)
    for i in range(NW):
        h[base + 2 + 4 * NW + i] = w[i]
    return 0.0


def step_with_history(t, step, fresh, x, m, p, b, h, n, z, f, g, q):
    # a try whose dead times may reach into the step itself: repeated with the step's own samples until they stand still
    n[2] = 0
    n[3] = 0
    error = attempt(t, step, fresh, x, m, p, b, h, n, z, f, g, q)
    if NW > 0:
        sample(t, step, x, m, p, b, h, n, z, f)
    if ND == 0 or n[3] == 0:
        return error
    base = n[0] * STRIDE + 2
    old = f[11]
    count = 0
    change = 1.0
    while count < 14 and not (change <= 1e-12):
        count += 1
        for i in range(5 * NW):
            old[i] = h[base + i]
        n[2] = 1
        error = attempt(t, step, fresh, x, m, p, b, h, n, z, f, g, q)
        sample(t, step, x, m, p, b, h, n, z, f)
        change = 0.0
        for i in range(5 * NW):
            gap = abs(h[base + i] - old[i]) / (abs(old[i]) + 1e-3)
            if not (gap <= change):
                change = gap
    n[2] = 0
    if not (change <= 1e-12):
        return 1e9
    return error
