"""Reference table: kinematics of plane polygons from winds at their vertices.

Run from the repository root: python3 tests/data/kinematics.py
Made with Python 3.11, numpy==2.4.6.

120 polygons of 3 to 6 vertices, 40 m to 250 m across, so that the Earth is flat to
1e-9, counter-clockwise, the mean of the vertices at the origin.  Each has a wind of
a random velocity gradient plus a part of its own at each vertex, and a covariance
of the errors of u and v at each vertex, independent between vertices.

Mean wind and gradient are integrals along the outline, by sums over 4,000 pieces of
each edge on which the wind is interpolated: grad = closed integral of u n ds / A,
mean = closed integral of u (r - c).n ds / (2 A), c the centroid.  The other
quantities come from the eigenvalues and eigenvectors of the gradient and of its
symmetric part, and from its components along and across the wind.  Errors are
sqrt(J C J'), J by central differences of the whole computation in each wind.
Okubo-Weiss and what follows from it are corrected for what the errors add,
var(stretching) + var(shearing) - var(vorticity); the table holds the value before
(okubo_weiss_raw) and after, with half of the second-order term, 2 tr (Q C)^2, in the
error of the latter: Q = diag(-1, 1, 1) for vorticity, stretching and shearing.

f is 1.0640e-4 s-1 in the stretching of absolute vorticity; the test compares with f
as an argument.
"""
import csv
from pathlib import Path

import numpy as np

F = 1.0640e-4
PIECES = 4000


def forms(p):
    """Matrix (3 x n): weights of each vertex in mean, d/dx and d/dy."""
    n = len(p)
    q = np.roll(p, -1, axis=0)
    cross = p[:, 0] * q[:, 1] - q[:, 0] * p[:, 1]
    area = cross.sum() / 2
    c = ((p + q) * cross[:, None]).sum(axis=0) / (6 * area)
    w = np.zeros((3, n))
    s = (np.arange(PIECES) + 0.5) / PIECES
    for k in range(n):
        d = q[k] - p[k]
        normal = np.array([d[1], -d[0]])  # outward, times the length
        r = p[k] + s[:, None] * d
        for vertex, shape in ((k, 1 - s), ((k + 1) % n, s)):
            w[0, vertex] += (shape * ((r - c) @ normal)).mean() / (2 * area)
            w[1:, vertex] += shape.mean() * normal / area
    return w, area


def state(w, wind):
    (u, v) = w[0] @ wind
    g = w[1:] @ wind  # g[a, b] = d wind_b / d x_a
    return u, v, g.T  # rows: component, columns: direction


def quantities(w, wind):
    u, v, g = state(w, wind)
    speed = np.hypot(u, v)
    e = np.array([u, v]) / speed
    n = np.array([-e[1], e[0]])
    sym = (g + g.T) / 2
    rates, axes = np.linalg.eigh(sym)
    widest = axes[:, 1]
    zeta, div = g[1, 0] - g[0, 1], np.trace(g)
    eig = np.linalg.eigvals(g)
    ow = np.real((eig[0] - eig[1]) ** 2)
    return dict(
        mean_u=u, mean_v=v, mean_speed=speed,
        mean_direction=np.degrees(np.arctan2(-u, -v)) % 360,
        stretching=g[0, 0] - g[1, 1], shearing=g[1, 0] + g[0, 1],
        total_deformation=rates[1] - rates[0],
        dilatation_axis=np.degrees(np.arctan2(widest[0], widest[1])) % 180,
        curvature_vorticity=n @ g @ e, shear_vorticity=-(e @ g @ n),
        diffluence=n @ g @ n, downwind_acceleration=e @ g @ e,
        okubo_weiss_raw=ow, contraction_rate=-rates[0],
        vorticity_stretching=-(zeta + F) * div,
        vorticity=zeta, divergence=div,
    )


PERIOD = dict(mean_direction=360, dilatation_axis=180)


def errors(w, wind, cov):
    """First-order errors and the full covariance matrix's parts that are needed."""
    base = quantities(w, wind)
    var = dict.fromkeys(base, 0.0)
    for k in range(len(wind)):
        jac = {name: np.zeros(2) for name in base}
        for c in range(2):
            h = 1e-4
            up, down = wind.copy(), wind.copy()
            up[k, c] += h
            down[k, c] -= h
            a, b = quantities(w, up), quantities(w, down)
            for name in base:
                d = a[name] - b[name]
                if name in PERIOD:
                    p = PERIOD[name]
                    d = (d + p / 2) % p - p / 2
                jac[name][c] = d / (2 * h)
        for name in base:
            var[name] += jac[name] @ cov[k] @ jac[name]
    return base, {name: np.sqrt(v) for name, v in var.items()}


def rotation_and_strain(w, cov):
    """Covariance of vorticity, stretching and shearing, linear forms of the winds."""
    x, y = w[1], w[2]
    rows = np.array([np.column_stack(r) for r in ((-y, x), (x, -y), (y, x))])
    return np.einsum("ikc,kcd,jkd->ij", rows, cov, rows)


def main():
    rng = np.random.default_rng(20261202)
    rows, names = [], None
    for number in range(120):
        n = 3 + number % 4
        while True:
            angles = np.sort(rng.uniform(0, 2 * np.pi, n))
            gaps = np.diff(np.append(angles, angles[0] + 2 * np.pi))
            if gaps.max() < 2.6 and gaps.min() > 0.35:
                break
        p = rng.uniform(40, 120) * rng.uniform(0.6, 1, n)[:, None]
        p = p * np.column_stack([np.cos(angles), np.sin(angles)])
        p -= p.mean(axis=0)
        g = rng.normal(0, 0.03, (2, 2))
        mean = rng.uniform(3, 9) * np.array([np.cos(t := rng.uniform(0, 6.28)), np.sin(t)])
        wind = mean + p @ g.T + rng.normal(0, 0.3, (n, 2))
        roots = rng.normal(0, 0.01, (n, 2, 2))
        cov = roots @ roots.transpose(0, 2, 1)
        w, _ = forms(p)
        base, se = errors(w, wind, cov)
        base["okubo_weiss"] = (base["okubo_weiss_raw"] - se["stretching"] ** 2
                               - se["shearing"] ** 2 + se["vorticity"] ** 2)
        q = np.diag([-1.0, 1.0, 1.0]) @ rotation_and_strain(w, cov)
        se["okubo_weiss"] = np.sqrt(se["okubo_weiss_raw"] ** 2 + np.trace(q @ q))
        names = names or list(base)
        join = lambda a: ";".join(" ".join(repr(float(x)) for x in row) for row in a)
        three = np.column_stack([cov[:, 0, 0], cov[:, 0, 1], cov[:, 1, 1]])
        rows.append((number, join(p), join(wind), join(three),
                     *(repr(float(d[k])) for k in names for d in (base, se))))
    with open(Path(__file__).with_suffix(".csv"), "w", newline="") as out:
        w = csv.writer(out, lineterminator="\n")
        w.writerow(("polygon", "vertices", "winds", "covariances",
                    *(name for k in names for name in (k, k + "_se"))))
        w.writerows(rows)


if __name__ == "__main__":
    main()
