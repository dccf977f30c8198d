"""Random valid specs of every kind, and an independent judgement of what comes of them.

    python3 properties.py draw SEED > specs.json
    python3 properties.py judge specs.json results.json

A drawn problem is plain numbers; the spec text and the dense Hamiltonian here
are two readings of them. Layers and shells are solved with integrated Legendre
polynomials of a fixed high degree per layer, operators in bases far larger than
needed, everything by numpy's dense Hermitian solver (LAPACK).

The judge holds: every emitted value to the stated error of the followed exact
level, every coefficient of a changed problem to what physics says it must be,
and every range of a smaller tolerance inside that of the larger.

Constants: CODATA 2022.
"""

import json
import math
import random
import sys

import numpy as np

H = 6.62607015e-34
E = 1.602176634e-19
HBAR = H / (2 * math.pi)
ME = 9.1093837139e-31
MUB = 9.2740100657e-24
# hbar^2 / (2 me) in eV nm^2
KINETIC = HBAR**2 / (2 * ME) / E * 1e18
KVCM = 1e-4  # V/nm
# Angular momenta that the field may couple; the range is far inside the first two.
CHANNELS = 6


def digits(x, n=4):
    return float(f"{x:.{n - 1}e}")


# Layers ----------------------------------------------------------------------


def elements(lengths, degree):
    """Values and slopes of the basis at Gauss points: one row per point.

    Hats between faces and integrated Legendre polynomials inside each element;
    the hats of both outer faces come first and last."""
    x, w = np.polynomial.legendre.leggauss(degree + 2)
    legendre = np.polynomial.legendre.legvander(x, degree)
    inner = degree - 1
    size = len(lengths) + 1 + len(lengths) * inner
    value, slope, place, weight, owner = [], [], [], [], []
    z = 0.0
    for k, length in enumerate(lengths):
        v = np.zeros((len(x), size))
        s = np.zeros((len(x), size))
        v[:, k], v[:, k + 1] = (1 - x) / 2, (1 + x) / 2
        s[:, k], s[:, k + 1] = -1 / length, 1 / length
        for n in range(1, degree):
            column = len(lengths) + 1 + k * inner + n - 1
            v[:, column] = (legendre[:, n + 1] - legendre[:, n - 1]) / (2 * n + 1)
            s[:, column] = legendre[:, n] * 2 / length
        value.append(v)
        slope.append(s)
        place.append(z + (x + 1) / 2 * length)
        weight.append(w * length / 2)
        owner.append(np.full(len(x), k))
        z += length
    return [np.concatenate(a) for a in (value, slope, place, weight, owner)], len(lengths)


def orthonormal(overlap):
    return np.linalg.inv(np.linalg.cholesky(overlap))


def split(layers, most):
    """Layers cut into elements of at most `most` nanometres."""
    out = []
    for thickness, edge, mass in layers:
        n = max(1, math.ceil(thickness / most))
        out += [(thickness / n, edge, mass)] * n
    return out


class Layers:
    def __init__(self, p):
        layers = [(t, [e, e], m) for t, e, m in p["layers"]]
        for k, (e0, e1) in enumerate(p["grades"]):
            if e0 is not None:
                layers[k] = (layers[k][0], [e0, e1], layers[k][2])
        listed = sum(t for t, _, _ in layers)
        pad = 45.0 if p["ends"] == "decay" else 0.0
        cut, start = [], []
        for t, (e0, e1), m in layers:
            n = max(1, math.ceil(t / 10))
            for k in range(n):
                cut.append((t / n, e0 + (e1 - e0) * k / n, e0 + (e1 - e0) * (k + 1) / n, m))
        if pad:
            first, last = layers[0], layers[-1]
            cut = [(15.0, first[1][0], first[1][0], first[2])] * 3 + cut + [(15.0, last[1][1], last[1][1], last[2])] * 3
        (v, s, z, w, k), faces = elements([c[0] for c in cut], 14)
        e0, e1, m = (np.array([c[i] for c in cut])[k] for i in (1, 2, 3))
        left = np.concatenate([[0], np.cumsum([c[0] for c in cut])])[k]
        edge = e0 + (e1 - e0) * (z - left) / np.array([c[0] for c in cut])[k]
        z = np.clip(z - pad, 0, listed) - listed / 2
        keep = [i for i in range(v.shape[1]) if i not in (0, faces)]
        v, s = v[:, keep], s[:, keep]
        l = orthonormal(v.T @ (w[:, None] * v))
        self.h0 = l @ (KINETIC * s.T @ ((w / m)[:, None] * s) + v.T @ ((w * edge)[:, None] * v)) @ l.T
        self.h1 = l @ (v.T @ ((w * -p["charge"] * KVCM * z)[:, None] * v)) @ l.T

    def at(self, x):
        return (self.h0 + x * self.h1) * 1e3  # meV


