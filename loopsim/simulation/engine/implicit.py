# Restricted Python: one step of an L-stable method of order 4(3) for plants whose fast parts would hold up the other one.
# Coefficients of RODAS: Hairer, Wanner, Solving Ordinary Differential Equations II, IV.7, and the code that goes with it.
# The matrix of slopes is `slopes`, columns that it cannot tell are found by differences.


def jacobian(t, x, m, p, b, h, n, z, f):
    # d rates / d states into f[18], row by row; the rates themselves into f[0]
    matrix = f[18]
    for i in range(NX * NX):
        matrix[i] = 0.0
    slopes(t, 1, x, m, p, b, h, n, z, matrix)
    here = f[0]
    there = f[9]
    y = f[7]
    for k in range(NX):
        if by_differences(k) == 1:
            for i in range(NX):
                y[i] = x[i]
            move = 1e-7 * greater(abs(x[k]), 1e-3)
            y[k] = x[k] + move
            rates(t, 1, y, m, p, b, h, n, z, there)
            for i in range(NX):
                matrix[i * NX + k] = (there[i] - here[i]) / move
    return 0.0


def factorised(diagonal, f):
    # f[19] = diagonal * 1 - matrix in triangles, rows exchanged as f[20] says; 0 where it cannot be done
    matrix = f[18]
    a = f[19]
    order = f[20]
    for i in range(NX * NX):
        a[i] = -matrix[i]
    for i in range(NX):
        a[i * NX + i] = a[i * NX + i] + diagonal
    for k in range(NX):
        best = k
        for i in range(k + 1, NX):
            if abs(a[i * NX + k]) > abs(a[best * NX + k]):
                best = i
        order[k] = 1.0 * best
        if best != k:
            for i in range(NX):
                kept = a[k * NX + i]
                a[k * NX + i] = a[best * NX + i]
                a[best * NX + i] = kept
        pivot = a[k * NX + k]
        if not (abs(pivot) > 0.0):
            return 0
        for i in range(k + 1, NX):
            factor = a[i * NX + k]
            if factor != 0.0:
                factor = factor / pivot
                a[i * NX + k] = factor
                for c in range(k + 1, NX):
                    a[i * NX + c] = a[i * NX + c] - factor * a[k * NX + c]
    return 1


def solved(f, r):
    # the right side r replaced by the solution
    a = f[19]
    order = f[20]
    for k in range(NX):
        best = int(order[k])
        if best != k:
            kept = r[k]
            r[k] = r[best]
            r[best] = kept
    for i in range(NX):
        total = r[i]
        for c in range(i):
            total = total - a[i * NX + c] * r[c]
        r[i] = total
    i = NX - 1
    while i >= 0:
        total = r[i]
        for c in range(i + 1, NX):
            total = total - a[i * NX + c] * r[c]
        r[i] = total / a[i * NX + i]
        i = i - 1
    return 0.0


def attempt_implicit(t, step, x, m, p, b, h, n, z, f, q):
    # one try from t over `step`, as `attempt`; the stages u1 to u6 are f[1] to f[6], what dense output needs f[21] and f[22]
    now = f[0]
    drift = f[9]
    rates(t, 1, x, m, p, b, h, n, z, now)
    jacobian(t, x, m, p, b, h, n, z, f)
    tick = 1e-6 * step
    rates(t + tick, 0, x, m, p, b, h, n, z, drift)
    for i in range(NX):
        drift[i] = (drift[i] - now[i]) / tick
    if factorised(1.0 / (0.25 * step), f) == 0:
        return 1e9
    first_stages(t, step, x, m, p, b, h, n, z, f)
    last_stages(t, step, x, m, p, b, h, n, z, f)
    bends(f)
    u6 = f[6]
    new = f[8]
    worst = 0.0
    total = 0.0
    for i in range(NX):
        scale = greater(abs(new[i] - q[1 + i]), q[1 + NX + i])
        error = abs(u6[i]) / (q[0] * scale)
        total = total + error
        worst = greater(worst, error)
    return worst + 0.0 * total


