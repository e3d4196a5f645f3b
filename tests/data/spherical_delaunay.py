"""Reference table: Delaunay faces of station networks on the sphere.

Run from the repository root: python3 tests/data/spherical_delaunay.py
Made with Python 3.11, numpy==2.4.6, scipy==1.17.1.

Stations are points of the unit sphere (latitude and longitude read as on a
sphere, rounded to 5 decimals first).  The faces are those of the convex hull of
the unit vectors; every hull face is written, in rows `network,kind,a,b,c`:
    station  a = index, b = latitude, c = longitude (degrees)
    face     a, b, c = station indices, counter-clockwise seen from outside the
             hull, smallest index first.
For a network on a small cap the hull also has back faces, whose circumscribed
cap is the larger side of the sphere; the reader drops the faces whose cap
contains the antipode of its projection centre.

General position: a network is drawn again while any four of its stations have
|det(b-a, c-a, d-a)| <= FOUR * L^4 or <= ROUNDING * L^2 (L the longest of the six
chords; doubles err by about 2e-16 L^2), or any station comes closer to the
plane of a face than FACE * r^2 (r the radius of the circle through its corners).
"""
import csv
import math
from itertools import combinations
from pathlib import Path

import numpy as np
from scipy.spatial import ConvexHull

EARTH = 6371.0  # km, only to size the networks
FOUR = 1e-10
ROUNDING = 1e-13
FACE = 1e-4


def vectors(lat, lon):
    la, lo = np.radians(lat), np.radians(lon)
    return np.column_stack((np.cos(la) * np.cos(lo), np.cos(la) * np.sin(lo), np.sin(la)))


def cap(rng, lat, lon, radius, count):
    """Stations uniform on the cap of this angular radius (degrees)."""
    z = rng.uniform(math.cos(math.radians(radius)), 1, count)
    t = rng.uniform(0, 2 * np.pi, count)
    r = np.sqrt(1 - z * z)
    up = vectors([lat], [lon])[0]
    east = vectors([0], [lon + 90])[0]
    v = np.outer(z, up) + np.outer(r * np.cos(t), east) + np.outer(r * np.sin(t), np.cross(up, east))
    return np.column_stack((np.degrees(np.arcsin(v[:, 2])), np.degrees(np.arctan2(v[:, 1], v[:, 0]))))


def box(rng, lat0, lat1, lon0, lon1, count):
    lon = (rng.uniform(lon0, lon1, count) + 180) % 360 - 180
    return np.column_stack((rng.uniform(lat0, lat1, count), lon))


def pair(rng):
    """Two dense clusters 400 km apart and a thin scatter round both."""
    km = math.degrees(1 / EARTH)
    lon = 200 * km / math.cos(math.radians(45))
    return np.vstack((cap(rng, 45, 9 - lon, 15 * km, 30), cap(rng, 45, 9 + lon, 15 * km, 30),
                      cap(rng, 45, 9, 400 * km, 20)))


NETWORKS = {
    "regional": lambda rng: cap(rng, 47, 8, math.degrees(150 / EARTH), 60),
    "antimeridian": lambda rng: box(rng, -20, -16, 178, 182, 50),
    "pole": lambda rng: cap(rng, 90, 0, 7.9, 60),
    "wide": lambda rng: cap(rng, 48, 12, 60, 90),
    "pair_clusters": pair,
}


def four_margin(v):
    """Least determinant of any four stations, over L^4 and over L^2."""
    q = np.array(list(combinations(range(len(v)), 4)))
    p = v[q]
    det = np.abs(np.linalg.det(p[:, 1:] - p[:, :1]))
    side = np.max([((p[:, i] - p[:, j]) ** 2).sum(1) for i, j in combinations(range(4), 2)], axis=0)
    return float((det / side ** 2).min()), float((det / side).min())


def hull_faces(v):
    """Outward counter-clockwise hull faces, and the least depth of another
    station below a face's plane, over the square of the face's circumradius."""
    tri = ConvexHull(v).simplices
    inner = v.mean(0)
    faces, margin = [], np.inf
    for t in tri.tolist():
        a, b, c = v[t]
        n = np.cross(b - a, c - a)
        if n @ (a - inner) < 0:
            t, n = [t[0], t[2], t[1]], -n
        sides = [np.linalg.norm(x) for x in (b - a, c - b, a - c)]
        radius = math.prod(sides) / (2 * np.linalg.norm(n))
        depth = (a - np.delete(v, t, axis=0)) @ (n / np.linalg.norm(n))
        margin = min(margin, float(depth.min()) / radius ** 2)
        k = t.index(min(t))
        faces.append(tuple(t[k:] + t[:k]))
    return sorted(faces), margin


def main():
    rows = []
    for seed, (name, make) in enumerate(NETWORKS.items()):
        rng = np.random.default_rng(20261201 + seed)
        tries = 0
        while True:
            tries += 1
            pts = np.round(make(rng), 5)
            v = vectors(pts[:, 0], pts[:, 1])
            faces, depth = hull_faces(v)
            four, two = four_margin(v)
            if four > FOUR and two > ROUNDING and depth > FACE:
                break
        # every station is a corner, the hull is closed and fully triangular
        assert len({i for f in faces for i in f}) == len(pts)
        assert len(faces) == 2 * len(pts) - 4
        edges = [(f[i], f[i - 2]) for f in faces for i in range(3)]
        assert len(set(edges)) == len(edges) and {(b, a) for a, b in edges} == set(edges)
        print(f"{name}: {len(pts)} stations, {len(faces)} faces, draw {tries}, "
              f"least of four {four:.1e} L^4, {two:.1e} L^2, least face depth {depth:.1e}")
        rows += [(name, "station", i, repr(float(p[0])), repr(float(p[1]))) for i, p in enumerate(pts)]
        rows += [(name, "face", *f) for f in faces]
    with open(Path(__file__).with_suffix(".csv"), "w", newline="") as out:
        w = csv.writer(out, lineterminator="\n")
        w.writerow(("network", "kind", "a", "b", "c"))
        w.writerows(rows)


if __name__ == "__main__":
    main()