class Radial:
    """Channels l = m, m + 1, ... of one m; the radial part is u = r R."""

    def __init__(self, p):
        channels = range(p["m"], p["m"] + CHANNELS)
        cut = split([tuple(layer) for layer in p["layers"]], 4)
        (v, s, r, w, k), faces = elements([c[0] for c in cut], 12)
        edge, mass = (np.array([c[i] for c in cut])[k] for i in (1, 2))
        keep = [i for i in range(v.shape[1]) if i not in (0, faces)]
        v, s = v[:, keep], s[:, keep]
        l = orthonormal(v.T @ (w[:, None] * v))
        n, count = len(keep), len(channels)
        self.h0, self.h1 = np.zeros((n * count, n * count)), np.zeros((n * count, n * count))
        t = s - v / r[:, None]
        dipole = l @ (v.T @ ((w * -p["charge"] * KVCM * r)[:, None] * v)) @ l.T
        for i, ang in enumerate(channels):
            kinetic = t.T @ ((w / mass)[:, None] * t)
            kinetic += ang * (ang + 1) * v.T @ ((w / mass / r**2)[:, None] * v)
            block = l @ (KINETIC * kinetic + v.T @ ((w * edge)[:, None] * v)) @ l.T
            self.h0[i * n : (i + 1) * n, i * n : (i + 1) * n] = block
            if i + 1 < count:
                # <l + 1, m | cos theta | l, m>
                c = math.sqrt(((ang + 1) ** 2 - p["m"] ** 2) / ((2 * ang + 1) * (2 * ang + 3)))
                self.h1[i * n : (i + 1) * n, (i + 1) * n : (i + 2) * n] = c * dipole
                self.h1[(i + 1) * n : (i + 2) * n, i * n : (i + 1) * n] = c * dipole

    def at(self, x):
        return (self.h0 + x * self.h1) * 1e3


# Matrices and operators ------------------------------------------------------


class Powers:
    def __init__(self, parts):
        self.parts = parts

    def at(self, x):
        return sum(h * x**k for k, h in enumerate(self.parts))


def entries(rows):
    return np.array([[complex(*e) if isinstance(e, list) else e for e in row] for row in rows])


def spin(j):
    m = np.arange(j, -j - 0.5, -1)
    raising = np.diag(np.sqrt(j * (j + 1) - m[1:] * (m[1:] + 1)), 1)
    return (raising + raising.T) / 2, (raising - raising.T) / 2j, np.diag(m)


def tensor(ops, place, sizes):
    out = np.eye(1)
    for k, n in enumerate(sizes):
        out = np.kron(out, ops if k == place else np.eye(n))
    return out


def spins(p):
    sizes = [round(2 * j + 1) for j in p["spins"]]
    ops = [[tensor(o, k, sizes) for o in spin(j)] for k, j in enumerate(p["spins"])]
    n = math.prod(sizes)
    h0 = np.zeros((n, n), complex)
    for a, b, c in p["couplings"]:
        h0 += c * sum(ops[a][i] @ ops[b][i] for i in range(3))
    for k, c in p["axial"]:
        h0 += c * ops[k][2] @ ops[k][2]
    zeeman = MUB * 1e-3 / H / 1e9  # GHz per mT
    h1 = sum(zeeman * g * o[2] for g, o in zip(p["g"], ops))
    if "m" in p:
        keep = np.abs(np.diag(sum(o[2] for o in ops)).real - p["m"]) < 0.1
        h0, h1 = h0[np.ix_(keep, keep)], h1[np.ix_(keep, keep)]
    else:
        h1 = h1 + sum(zeeman * g * t * o[0] for g, t, o in zip(p["g"], p["tilt"], ops))
    return Powers([h0, h1])


