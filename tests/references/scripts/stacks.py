"""Reference values for layer stacks, by a method that the program does not use.

Each stack has hard walls and piecewise constant edge and mass. In a uniform
field the envelope in a layer obeys psi'' = (alpha + beta x) psi (Airy's
equation); it is carried from wall to wall by its power series with mpmath at
60 digits, so that E(F) is a root of psi(end) = 0. Coefficients come from central
differences at that precision, range ends from root finding on the exact level.

    python3 stacks.py > ../data/stacks.json

Layer thicknesses, edges and masses are drawn from a fixed seed; no one chose
them to suit the program. Constants: CODATA 2022.
"""

import json
import random

from mpmath import findroot, mp, mpf

mp.dps = 50
H = mpf("6.62607015e-34")
E = mpf("1.602176634e-19")
ME = mpf("9.1093837139e-31")
# 2 me / hbar^2 in 1/(eV nm^2)
KAPPA = 2 * ME * E / (H / (2 * mp.pi)) ** 2 * mpf(10) ** -18


def carry(psi, flux, alpha, beta, length, mass):
    """(psi, psi'/m) over one layer by the power series of the equation."""
    # psi = sum c_n x^n, c_{n+2} (n+2)(n+1) = alpha c_n + beta c_{n-1}
    c_prev, c0, c1 = mpf(0), psi, flux * mass
    value, slope = mpf(0), mpf(0)
    power = mpf(1)
    terms = [c_prev, c0, c1]
    n = 0
    eps = mpf(10) ** (-mp.dps - 5)
    small = 0
    while True:
        c_n = terms[1]
        value += c_n * power
        slope += terms[2] * (n + 1) * power
        nxt = (alpha * terms[1] + beta * terms[0]) / ((n + 2) * (n + 1))
        terms = [terms[1], terms[2], nxt]
        power *= length
        n += 1
        size = abs(terms[1]) * power
        small = small + 1 if size < eps * (abs(value) + eps) else 0
        if small > 4:
            return value, slope / mass


class Stack:
    def __init__(self, layers, charge):
        self.layers = [(mpf(t), mpf(e), mpf(m)) for t, e, m in layers]
        self.charge = charge
        self.centre = sum(t for t, _, _ in self.layers) / 2

    def end(self, energy, field):
        """psi at the far wall; field in kV/cm."""
        f = field * mpf("1e-4") * self.charge  # eV/nm
        psi, flux, z = mpf(0), mpf(1), -self.centre
        for thickness, edge, mass in self.layers:
            start = edge - f * z
            scale = KAPPA * mass
            psi, flux = carry(psi, flux, scale * (start - energy), -scale * f, thickness, mass)
            z += thickness
        return psi

    def level(self, field, guess):
        return findroot(lambda e: self.end(e, field), (guess, guess * (1 + mpf("1e-9")) + mpf("1e-12")), tol=mpf(10) ** (-80), maxsteps=80, verify=False)

    def levels(self, count):
        """The first levels at zero field, by sign changes on a fine ladder."""
        found, e, step = [], mpf("1e-4"), mpf("2e-4")
        last = self.end(e, mpf(0))
        while len(found) < count:
            e += step
            now = self.end(e, mpf(0))
            if last * now < 0:
                found.append(findroot(lambda x: self.end(x, mpf(0)), (e - step, e), solver="anderson", tol=mpf(10) ** (-80), maxsteps=300, verify=False))
            last = now
        return found


def series(stack, e0):
    h = mpf("1e-3")  # kV/cm
    pts = {k: stack.level(k * h, e0) for k in (-3, -2, -1, 1, 2, 3)}
    pts[0] = e0
    a = (-pts[-3] + 9 * pts[-2] - 45 * pts[-1] + 45 * pts[1] - 9 * pts[2] + pts[3]) / (60 * h)
    b = (2 * pts[-3] - 27 * pts[-2] + 270 * pts[-1] - 490 * e0 + 270 * pts[1] - 27 * pts[2] + 2 * pts[3]) / (180 * h * h) / 2
    return a, b


def end_of_range(stack, e0, a, b, tolerance, side):
    """First field at which the parabola misses the level by the tolerance."""

    def miss(f, guess):
        exact = stack.level(f, guess)
        return e0 + a * f + b * f * f - exact, exact

    f, step, exact = mpf(0), mpf(2) * side, e0
    error_before = mpf(0)
    while abs(f) < 400:
        # the parabola is a good guess close by; else extrapolate from the last level
        error, exact = miss(f + step, e0 + a * (f + step) + b * (f + step) ** 2 - error_before)
        if abs(error) > tolerance:
            sign = 1 if error > 0 else -1
            g = lambda x: sign * miss(x, e0 + a * x + b * x * x - error)[0] - tolerance
            return findroot(g, (f if f else step / 100, f + step), solver="anderson", tol=mpf(10) ** -40, verify=False)
        f, error_before = f + step, error
    return None


def draw(rng, charge):
    layers = [(rng.randint(80, 130) / 10, rng.randint(180, 300) / 1000, rng.randint(80, 110) / 1000)]
    for _ in range(rng.randint(1, 3)):
        layers.append((rng.randint(30, 70) / 10, rng.randint(0, 60) / 1000, rng.randint(60, 80) / 1000))
    layers.append((rng.randint(80, 130) / 10, rng.randint(180, 300) / 1000, rng.randint(80, 110) / 1000))
    if charge > 0:
        layers = [(t, e / 1.5, m * 4) for t, e, m in layers]
    return [(t, round(e, 6), round(m, 6)) for t, e, m in layers]


def main():
    rng = random.Random(20261)
    out = []
    for k in range(6):
        charge = -1 if k < 4 else 1
        layers = draw(rng, charge)
        stack = Stack(layers, charge)
        for number, e0 in enumerate(stack.levels(2), start=1):
            a, b = series(stack, e0)
            tolerance = mpf("2e-5")
            out.append(
                {
                    "charge": charge,
                    "layers": layers,
                    "level": number,
                    "e0_ev": mp.nstr(e0, 20),
                    "a_ev_per_kv_cm": mp.nstr(a, 16),
                    "b_ev_per_kv_cm2": mp.nstr(b, 16),
                    "tolerance_ev": mp.nstr(tolerance, 5),
                    "from_kv_cm": mp.nstr(end_of_range(stack, e0, a, b, tolerance, -1), 14),
                    "to_kv_cm": mp.nstr(end_of_range(stack, e0, a, b, tolerance, 1), 14),
                }
            )
            print(k, number, out[-1], file=__import__("sys").stderr)
    print(json.dumps(out, indent=1))


if __name__ == "__main__":
    main()
