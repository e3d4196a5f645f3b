"""Reference table: least-squares fits to the winds of polygons in a plane.

Run from the repository root: python3 tests/data/plane_fit.py
Made with Python 3.11, numpy==2.4.6.

60 star-shaped polygons of 4 to 14 stations (x, y in m) with winds (u, v in
m/s), 5 to 200 km in radius.  vorticity and divergence: of the linear fit
(numpy.linalg.lstsq on 1, x, y).  quadratic_vorticity and quadratic_divergence:
of the fit on 1, x, y, x^2, x y, y^2 at the centroid of the polygon's area, which
is their area mean; empty for fewer than 8 stations or a condition number over
300 of the design matrix with x, y counted from the mean station in units of the
root mean square distance from it.

Accuracy: linear fits agree with the closed form to 1e-12 of the largest term.
"""
import csv
from pathlib import Path

import numpy as np


def centroid(x, y):
    xn, yn = np.roll(x, -1), np.roll(y, -1)
    c = x * yn - xn * y
    a = c.sum() / 2
    return ((x + xn) * c).sum() / (6 * a), ((y + yn) * c).sum() / (6 * a)


def main():
    rng = np.random.default_rng(20260502)
    path = Path(__file__).with_name("plane_fit.csv")
    with path.open("w", newline="") as file:
        out = csv.writer(file, lineterminator="\n")
        out.writerow(["places", "winds", "vorticity", "divergence", "condition",
                      "quadratic_vorticity", "quadratic_divergence"])
        for k in range(60):
            n = 4 + k % 11
            radius = 10 ** rng.uniform(np.log10(5e3), np.log10(2e5))
            angle = (np.arange(n) + rng.uniform(-0.3, 0.3, n)) * 2 * np.pi / n
            r = radius * rng.uniform(0.4, 1.0, n)
            x, y = np.round(r * np.cos(angle), 1), np.round(r * np.sin(angle), 1)
            u, v = np.round(rng.normal(3, 4, n), 3), np.round(rng.normal(-2, 4, n), 3)
            one = np.ones(n)
            fit = [np.linalg.lstsq(np.c_[one, x, y], w, rcond=None)[0] for w in (u, v)]
            row = [fit[1][1] - fit[0][2], fit[0][1] + fit[1][2]]
            sx, sy = x - x.mean(), y - y.mean()
            s = np.sqrt((sx**2 + sy**2).mean())
            sx, sy = sx / s, sy / s
            design = np.c_[one, sx, sy, sx**2, sx * sy, sy**2]
            condition = np.linalg.cond(design) if n >= 6 else np.inf
            row.append(condition)
            if n >= 8 and condition <= 300:
                cx, cy = centroid(sx, sy)
                a, b = (np.linalg.lstsq(design, w, rcond=None)[0] for w in (u, v))
                dx = lambda q: (q[1] + 2 * q[3] * cx + q[4] * cy) / s
                dy = lambda q: (q[2] + q[4] * cx + 2 * q[5] * cy) / s
                row += [dx(b) - dy(a), dx(a) + dy(b)]
            pairs = lambda p, q: ";".join(f"{a!r} {b!r}" for a, b in zip(p.tolist(), q.tolist()))
            out.writerow([pairs(x, y), pairs(u, v)] + [repr(float(z)) for z in row] + [""] * (5 - len(row)))


main()
