"""Reference table: circulation and outward flux of station winds round polygons.

Run from the repository root: python3 tests/data/line_integral.py
Made with Python 3.11, numpy==2.4.6, pyproj==3.7.2, geographiclib==2.1.

200 triangles, then 100 pentagons, counter-clockwise seen from above, with WGS 84
geodesics as edges, 2 km to 600 km in radius.  Of each ten polygons one lies over
the antimeridian; ten have the north pole inside and ten the south pole.  Winds
are eastward and northward components, m/s, at each vertex.

Rule for the edge from i to j, with length s and forward azimuths (direction of
travel) a at i and b at j:
    circulation += s/2 (u_i sin a + v_i cos a + u_j sin b + v_j cos b)
    flux        += s/2 (u_i cos a - v_i sin a + u_j cos b - v_j sin b)
vorticity = circulation / area, divergence = flux / area.

Accuracy: lengths and azimuths agree with pyproj to 1e-9 (relative; degree),
asserted below; the library states 15 nm for a length.  Measured: circulation and
flux, summed anew from pyproj's geodesics, agree to 5e-14 of the sum of their
terms' magnitudes.  area_m2 is off a quadrature of the same area by up to 0.005 m2
(2e-11 of a 2 km polygon), for rings round a pole by up to 0.06 m2 (2e-8 of a
2 km polygon); vorticity and divergence inherit that.
"""
import csv
import sys
from pathlib import Path

import numpy as np

sys.dont_write_bytecode = True
from rings import G, GEOD, draw, library_area, text  # noqa: E402


def kind_of(n):
    """The pole rings come from triangles and pentagons alike."""
    return {3: "north_pole", 13: "south_pole"}.get(n % 30, "antimeridian" if n % 10 == 7 else "any")


def geometry(pts):
    """Area, edge lengths, azimuths at both ends (radians), each checked."""
    far = pts[1:] + pts[:1]
    edges = [G.Inverse(*p, *q) for p, q in zip(pts, far)]
    s, a, b = (np.array([e[k] for e in edges]) for k in ("s12", "azi1", "azi2"))
    fwd, back, dist = GEOD.inv([p[1] for p in pts], [p[0] for p in pts],
                               [q[1] for q in far], [q[0] for q in far])
    assert np.allclose(dist, s, rtol=1e-9, atol=0)
    for mine, other in ((a, np.array(fwd)), (b, np.array(back) + 180)):
        assert np.all(np.abs((mine - other + 180) % 360 - 180) < 1e-9)
    return library_area(pts), s, np.radians(a), np.radians(b)


def sums(s, a, b, u, v):
    """Circulation and flux of many polygons at once; arrays are polygon x edge."""
    un, vn = np.roll(u, -1, axis=1), np.roll(v, -1, axis=1)
    circ = s / 2 * (u * np.sin(a) + v * np.cos(a) + un * np.sin(b) + vn * np.cos(b))
    flux = s / 2 * (u * np.cos(a) - v * np.sin(a) + un * np.cos(b) - vn * np.sin(b))
    return circ.sum(axis=1), flux.sum(axis=1)


def main():
    rng = np.random.default_rng(20261201)
    rows = []
    for count, first, last in ((3, 0, 200), (5, 200, 300)):
        # every other ring may have an azimuth gap up to 172 degrees: obtuse shapes
        rings = [draw(kind_of(n), 2e3, 600e3, (count,), (150, 172)[n // 2 % 2], rng)[3]
                 for n in range(first, last)]
        area, s, a, b = (np.array(x) for x in zip(*map(geometry, rings)))
        u, v = rng.uniform(-20, 20, (2, last - first, count))
        circ, flux = sums(s, a, b, u, v)
        for k, pts in enumerate(rings):
            numbers = (area[k], circ[k], flux[k], circ[k] / area[k], flux[k] / area[k])
            rows.append((first + k, text(pts), text(zip(u[k], v[k])),
                         *(repr(float(x)) for x in numbers)))
    with open(Path(__file__).with_suffix(".csv"), "w", newline="") as out:
        w = csv.writer(out, lineterminator="\n")
        w.writerow(("polygon", "vertices", "winds", "area_m2", "circulation", "flux",
                    "vorticity", "divergence"))
        w.writerows(rows)


if __name__ == "__main__":
    main()