def first_stages(t, step, x, m, p, b, h, n, z, f):
    # u1 to u4
    now = f[0]
    u1 = f[1]
    u2 = f[2]
    u3 = f[3]
    u4 = f[4]
    y = f[7]
    drift = f[9]
    for i in range(NX):
        u1[i] = now[i] + 0.25 * step * drift[i]
    solved(f, u1)
    for i in range(NX):
        y[i] = x[i] + 1.544 * u1[i]
    rates(t + 0.386 * step, 0, y, m, p, b, h, n, z, u2)
    for i in range(NX):
        u2[i] = u2[i] - 5.6688 / step * u1[i] - 0.1043 * step * drift[i]
    solved(f, u2)
    for i in range(NX):
        y[i] = x[i] + 0.9466785280815826 * u1[i] + 0.2557011698983284 * u2[i]
    rates(t + 0.21 * step, 0, y, m, p, b, h, n, z, u3)
    for i in range(NX):
        old = -2.430093356833875 * u1[i] - 0.2063599157091915 * u2[i]
        u3[i] = u3[i] + old / step + 0.1035 * step * drift[i]
    solved(f, u3)
    for i in range(NX):
        y[i] = x[i] + 3.314825187068521 * u1[i] + 2.896124015972201 * u2[i] + 0.9986419139977817 * u3[i]
    rates(t + 0.63 * step, 0, y, m, p, b, h, n, z, u4)
    for i in range(NX):
        old = -0.1073529058151375 * u1[i] - 9.594562251023355 * u2[i] - 20.47028614809616 * u3[i]
        u4[i] = u4[i] + old / step - 0.0362 * step * drift[i]
    solved(f, u4)
    return 0.0


def last_stages(t, step, x, m, p, b, h, n, z, f):
    # u5, u6 and the new states; u6 is the difference to the method of order 3
    u1 = f[1]
    u2 = f[2]
    u3 = f[3]
    u4 = f[4]
    u5 = f[5]
    u6 = f[6]
    y = f[7]
    new = f[8]
    for i in range(NX):
        y[i] = x[i] + 1.221224509226641 * u1[i] + 6.019134481288629 * u2[i] + 12.53708332932087 * u3[i]
        y[i] = y[i] - 0.687886036105895 * u4[i]
    rates(t + step, -1, y, m, p, b, h, n, z, u5)
    for i in range(NX):
        old = 7.496443313967647 * u1[i] - 10.24680431464352 * u2[i] - 33.99990352819905 * u3[i]
        u5[i] = u5[i] + (old + 11.7089089320616 * u4[i]) / step
    solved(f, u5)
    for i in range(NX):
        y[i] = y[i] + u5[i]
    rates(t + step, -1, y, m, p, b, h, n, z, u6)
    for i in range(NX):
        old = 8.083246795921522 * u1[i] - 7.981132988064893 * u2[i] - 31.52159432874371 * u3[i]
        u6[i] = u6[i] + (old + 16.31930543123136 * u4[i] - 6.058818238834054 * u5[i]) / step
    solved(f, u6)
    for i in range(NX):
        new[i] = y[i] + u6[i]
    return 0.0


def bends(f):
    # what dense output needs of the stages
    u1 = f[1]
    u2 = f[2]
    u3 = f[3]
    u4 = f[4]
    u5 = f[5]
    first = f[21]
    second = f[22]
    for i in range(NX):
        one = 10.12623508344586 * u1[i] - 7.487995877610167 * u2[i] - 34.80091861555747 * u3[i]
        first[i] = one - 7.992771707568823 * u4[i] + 1.025137723295662 * u5[i]
        two = -0.6762803392801253 * u1[i] + 6.087714651680015 * u2[i] + 16.43084320892478 * u3[i]
        second[i] = two + 24.76722511418386 * u4[i] - 6.594389125716872 * u5[i]
    return 0.0


def dense_implicit(share, x, f, y):
    new = f[8]
    first = f[21]
    second = f[22]
    rest = 1.0 - share
    for i in range(NX):
        y[i] = x[i] * rest + share * (new[i] + rest * (first[i] + share * second[i]))
    return 0.0


def choose_method(step, fast, e, j):
    # after a step: the implicit method where stability holds up the other one, as long as it gets on so much faster.
    # `fast` is the step times the fastest slope; steps that a boundary cut short say nothing of the method
    e[8] = e[8] + step
    j[16] = j[16] + 1
    if j[14] == 1:
        j[17] = j[17] + 1
        if j[16] >= 40:
            if e[8] < WORTH * e[9] * j[16]:
                j[14] = 0
                j[15] = 0
                j[18] = j[0] + 4000
                j[6] = 1
            e[8] = 0.0
            j[16] = 0
        return 0.0
    if fast > 3.25:
        j[15] = j[15] + 1
        if j[15] >= 15 and j[0] >= j[18] and IMPLICIT == 1:
            e[9] = e[8] / j[16]
            j[14] = 1
            j[15] = 0
            e[8] = 0.0
            j[16] = 0
    elif j[15] > 0:
        j[15] = j[15] - 1
    if j[15] == 0:
        e[8] = 0.0
        j[16] = 0
    return 0.0
