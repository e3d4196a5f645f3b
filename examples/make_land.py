"""Makes src/output/plot/land.bin, the land behind the maps, from Natural Earth 1:10 million (public domain).

    npm install world-atlas@2.0.2          # Natural Earth 4.1 as TopoJSON
    python examples/make_land.py node_modules/world-atlas/land-10m.json src/output/plot/land.bin

Needs Python 3 and `zstandard`. Rings are simplified (Douglas & Peucker 1973) to TOLERANCE degrees, islands smaller than
SMALLEST square degrees are dropped. The file is a Zstandard frame of: for each ring the number of points and its points,
all as LEB128 numbers; coordinates are zigzag differences of longitude and latitude in thousandths of a degree, the
first point's from 0, 0. Every ring runs clockwise seen from above, outlines and holes alike.
"""

import json
import math
import sys

import zstandard

TOLERANCE = 0.004
SMALLEST = 0.00002
UNITS = 1000


def rings(topology):
    scale, shift = topology["transform"]["scale"], topology["transform"]["translate"]
    arcs = []
    for arc in topology["arcs"]:
        x = y = 0
        points = []
        for dx, dy in arc:
            x, y = x + dx, y + dy
            points.append((x * scale[0] + shift[0], y * scale[1] + shift[1]))
        arcs.append(points)
    for geometry in topology["objects"]["land"]["geometries"]:
        polygons = geometry["arcs"] if geometry["type"] == "MultiPolygon" else [geometry["arcs"]]
        for polygon in polygons:
            for number_of_ring, ring in enumerate(polygon):
                points = []
                for number in ring:
                    arc = arcs[number] if number >= 0 else arcs[~number][::-1]
                    points.extend(arc[1:] if points else arc)
                # Outlines run clockwise on the sphere, as TopoJSON has them; holes are turned round to do the same.
                yield points if number_of_ring == 0 else points[::-1]


def simplified(points):
    """Points of an open line that keep it within TOLERANCE."""
    keep = {0, len(points) - 1}
    stack = [(0, len(points) - 1)]
    while stack:
        a, b = stack.pop()
        (ax, ay), (bx, by) = points[a], points[b]
        shrink = math.cos(math.radians(min(abs(ay), 85.0)))
        dx, dy = (bx - ax) * shrink, by - ay
        length = math.hypot(dx, dy)
        worst, at = 0.0, None
        for k in range(a + 1, b):
            px, py = (points[k][0] - ax) * shrink, points[k][1] - ay
            if length > 0:
                along = max(0.0, min(1.0, (px * dx + py * dy) / length**2))
                distance = math.hypot(px - along * dx, py - along * dy)
            else:
                distance = math.hypot(px, py)
            if distance > worst:
                worst, at = distance, k
        if worst > TOLERANCE:
            keep.add(at)
            stack += [(a, at), (at, b)]
    return [points[k] for k in sorted(keep)]


def area(points):
    return 0.5 * sum(a[0] * b[1] - b[0] * a[1] for a, b in zip(points, points[1:] + points[:1]))


def leb128(number):
    out = bytearray()
    while True:
        out.append(number & 0x7F | (0x80 if number > 0x7F else 0))
        number >>= 7
        if not number:
            return bytes(out)


def main():
    source, target = sys.argv[1:]
    out = bytearray()
    count = 0
    for ring in rings(json.load(open(source))):
        half = len(ring) // 2
        points = simplified(ring[: half + 1])[:-1] + simplified(ring[half:])
        cells = []
        for x, y in points:
            cell = (round(x * UNITS), round(y * UNITS))
            if not cells or cells[-1] != cell:
                cells.append(cell)
        if cells[0] == cells[-1]:
            cells.pop()
        if len(cells) < 3 or abs(area(points)) < SMALLEST:
            continue
        out += leb128(len(cells))
        before = (0, 0)
        for cell in cells:
            for now, last in zip(cell, before):
                step = now - last
                out += leb128(2 * step if step >= 0 else -2 * step - 1)
            before = cell
        count += len(cells)
    packed = zstandard.ZstdCompressor(level=22).compress(bytes(out))
    open(target, "wb").write(packed)
    print(f"{count} points, {len(out)} bytes, {len(packed)} packed")


main()