def rotor(p):
    m = p["m"]
    j = np.arange(m, m + 40)
    c = np.sqrt(((j[:-1] + 1.0) ** 2 - m**2) / ((2 * j[:-1] + 1) * (2 * j[:-1] + 3)))
    cos = np.diag(c, 1) + np.diag(c, -1)
    debye = 1e-21 / 299792458
    return Powers([np.diag(p["b"] * j * (j + 1.0)), -p["dipole"] * debye * 1e5 / H / 1e9 * cos])


def oscillator(p):
    n = 160
    lower = np.diag(np.sqrt(np.arange(1.0, n)), 1)
    x = (lower + lower.T) / math.sqrt(2)
    h0 = p["quantum"] * np.diag(np.arange(n) + 0.0) + p["quartic"] * np.linalg.matrix_power(x, 4)
    h0 += p["cubic"] * np.linalg.matrix_power(x, 3)
    keep = slice(0, 110)
    return Powers([h0[keep, keep], p["drive"] * x[keep, keep]])


def phase(p):
    n = np.arange(-30, 31) + 0.0
    cos = (np.diag(np.ones(60), 1) + np.diag(np.ones(60), -1)) / 2
    return Powers([np.diag(4 * n**2) - p["josephson"] * cos, np.diag(-8 * n), 4 * np.eye(61)])


def interval(p):
    """p^2 + a x^2 + F x on a unit interval about zero, in sines."""
    n, points = 60, 400
    x, w = np.polynomial.legendre.leggauss(points)
    x, w = x / 2, w / 2
    k = np.arange(1, n + 1)
    sines = math.sqrt(2) * np.sin(math.pi * np.outer(x + 0.5, k))
    potential = sines.T @ ((w * (p["bend"] * x**2 + p["cubic"] * x**3))[:, None] * sines)
    return Powers([np.diag((math.pi * k) ** 2) + potential, sines.T @ ((w * x)[:, None] * sines)])


def states(p):
    n = p["size"]
    h0, h1 = np.diag(np.array(p["energies"])), np.zeros((n, n))
    for i, j, c in p["couples"]:
        h0[i, j] = h0[j, i] = c
    for i, c in p["shifts"]:
        h1[i, i] = c
    return Powers([h0, h1])


SOLVERS = {
    "layers": Layers,
    "radial": Radial,
    "matrix": lambda p: Powers([entries(h) for h in p["h"]]),
    "spins": spins,
    "rotor": rotor,
    "oscillator": oscillator,
    "phase": phase,
    "interval": interval,
    "states": states,
}


# Drawing ---------------------------------------------------------------------


