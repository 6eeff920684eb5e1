# Restricted Python: mathematics of the block language. The same definitions as in loopsim/language/evaluate.py.


def sign(a):
    return 1.0 if a > 0.0 else (-1.0 if a < 0.0 else a)


def smaller(a, b):
    return b if b < a else a


def greater(a, b):
    return b if b > a else a


def clip(a, low, high):
    capped = high if a > high else a
    return low if capped < low else capped


def rounded(a, step):
    if step == 0.0 or not (abs(a) < 1e300):
        return a
    return floor(a / step + 0.5) * step


def sticky(a, b, zone, position):
    # 1 for a > b, 0 for a < b, the position as it was where both are equal within rounding and `zone`
    gap = a - b
    if abs(gap) <= 1e-12 * (abs(a) + abs(b)) + zone:
        return position
    return 1.0 if gap > 0.0 else 0.0
