"""Curvature of the lowest level of a charge box at half charge, 4 EC (n - g)^2 - EJ cos phi.

Needs mpmath. Central differences at 40 digits in a basis of 25 charges; two step
widths show the digits that hold.
"""

from mpmath import eigsy, matrix, mp, mpf

mp.dps = 40


def lowest(charge, josephson, reach=12):
    size = 2 * reach + 1
    hamiltonian = matrix(size, size)
    for row in range(size):
        hamiltonian[row, row] = 4 * (row - reach - charge) ** 2
        if row + 1 < size:
            hamiltonian[row, row + 1] = hamiltonian[row + 1, row] = -josephson / 2
    return min(eigsy(hamiltonian, eigvals_only=True))


for josephson in (mpf("0.1"), mpf("0.5")):
    for step in (mpf("1e-6"), mpf("1e-8")):
        below, middle, above = (lowest(mpf("0.5") + k * step, josephson) for k in (-1, 0, 1))
        print(josephson, mp.nstr(step, 1), mp.nstr((below - 2 * middle + above) / step**2, 18), mp.nstr(middle, 18))