def system_text(p):
    kind = p["kind"]
    if kind in ("layers", "radial"):
        rows = []
        for k, (t, e, m) in enumerate(p["layers"]):
            e0, e1 = p["grades"][k] if "grades" in p else (None, None)
            edge = f"{e!r} eV" if e0 is None else f"{{from: {e0!r} eV, to: {e1!r} eV}}"
            rows.append(f"      - {{thickness: {t!r} nm, edge: {edge}, mass: {m!r}}}")
        word = "stack" if kind == "layers" else "shells"
        return (
            f"    kind: {kind}\n    charge: {p['charge']}\n    field: x\n    ends: {p['ends']}\n    {word}:\n" + "\n".join(rows)
        )
    if kind == "matrix":
        rows = "\n".join(f"    h{k}: {json.dumps(h)}" for k, h in enumerate(p["h"]))
        return f"    kind: matrix\n    unit: meV\n{rows}"
    if kind == "spins":
        names = [f"S{k}" for k in range(len(p["spins"]))]
        parts = ", ".join(f"{n}: spin {round(2 * j)}/2" for n, j in zip(names, p["spins"]))
        terms = [f"{c!r}*h*g*dot({names[a]}, {names[b]})" for a, b, c in p["couplings"]]
        terms += [f"{c!r}*h*g*{names[k]}.z^2" for k, c in p["axial"]]
        terms += [f"{g!r}*muB*x*{n}.z" for g, n in zip(p["g"], names)]
        tail = ""
        if "m" in p:
            tail = f"\n    conserved: {{m: {' + '.join(n + '.z' for n in names)}}}"
        else:
            terms += [f"{g!r}*muB*x*{t!r}*{n}.x" for g, t, n in zip(p["g"], p["tilt"], names)]
        return f"    kind: parts\n    parts: {{{parts}}}\n    hamiltonian: {' + '.join(terms)}{tail}"
    text = {
        "rotor": ("rotor", "{b!r}*h*g*P.sq - {dipole!r}*d*x*P.cos\n    conserved: {{m: P.z}}"),
        "oscillator": ("oscillator", "{quantum!r}*u*P.number + {quartic!r}*u*P.x^4 + {cubic!r}*u*P.x^3 + {drive!r}*u*x*P.x"),
        "phase": ("phase", "4*u*(P.number - x)^2 - {josephson!r}*u*P.cos"),
        "interval": ("interval -0.5 to 0.5", "P.p^2 + {bend!r}*P.x^2 + {cubic!r}*P.x^3 + x*P.x"),
    }
    if kind in text:
        part, hamiltonian = text[kind]
        return f"    kind: parts\n    parts: {{P: {part}}}\n    hamiltonian: " + hamiltonian.format(**p)
    terms = [f"{e!r}*u*P.projector({i + 1})" for i, e in enumerate(p["energies"])]
    terms += [f"{c!r}*u*P.couple({i + 1}, {j + 1})" for i, j, c in p["couples"]]
    terms += [f"{c!r}*u*x*P.projector({i + 1})" for i, c in p["shifts"]]
    return f"    kind: parts\n    parts: {{P: states {p['size']}}}\n    hamiltonian: {' + '.join(terms)}"


def spec_text(name, p, f):
    where = ""
    if p["kind"] == "radial":
        where = f", where: {{l: {p['l']}, m: {p['m']}}}"
    elif "m" in p:
        where = f", where: {{m: {p['m']}}}"
    constants = {"spins": "{g: 1 GHz}", "rotor": "{g: 1 GHz, d: 1 D}"}.get(p["kind"], "{u: 1 meV}")
    if p["kind"] == "interval":
        constants = "{}"
    terms = ", ".join(f"{{system: s, level: {n}{where}, times: {t!r}}}" for n, t in f["terms"])
    lines = [
        "spec: 1",
        f"name: {name}",
        "constants: " + constants,
        "systems:",
        "  s:",
        system_text(p),
        f"control: {{symbol: x, unit: {f['control']}, at: {f['at']!r}, within: [{f['within'][0]!r}, {f['within'][1]!r}]}}",
        "formulas:",
        "  f:",
        f"    unit: {f['unit']}",
        f"    sum: [{terms}]",
        f"    order: {f['order']}",
        f"    form: {f['form']}",
        f"    coefficients: {f['coefficients']}",
        f"    value: {f['value']}",
        f"    tolerance: {f['tolerance']!r}",
        "outputs: [{language: rust, number: f64}, {language: rust, number: f32}, {language: c, number: f64}, {language: c, number: f32}]",
    ]
    return "\n".join(lines) + "\n"


