"""Exact values of the demo formulas by dense diagonalisation with numpy.

Nothing here is taken from the program: each Hamiltonian is written again from
the comments of its spec, in SI or in the spec's own units, and diagonalised as
a whole at every point. Constants: CODATA 2022 (Mohr et al., Rev. Mod. Phys. 97,
025002 (2025)).

In: {"spec": {"formula": [control values]}} on standard input.
Out: the same shape with energies; a spec that is not known here is left out.
"""
import json, sys
import numpy as np

H, E, C = 6.62607015e-34, 1.602176634e-19, 299792458.0
HBAR, ME, MU_B = H / (2 * np.pi), 9.1093837139e-31, 9.2740100657e-24
KINETIC = HBAR**2 / (2 * ME * E) * 1e18  # eV nm^2


def levels(h0, h1, x, wanted):
    """Levels `wanted` (from 0) of h0 + x h1 for all x, ascending."""
    out = []
    for part in np.array_split(np.asarray(x), max(1, len(x) // 100)):
        out.append(np.linalg.eigvalsh(h0[None] + part[:, None, None] * h1[None])[:, wanted])
    return np.concatenate(out)


def lobatto(n):
    """Nodes, weights and derivative matrix of n + 1 Gauss-Lobatto points.
    Abramowitz and Stegun, 25.4.32."""
    inner = np.polynomial.legendre.Legendre.basis(n).deriv().roots()
    x = np.concatenate([[-1.0], np.real(inner), [1.0]])
    p = np.polynomial.legendre.Legendre.basis(n)
    for _ in range(3):  # polish the roots of (1 - x^2) P'
        d1, d2 = p.deriv()(x[1:-1]), p.deriv(2)(x[1:-1])
        x[1:-1] -= d1 / d2
    w = 2 / (n * (n + 1) * p(x) ** 2)
    d = x[:, None] - x[None, :] + np.eye(n + 1)
    d = (p(x)[:, None] / p(x)[None, :]) / d
    d[np.diag_indices(n + 1)] = 0
    d[np.diag_indices(n + 1)] = -np.sum(d, axis=1)
    return x, w, d


def stack(layers, charge, outside=0.0, degree=16, longest=8.0):
    """Matrices of a layer stack, eV and nm: without field, and per V/nm of field.

    layers: (thickness, edge at both ends, mass at both ends). With `outside`
    so much of each outer layer follows beyond the listed stack, where the
    field's potential keeps its value at the face.
    """
    total = sum(t for t, _, _ in layers)
    pieces = []
    if outside:
        _, edge, mass = layers[0]
        pieces.append((-total / 2 - outside, outside, (edge[0],) * 2, (mass[0],) * 2))
    z = -total / 2
    for t, edge, mass in layers:
        pieces.append((z, t, edge, mass))
        z += t
    if outside:
        _, edge, mass = layers[-1]
        pieces.append((z, outside, (edge[1],) * 2, (mass[1],) * 2))
    x, w, d = lobatto(degree)
    elements = []
    for start, t, edge, mass in pieces:
        n = int(np.ceil(t / longest))
        for i in range(n):
            elements.append((start + t * i / n, t / n, start, t, edge, mass))
    size = degree * len(elements) + 1
    k, s, v, f = np.zeros((size, size)), np.zeros(size), np.zeros(size), np.zeros(size)
    for i, (z0, length, start, t, edge, mass) in enumerate(elements):
        at = slice(i * degree, (i + 1) * degree + 1)
        z = z0 + length * (x + 1) / 2
        grade = (z - start) / t
        m = mass[0] + (mass[1] - mass[0]) * grade
        k[at, at] += KINETIC * (2 / length) * (d.T * (w / m)) @ d
        s[at] += w * length / 2
        v[at] += w * length / 2 * (edge[0] + (edge[1] - edge[0]) * grade)
        f[at] += w * length / 2 * -charge * np.clip(z, -total / 2, total / 2)
    r = 1 / np.sqrt(s)
    h0 = (k + np.diag(v)) * r[:, None] * r[None, :]
    return h0[1:-1, 1:-1], np.diag(f / s)[1:-1, 1:-1]


def spin(j):
    m = np.arange(j, -j - 1, -1)
    up = np.diag(np.sqrt(j * (j + 1) - m[1:] * (m[1:] + 1)), 1)
    return (up + up.T) / 2, (up - up.T) / 2j, np.diag(m)


def ball(shells, charge, channels=9, degree=18):
    """Matrices of concentric shells at m = 0, eV and nm: without field, and per
    V/nm of field along z. shells: (thickness, edge, mass), a wall outside.

    The unknown is the radial function itself, not its product with the radius,
    in polynomials between Lobatto points with Gauss quadrature, so the overlap
    is a full matrix. Regular at the centre; for l > 0 it vanishes there.
    """
    x, _, _ = lobatto(degree)
    g, w = np.polynomial.legendre.leggauss(degree + 6)
    # Cardinal functions and slopes at the Gauss points by Vandermonde matrices.
    v = np.polynomial.legendre.legvander(x, degree)
    values = np.linalg.solve(v.T, np.polynomial.legendre.legvander(g, degree).T).T
    slope = np.polynomial.legendre.legder(np.eye(degree + 1))
    slopes = np.linalg.solve(v.T, (np.polynomial.legendre.legvander(g, degree - 1) @ slope).T).T
    size = degree * len(shells) + 1
    h = np.zeros((channels, size, size))
    s, f = np.zeros((size, size)), np.zeros((size, size))
    start = 0.0
    for i, (t, edge, mass) in enumerate(shells):
        at = np.ix_(range(i * degree, (i + 1) * degree + 1), range(i * degree, (i + 1) * degree + 1))
        r, wr = start + t * (g + 1) / 2, w * t / 2
        d = slopes * 2 / t
        s[at] += (values.T * (wr * r**2)) @ values
        f[at] += (values.T * (wr * r**3)) @ values
        for l in range(channels):
            h[l][at] += KINETIC / mass * (d.T * (wr * r**2)) @ d
            h[l][at] += (values.T * (wr * (KINETIC / mass * l * (l + 1) + edge * r**2))) @ values
        start += t
    keep = [range(0 if l == 0 else 1, size - 1) for l in range(channels)]
    root = [np.linalg.inv(np.linalg.cholesky(s[np.ix_(k, k)])) for k in keep]
    ends = np.concatenate([[0], np.cumsum([len(k) for k in keep])])
    h0, h1 = np.zeros((ends[-1],) * 2), np.zeros((ends[-1],) * 2)
    for l in range(channels):
        a = slice(ends[l], ends[l + 1])
        h0[a, a] = root[l] @ h[l][np.ix_(keep[l], keep[l])] @ root[l].T
        if l + 1 < channels:
            b = slice(ends[l + 1], ends[l + 2])
            cosine = (l + 1) / np.sqrt((2 * l + 1) * (2 * l + 3))
            h1[a, b] = -charge * cosine * root[l] @ f[np.ix_(keep[l], keep[l + 1])] @ root[l + 1].T
            h1[b, a] = h1[a, b].T
    return h0, h1


KV_CM = 1e-4  # V/nm


def flat(t, edge, mass):
    return (t, (edge, edge), (mass, mass))


def shutter(x):
    h0, h1 = stack([flat(12, 0.232, 0.0919), flat(9, 0, 0.0665), flat(12, 0.232, 0.0919)], -1)
    return levels(h0, KV_CM * h1, x, [0])[:, 0] * 1e3


def bead(x):
    h0, h1 = ball([(3, 0, 0.11), (2, 0.6, 0.16)], -1)
    return levels(h0, KV_CM * h1, x, [0])[:, 0] * 1e3


def latch(x):
    layers = [flat(10, 0.26, 0.096), flat(5, 0, 0.0665), flat(7, 0.08, 0.075), flat(10, 0.26, 0.096)]
    h0, h1 = stack(layers, -1, outside=40.0)
    return levels(h0, KV_CM * h1, x, [0, 1])


def window(x, hole_level):
    h0, h1 = stack([flat(12, 0.232, 0.0919), flat(9.5, 0, 0.0665), flat(12, 0.232, 0.0919)], -1)
    g0, g1 = stack([flat(12, 0.142, 0.36), flat(9.5, 0, 0.34), flat(12, 0.142, 0.36)], 1, longest=5.0)
    electron = levels(h0, KV_CM * h1, x, [0])[:, 0]
    return (1.424 + electron + levels(g0, KV_CM * g1, x, [hole_level])[:, 0]) * 1e3


def gate(x):
    layers = [
        flat(14, 0.25, 0.092),
        (6, (0.0, 0.06), (0.0665, 0.071)),
        flat(4, 0, 0.0665),
        flat(14, 0.25, 0.092),
    ]
    h0, h1 = stack(layers, -1)
    return levels(h0, h1, (1.35 - np.asarray(x)) / 420, [0])[:, 0] * 1e3


def clock(x):
    s, i = [np.kron(a, np.eye(8)) for a in spin(0.5)], [np.kron(np.eye(2), a) for a in spin(3.5)]
    h0 = 2.2e9 * sum(a @ b for a, b in zip(s, i)).real
    h1 = MU_B / H * 1e-3 * (2.0025 * s[2] - 0.0004 * i[2])
    block = np.flatnonzero(np.abs(np.diag(s[2] + i[2]).real) < 1e-9)
    e = levels(h0[np.ix_(block, block)], h1[np.ix_(block, block)].real, x, [0, 1])
    zero = np.linalg.eigvalsh(h0[np.ix_(block, block)])
    return (e[:, 1] - e[:, 0]) - (zero[1] - zero[0])


def relay(x):
    h0 = np.array([[0, 45, 0], [45, 0, 12], [0, 12, 0]], float)
    return levels(h0, np.diag([0.0, 1, 2]), x, [0])[:, 0]


def dots(x):
    def read(name):
        lines = [l.split() for l in open(name) if not l.startswith("%")]
        m = np.zeros((int(lines[0][0]),) * 2)
        for a, b, v in lines[1:]:
            m[int(a) - 1, int(b) - 1] = m[int(b) - 1, int(a) - 1] = float(v)
        return m

    return levels(read("dots_h0.mtx"), read("dots_h1.mtx"), x, [0, 1])


def needle(x):
    sx, _, sz = spin(1)
    return levels(2900.0 * sz @ sz, 28.0 * sx, x, [0, 1, 2])


def slot(x):
    # Sine functions between the walls; the bump by dense Gauss-Legendre quadrature.
    n, length = 60, 12.0
    z, w = np.polynomial.legendre.leggauss(400)
    z, w = z * length / 2, w * length / 2
    k = np.arange(1, n + 1)
    phi = np.sqrt(2 / length) * np.sin(np.pi * k[:, None] * (z[None] + length / 2) / length)
    kinetic = np.diag((HBAR * np.pi * k / (length * 1e-9)) ** 2 / (2 * 6.0e-32) / E)
    h0 = kinetic + (phi * (w * 0.030 * np.exp(-((z / 2) ** 2)))) @ phi.T
    return levels(h0, KV_CM * (phi * (w * z)) @ phi.T, x, [0])[:, 0] * 1e3


def drum(x):
    n = 90
    a = np.diag(np.sqrt(np.arange(1.0, n + 8)), 1)
    q = (a + a.T) / np.sqrt(2)
    q4 = np.linalg.matrix_power(q, 4)[:n, :n]
    h0 = 5200 * np.diag(np.arange(n) + 0.5) + 40 * q4
    e = levels(h0, -120 * q[:n, :n], x, [0, 1])
    return e[:, 1] - e[:, 0]


def rotor(x):
    j = np.arange(40.0)
    cos = np.diag((j[1:]) / np.sqrt((2 * j[1:] - 1) * (2 * j[1:] + 1)), 1)
    debye = 1e-21 / C
    e = levels(6100 * np.diag(j * (j + 1)), -0.72 * debye * 1e5 / H / 1e6 * (cos + cos.T), x, [0, 1])
    return e[:, 1] - e[:, 0]


def dial(x):
    n = np.arange(-12.0, 13)
    x = np.asarray(x)
    h0 = 24 * np.diag(n**2) - 1.5 * (np.eye(25, k=1) + np.eye(25, k=-1))
    return levels(h0, -48 * np.diag(n), x, [0])[:, 0] + 24 * x**2


TERA = E / H / 1e12
KNOWN = {
    "bead": {"ground": bead},
    "shutter": {"edge": shutter},
    "shutter_best": {"edge": shutter},
    "latch": {
        "ground": lambda x: latch(x)[:, 0] * 1e3,
        "first": lambda x: latch(x)[:, 1] * 1e3,
        "line": lambda x: TERA * (np.diff(latch(x))[:, 0] - np.diff(latch([25.0]))[0, 0]),
    },
    "window": {"onset": lambda x: window(x, 0), "forbidden": lambda x: window(x, 1)},
    "gate": {"level": gate},
    "clock": {"line": clock},
    "relay": {"dressed": relay},
    "dots": {
        "ground": lambda x: dots(x)[:, 0],
        "gap": lambda x: np.diff(dots(x))[:, 0] * E * 1e-6 / H / 1e9,
    },
    "needle": {
        "upper": lambda x: needle(x)[:, 2] - needle(x)[:, 0],
        "middle": lambda x: needle(x)[:, 1] - needle(x)[:, 0],
    },
    "slot": {"ground": slot},
    "drum": {"interval": drum},
    "rotor": {"line": rotor},
    "dial": {"lower": dial},
}
if __name__ == "__main__":
    asked = json.load(sys.stdin)
    json.dump(
        {
            spec: {name: list(KNOWN[spec][name](points)) for name, points in formulas.items() if name in KNOWN[spec]}
            for spec, formulas in asked.items()
            if spec in KNOWN
        },
        sys.stdout,
    )
