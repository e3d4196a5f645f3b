"""Reference table: rotational, divergent and harmonic part of winds on triangles.

Run from the repository root: python3 tests/data/helmholtz.py
Made with Python 3.11, numpy==2.4.6, scipy==1.17.1.

Three meshes of random points (x, y in m) with winds (u, v in m/s): Delaunay
triangles (scipy.spatial) of 40 points; the same without four of its triangles,
inside, so that it has holes; 25 points in a strip.  For each the linear finite
elements are assembled from the Jacobian of each triangle (numpy.linalg.inv), the
unknowns of the inner nodes solved for with scipy.sparse.linalg.spsolve.

Rows: kind "node": x, y, u, v, psi, chi; "triangle": its three nodes; "energy":
means over the area of 1/2 |V|^2, V the mean of a triangle's winds, and of its
rotational, divergent and harmonic part.  psi = chi = 0 at the boundary.

Accuracy: residuals of the solutions are 3e-16 of the right sides (printed).
"""
import csv
from collections import Counter
from pathlib import Path

import numpy as np
from scipy.sparse import coo_matrix
from scipy.sparse.linalg import spsolve
from scipy.spatial import Delaunay

REFERENCE = np.array([[-1.0, -1.0], [1.0, 0.0], [0.0, 1.0]])


def split(points, triangles, winds):
    n = len(points)
    sides = Counter(tuple(sorted(s)) for t in triangles for s in ((t[0], t[1]), (t[1], t[2]), (t[2], t[0])))
    rim = {node for side, count in sides.items() if count == 1 for node in side}
    inner = np.array([k for k in range(n) if k not in rim])
    rows, columns, values = [], [], []
    to_chi, to_psi = np.zeros(n), np.zeros(n)
    parts = []
    for t in triangles:
        jacobian = np.array([points[t[1]] - points[t[0]], points[t[2]] - points[t[0]]]).T
        area = abs(np.linalg.det(jacobian)) / 2
        gradients = REFERENCE @ np.linalg.inv(jacobian)
        mean = winds[t].mean(axis=0)
        turned = np.column_stack([-gradients[:, 1], gradients[:, 0]])
        stiffness = area * gradients @ gradients.T
        for i in range(3):
            to_chi[t[i]] += area * mean @ gradients[i]
            to_psi[t[i]] += area * mean @ turned[i]
            for j in range(3):
                rows.append(t[i])
                columns.append(t[j])
                values.append(stiffness[i, j])
        parts.append((area, gradients, turned, mean))
    matrix = coo_matrix((values, (rows, columns)), shape=(n, n)).tocsr()[inner][:, inner].tocsc()
    psi, chi = np.zeros(n), np.zeros(n)
    psi[inner], chi[inner] = spsolve(matrix, to_psi[inner]), spsolve(matrix, to_chi[inner])
    for solution, side in ((psi, to_psi), (chi, to_chi)):
        print(np.abs(matrix @ solution[inner] - side[inner]).max() / np.abs(side).max())
    energies, total = np.zeros(4), 0.0
    for t, (area, gradients, turned, mean) in zip(triangles, parts):
        rotational, divergent = psi[t] @ turned, chi[t] @ gradients
        fields = (mean, rotational, divergent, mean - rotational - divergent)
        energies += [area * field @ field / 2 for field in fields]
        total += area
    return psi, chi, energies / total


def main():
    rng = np.random.default_rng(20260607)
    forty = np.round(rng.uniform(0, [2e5, 1.5e5], (40, 2)), 1)
    strip = np.round(rng.uniform(0, [4e5, 6e4], (25, 2)), 1)
    whole = Delaunay(forty).simplices
    hull = set(Delaunay(forty).convex_hull.ravel())
    inside = [k for k, t in enumerate(whole) if not hull & set(t)]
    holed = np.delete(whole, rng.choice(inside, 4, replace=False), axis=0)
    path = Path(__file__).with_name("helmholtz.csv")
    with path.open("w", newline="") as file:
        out = csv.writer(file, lineterminator="\n")
        out.writerow(["kind", "mesh", "a", "b", "c", "d", "e", "f"])
        for name, points, triangles in (
            ("whole", forty, whole), ("holes", forty, holed), ("strip", strip, Delaunay(strip).simplices),
        ):
            winds = np.round(rng.normal([3.0, -2.0], 4.0, points.shape), 3)
            psi, chi, energies = split(points, triangles, winds)
            number = lambda values: [repr(float(v)) for v in values]
            for k in range(len(points)):
                out.writerow(["node", name] + number([*points[k], *winds[k], psi[k], chi[k]]))
            for t in triangles:
                out.writerow(["triangle", name, *t.tolist(), "", "", ""])
            out.writerow(["energy", name] + number(energies) + ["", ""])


main()