def problem(kind, r):
    """Numbers of a problem, control unit, unit, half width and scale of energies."""
    if kind == "layers":
        ends = r.choice(["wall", "wall", "decay"])
        n = r.choice([1, 2, 3]) if ends == "decay" else r.choice([0, 1, 2, 3])
        barrier = lambda: [digits(r.uniform(4, 14)), digits(r.uniform(0.18, 0.4)), digits(r.uniform(0.06, 0.12))]
        well = lambda: [digits(r.uniform(5, 11)), digits(r.uniform(0, 0.03)), digits(r.uniform(0.04, 0.09))]
        layers = [well()] if n == 0 else [barrier()] + [x for _ in range(n) for x in (well(), barrier())]
        grades = [[None, None]] * len(layers)
        if n and r.random() < 0.4:
            grades = list(grades)
            grades[1] = [0.0, digits(r.uniform(0.005, 0.03))]
        p = {"kind": kind, "ends": ends, "charge": r.choice([-1, 1]), "layers": layers, "grades": grades}
        return p, "kV/cm", "meV", digits(r.uniform(10, 60)), 30.0
    if kind == "radial":
        p = {"kind": kind, "ends": "wall", "charge": r.choice([-1, 1]), "l": 0, "m": 0}
        p["layers"] = [[digits(r.uniform(1.5, 4)), 0.0, digits(r.uniform(0.08, 0.14))], [digits(r.uniform(1, 3)), digits(r.uniform(0.2, 0.7)), digits(r.uniform(0.1, 0.2))]]
        l = r.choice([0, 1])
        p["l"], p["m"] = l, r.choice([0, l])
        return p, "kV/cm", "meV", digits(r.uniform(30, 200)), 80.0
    if kind == "matrix":
        n, whole = r.randint(2, 9), r.random() < 0.5
        def random_matrix(size, diagonal):
            a = [[0.0] * n for _ in range(n)]
            for i in range(n):
                for j in range(i):
                    z = [digits(r.gauss(0, size)), 0.0 if whole else digits(r.gauss(0, size))]
                    a[i][j] = z[0] if whole else z
                    a[j][i] = z[0] if whole else [z[0], -z[1]]
                a[i][i] = digits(diagonal(i))
            return a
        h = [random_matrix(0.6, lambda i: 3 * i + r.uniform(-1, 1)), random_matrix(0.5, lambda i: r.gauss(0, 1))]
        if r.random() < 0.4:
            h.append(random_matrix(0.1, lambda i: r.gauss(0, 0.1)))
        return {"kind": kind, "h": h}, "mV", "meV", digits(r.uniform(0.2, 1.5)), 3.0
    if kind == "spins":
        js = [r.choice([0.5, 1.0, 1.5]) for _ in range(r.choice([2, 2, 3]))]
        p = {"kind": kind, "spins": js, "g": [digits(r.uniform(-2, 2)) for _ in js], "axial": []}
        p["couplings"] = [[a, b, digits(r.uniform(1, 5))] for b in range(len(js)) for a in range(b)]
        if r.random() < 0.5:
            total = sum(js)
            p["m"] = total % 1 if total % 1 else r.choice([0, 1])
        else:
            p["axial"] = [[k, digits(r.uniform(-2, 2))] for k, j in enumerate(js) if j > 0.5]
            p["tilt"] = [digits(r.uniform(-1, 1)) for _ in js]
        return p, "mT", "GHz", digits(r.uniform(10, 60)), 2.0
    if kind == "rotor":
        p = {"kind": kind, "b": digits(r.uniform(2, 20)), "dipole": digits(r.uniform(0.2, 2)), "m": r.choice([0, 1])}
        return p, "kV/cm", "GHz", digits(r.uniform(1, 6)), p["b"]
    if kind == "oscillator":
        p = {"kind": kind, "quantum": digits(r.uniform(5, 20)), "quartic": digits(r.uniform(0.2, 2)), "cubic": digits(r.uniform(-0.5, 0.5)), "drive": digits(r.uniform(0.5, 2))}
        return p, "1", "meV", digits(r.uniform(1, 3)), p["quantum"]
    if kind == "phase":
        return {"kind": kind, "josephson": digits(r.uniform(2, 30))}, "1", "meV", digits(r.uniform(0.05, 0.2)), 4.0
    if kind == "interval":
        p = {"kind": kind, "bend": digits(r.uniform(-20, 40)), "cubic": digits(r.uniform(-20, 20))}
        return p, "1", "1", digits(r.uniform(5, 40)), 30.0
    n = r.randint(3, 6)
    p = {"kind": "states", "size": n, "energies": [digits(3 * i + r.uniform(-1, 1)) for i in range(n)]}
    p["couples"] = [[i, i + 1, digits(r.uniform(0.2, 1))] for i in range(n - 1)]
    p["shifts"] = [[i, digits(r.gauss(0, 1))] for i in range(1, n)]
    return p, "1", "meV", digits(r.uniform(0.2, 1)), 3.0


