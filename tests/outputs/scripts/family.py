"""Exact levels of the two demo families by dense diagonalisation with numpy.

Each stack is written again from the comments of its spec and diagonalised at
every point. In: {"blind": [[F, well], ...], "pane": [[F, well, barrier], ...]}
on standard input, in kV/cm, nm and eV. Out: energies in meV per formula.
"""
import json, sys
from exact import KV_CM, flat, stack
import numpy as np


def blind(field, well):
    h0, h1 = stack([flat(12, 0.232, 0.0919), flat(well, 0.0, 0.0665), flat(12, 0.232, 0.0919)], -1)
    return {"level": np.linalg.eigvalsh(h0 + field * KV_CM * h1)[0] * 1e3}


def pane(field, well, barrier):
    layers = [flat(10, barrier, 0.0919), (well, (0.0, 0.02), (0.0665, 0.0665)), flat(10, barrier, 0.0919)]
    h0, h1 = stack(layers, -1)
    e = np.linalg.eigvalsh(h0 + field * KV_CM * h1)
    return {"line": (e[1] - e[0]) * 1e3, "base": e[0] * 1e3}


asked = json.load(sys.stdin)
out = {}
for name, points in asked.items():
    found = [{"blind": blind, "pane": pane}[name](*point) for point in points]
    out[name] = {formula: [one[formula] for one in found] for formula in found[0]}
json.dump(out, sys.stdout)
