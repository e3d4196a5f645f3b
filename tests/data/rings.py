"""Random geodesic rings on WGS 84, shared by the scripts of this folder.

Made with Python 3.11, numpy==2.4.6, pyproj==3.7.2, geographiclib==2.1.
"""
import math

import numpy as np
import pyproj
from geographiclib.geodesic import Geodesic

G = Geodesic.WGS84
GEOD = pyproj.Geod(ellps="WGS84")
POLES = {"north_pole": 90.0, "south_pole": -90.0}


def place(kind, radius, rng):
    """Random centre for a ring of this kind, radius in metres."""
    deg = radius / 111e3
    lat, lon = math.degrees(math.asin(rng.uniform(-1, 1))), rng.uniform(-180, 180)
    if kind in ("north", "south"):
        lat = rng.uniform(1.2 * deg + 1, 80) * (1 if kind == "north" else -1)
    elif kind == "equator":
        lat = rng.uniform(-0.3, 0.3) * deg
    elif kind == "antimeridian":
        lat = rng.uniform(1.2 * deg + 1, 75) * rng.choice((-1, 1))
        end = G.Direct(lat, 180, 90, rng.uniform(-0.3, 0.3) * radius)
        lat, lon = end["lat2"], end["lon2"]
    elif kind in POLES:
        end = G.Direct(POLES[kind], 0, lon, rng.uniform(0, 0.2) * radius)
        lat, lon = end["lat2"], end["lon2"]
    return lat, lon


def star(lat, lon, radius, count, widest, rng):
    """Star-shaped ring round the centre: azimuths decrease (counter-clockwise)
    by less than `widest` degrees, distances are 0.4 to 1 of the radius."""
    while True:
        azi = np.sort(rng.uniform(0, 360, count))[::-1]
        gap = -np.diff(np.append(azi, azi[0] - 360))
        if gap.max() < widest and gap.min() > 5:
            break
    ends = [G.Direct(lat, lon, float(z), float(d)) for z, d in
            zip(azi, radius * rng.uniform(0.4, 1, count))]
    return [(e["lat2"], e["lon2"]) for e in ends]


def belongs(pts, kind):
    """Is the ring of its kind?  The turn in longitude tells whether a pole is
    strictly inside."""
    lats = [p[0] for p in pts]
    step = [q[1] - p[1] for p, q in zip(pts, pts[1:] + pts[:1])]
    turn = round(sum((d + 180) % 360 - 180 for d in step))
    side = {"north": min(lats) > 0, "south": max(lats) < 0,
            "equator": min(lats) < 0 < max(lats),
            "antimeridian": max(map(abs, step)) > 180}.get(kind, True)
    return turn == POLES.get(kind, 0) * 4 and side


def draw(kind, shortest, longest, counts, widest, rng):
    """Ring of this kind with its centre and radius (log-uniform, metres)."""
    while True:
        radius = shortest * (longest / shortest) ** rng.uniform()
        lat, lon = place(kind, radius, rng)
        pts = star(lat, lon, radius, int(rng.choice(counts)), widest, rng)
        if belongs(pts, kind):
            return lat, lon, radius, pts


def library_area(pts):
    """Polygon area, positive (so counter-clockwise), checked against pyproj."""
    poly = G.Polygon()
    for lat, lon in pts:
        poly.AddPoint(lat, lon)
    area = poly.Compute(False, True)[2]
    other = GEOD.polygon_area_perimeter([p[1] for p in pts], [p[0] for p in pts])[0]
    assert area > 0 and abs(other - area) < max(1e-9 * area, 0.1)
    return area


def text(pairs):
    return ";".join(f"{float(x)!r} {float(y)!r}" for x, y in pairs)