COUNTS = {"layers": 14, "radial": 4, "matrix": 14, "spins": 8, "rotor": 4, "oscillator": 4, "phase": 4, "interval": 4, "states": 4}


def formula(kind, p, control, unit, width, scale, r):
    at = digits(r.uniform(-0.3, 0.3) * width, 3) if kind != "radial" and r.random() < 0.6 else 0.0
    if kind == "spins" and "m" not in p:
        at = digits(r.choice([-1, 1]) * 2 * width, 3)
    f = {"control": control, "unit": unit, "at": at, "order": r.randint(1, 4), "form": "polynomial", "coefficients": "series"}
    f["within"] = [digits(at - width * r.uniform(0.3, 1), 3), digits(at + width * r.uniform(0.3, 1), 3)]
    f["value"] = r.choice(["absolute", "absolute", "shift"])
    f["tolerance"] = digits(scale * 10 ** r.uniform(-5, -2), 2)
    few = kind in ("layers", "radial") or kind == "matrix" and len(p["h"][0]) < 3
    f["terms"] = [[1 if few else r.choice([1, 1, 2]), 1.0]]
    if kind != "radial" and r.random() < 0.3 and not few:
        f["terms"] = [[2, 1.0], [1, -1.0]]
    dice = r.random()
    if dice < 0.15:
        f["coefficients"] = "minimax"
    elif dice < 0.4 and len(f["terms"]) == 1 and kind in ("matrix", "states"):
        f["form"] = r.choice(["paired", "auto"])
    return f


def draw(seed):
    r = random.Random(seed)
    out = []
    for kind, count in COUNTS.items():
        for number in range(count):
            name = f"{kind}{number}"
            p, control, unit, width, scale = problem(kind, r)
            f = formula(kind, p, control, unit, width, scale, r)
            fractions = sorted([0.0, 1.0] + [r.random() for _ in range(48)])
            one = {"name": name, "problem": p, "formula": f, "fractions": fractions, "relations": []}
            out.append(one)

            def variant(word, q, g, factors, subset=False):
                out.append({"name": f"{name}_{word}", "problem": q, "formula": g, "fractions": fractions, "relations": [{"of": name, "factors": factors, "inside": subset}]})

            variant("tight", p, {**f, "tolerance": digits(f["tolerance"] / r.uniform(1.5, 30), 2)}, [1.0] * 5, True)
            mirrored = {**f, "at": -f["at"], "within": [-f["within"][1], -f["within"][0]]}
            signs = [1.0, -1.0, 1.0, -1.0, 1.0]
            if kind == "layers":
                reverse = {**p, "layers": p["layers"][::-1], "grades": [[b, a] for a, b in p["grades"][::-1]]}
                variant("reversed", reverse, mirrored, signs)
                s = r.choice([0.5, 2.0])
                scaled = {**p, "layers": [[t * s, e, m / s**2] for t, e, m in p["layers"]]}
                variant("scaled", scaled, {**f, "at": f["at"] / s, "within": [x / s for x in f["within"]]}, [s**k for k in range(5)])
            if kind in ("layers", "radial"):
                variant("charge", {**p, "charge": -p["charge"]}, mirrored, signs)
    for one in out:
        one["spec"] = spec_text(one["name"], one["problem"], one["formula"])
    json.dump(out, sys.stdout)


# Judging ---------------------------------------------------------------------


def followed(solver, start, points, terms):
    """The sum over points that run away from `start`, each level carried along
    by the overlap of its eigenvector with that of the last step."""
    energies, vectors = np.linalg.eigh(solver.at(start))
    states = [vectors[:, n - 1] for n, _ in terms]
    levels = [energies[n - 1] for n, _ in terms]
    out, x = [], start
    span = abs(points[-1] - start) if points else 0.0
    for point in points:
        steps = max(1, math.ceil(abs(point - x) / (span / 15 + 1e-300)))
        for k in range(1, steps + 1):
            energies, vectors = np.linalg.eigh(solver.at(x + (point - x) * k / steps))
            for i, state in enumerate(states):
                best = int(np.argmax(np.abs(vectors.conj().T @ state)))
                states[i], levels[i] = vectors[:, best], energies[best]
        x = point
        out.append(sum(t * e for e, (_, t) in zip(levels, terms)))
    return out


