"""Closest approach of the two lowest levels of a well between thick barriers.

In a strong field a pocket state at the far face comes down to the well's level. The gap is
minimised with the power series of `stacks.py` (50 digits), which shares no method with
the program. Prints the field, the gap, the mean of both levels, and the lower two levels at 100 kV/cm.

    python3 crossing.py
"""

from mpmath import findroot, mp, mpf

from stacks import Stack

mp.dps = 40
LAYERS = [("25", "0.232", "0.0919"), ("9", "0", "0.0665"), ("25", "0.232", "0.0919")]
stack = Stack(LAYERS, -1)


def end(energy, field):
    return stack.end(energy, field)


def roots(field, low, high, steps):
    """All levels between two energies, by changes of sign and bisection-like search."""
    found = []
    step = (high - low) / steps
    before = end(low, field)
    for k in range(1, steps + 1):
        now = end(low + k * step, field)
        if before * now < 0:
            bracket = (low + (k - 1) * step, low + k * step)
            found.append(findroot(lambda e: end(e, field), bracket, solver="anderson", tol=mpf(10) ** -60))
        before = now
    return found


def pair(field, around):
    return roots(field, around - mpf("4e-4"), around + mpf("4e-4"), 160)


if __name__ == "__main__":
    field = mpf("94.9448")
    around = mpf("0.03493441") - mpf("0.0005459142e-3") * field**2
    coarse = roots(field, around - mpf("2e-3"), around + mpf("2e-3"), 400)
    print([mp.nstr(e, 10) for e in coarse])
    around = sum(coarse[:2]) / 2
    width = mpf("1e-3")
    for _ in range(6):
        square = []
        for k in (-1, 0, 1):
            low, high = pair(field + k * width, around)[:2]
            square.append((high - low) ** 2)
        field += width * (square[0] - square[2]) / (2 * (square[0] - 2 * square[1] + square[2]))
        width /= 10
    low, high = pair(field, around)[:2]
    print(mp.nstr(field, 15), mp.nstr(1e3 * (high - low), 12), mp.nstr(1e3 * (high + low) / 2, 15))
    around = mpf("0.03493441") - mpf("0.0005459142e-3") * 100**2
    print([mp.nstr(1e3 * e, 15) for e in roots(mpf(100), mpf("-0.01"), around + mpf("2e-3"), 3000)])
