# Restricted Python: recorded rows.


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