def judge(specs, results):
    faults, worst = [], 0.0
    counted = {"values": 0, "relations": 0, "refused": []}
    for one in specs:
        name, f, result = one["name"], one["formula"], results[one["name"]]
        if "refused" in result:
            counted["refused"].append(f"{name}: {result['refused']}")
            continue
        record = result["record"]["formulas"]["f"]
        for relation in one["relations"]:
            other = results[relation["of"]]
            if "refused" in other:
                continue
            other = other["record"]["formulas"]["f"]
            for k in range(5):
                a, b, c = record["series"][k], other["series"][k], relation["factors"][k]
                allowed = record["uncertainty"][k] + abs(c) * other["uncertainty"][k] + 2e-11 * abs(a)
                counted["relations"] += 1
                if abs(a - c * b) > allowed:
                    faults.append(f"{name}: E{k} {a!r} against {c * b!r}, allowed {allowed:.1e}")
            if relation["inside"] and f["coefficients"] == "series" and f["form"] != "auto":
                mine, outer = record["valid"], other["valid"]
                slack = 2e-6 * (outer["to"] - outer["from"])
                if mine["from"] < outer["from"] - slack or mine["to"] > outer["to"] + slack:
                    faults.append(f"{name}: the range of the smaller tolerance {mine} leaves that of the larger {outer}")
        if one["relations"] and not one["relations"][0]["inside"]:
            continue
        solver = SOLVERS[one["problem"]["kind"]](one["problem"])
        terms = f["terms"]
        if one["problem"]["kind"] == "radial":
            # Counted within l; in the field-free block of m the channels stand side by side.
            size = solver.h0.shape[0] // CHANNELS
            shift = (one["problem"]["l"] - one["problem"]["m"]) * size
            own = np.linalg.eigvalsh(solver.h0[shift : shift + size, shift : shift + size] * 1e3)
            every = np.linalg.eigvalsh(solver.h0 * 1e3)
            terms = [[int(np.argmin(np.abs(every - own[n - 1]))) + 1, t] for n, t in terms]
        points, values, at = result["points"], result["values"], f["at"]
        above = [(x, v) for x, v in zip(points, values) if x >= at]
        below = [(x, v) for x, v in zip(points, values) if x < at][::-1]
        offset = 0.0
        if f["value"] == "shift":
            offset = followed(solver, at, [at], terms)[0]
        # The parts are largest at different places; their sum never exceeds the tolerance.
        stated = min(sum(record["error"].values()), record["tolerance"]) + result["rounding"]
        # What the dense solve itself may be wrong by, of the largest energy in it.
        scale = np.abs(np.linalg.eigvalsh(solver.at(at))).max() * 4e-14
        for side in (above, below):
            exact = followed(solver, at, [x for x, _ in side], terms)
            for (x, v), e in zip(side, exact):
                counted["values"] += 1
                error = abs(v - (e - offset))
                worst = max(worst, error / (stated + scale))
                if error > stated * (1 + 1e-6) + scale:
                    faults.append(f"{name}: at {x} the value {v} differs from {e - offset} by {error:.3e}, stated {stated:.3e}")
                    break
    print(f"{counted['values']} values, {counted['relations']} relations; largest error over stated error {worst:.6f}")
    print(f"{len(counted['refused'])} of {len(specs)} refused", *counted["refused"], sep="\n")
    for fault in faults:
        print("FAULT", fault)
    if len(counted["refused"]) * 20 > len(specs):
        faults.append("more than one in twenty is refused")
    sys.exit(1 if faults else 0)


if sys.argv[1] == "draw":
    draw(int(sys.argv[2]))
else:
    judge(json.load(open(sys.argv[2])), json.load(open(sys.argv[3])))
