"""Opens the results of `gyremesh estimate` with the tools that people use, and compares what they find.

    python check_results.py PROGRAM FOLDER

runs PROGRAM on the demo, writes into FOLDER, and stops at the first thing that is not as it should be.
"""

import functools
import json
import re
import subprocess
import sys
import warnings
from pathlib import Path

import duckdb
import geopandas
import numpy as np
import pandas as pd
import polars
import pyarrow.ipc
import pyarrow.parquet
import pyogrio
import pyproj
import shapely
import xarray as xr

with warnings.catch_warnings():
    # It says that it would be faster with a compiler.
    warnings.simplefilter("ignore")
    import xugrid

ROOT = Path(__file__).resolve().parents[2]
WGS84 = pyproj.Geod(ellps="WGS84")
ALL = ["--format", "csv,parquet,arrow,netcdf,geojson", "--kinematics"]

# What compliance-checker 6.1 says of a right file, all of it. Errors: it knows neither the roles of UGRID nor a second
# pair of coordinates beside a grid mapping. Warnings: CF 7.5 does not ask for the dimension that it misses.
ALLOWED_ERRORS = {
    f"grid mapping latitude_longitude requires exactly one variable with standard_name {name} to be defined"
    for name in ("longitude", "latitude")
} | {
    f"{role} is not a valid cf_role value. It must be one of timeseries_id, profile_id, trajectory_id"
    for role in ("face_node_connectivity", "mesh_topology")
}
# And where a region has a hole, it counts the rings where it means to count their dimensions.
ALLOWED_WARNING = re.compile(
    r"Parent variable '\w+' does not include geometry dimension 'ring_vertex' used in geometry variable 'geometry'"
    "|part_node_count variable ring_part_node_count must have the same single dimension as interior ring variable ring_is_hole"
)


def main(program, folder):
    demo = ROOT / "networks/ostrin/network.toml"
    folder.mkdir(parents=True, exist_ok=True)
    plain = run(program, demo, folder / "plain")
    tables(plain)
    statistics(plain)
    netcdf(plain)
    compliance(plain)
    mesh(plain)
    winds(plain)
    shapes(plain)
    # Triangles that come and go, and a region with a hole.
    hard = run(program, hard_network(program, demo, folder), folder / "hard")
    tables(hard)
    netcdf(hard)
    compliance(hard)
    mesh(hard)
    shapes(hard)
    summary = json.loads((hard / "summary.json").read_text())
    assert summary["polygons"]["filling_holes"] > 0
    print("all is as it should be")


def run(program, network, out):
    subprocess.run([program, "estimate", network, "--quiet", "--out", out, *ALL], check=True)
    return out


def hard_network(program, demo, folder):
    """Settings of the demo with `missing = "remesh"` and a region of all triangles but those round one station."""
    smallest_angle = ["--smallest-angle", "5"]
    subprocess.run([program, "polygons", demo, "--out", folder, *smallest_angle], check=True, stdout=subprocess.DEVNULL)
    triangles = read_csv(folder / "mesh.csv")
    triangles = triangles[(triangles.kind == "triangle") & triangles.excluded.isna()]
    stations = [text.split() for text in triangles.stations]
    edges = [frozenset(edge) for ring in stations for edge in zip(ring, ring[1:] + ring[:1])]
    rim = {station for edge in edges if edges.count(edge) == 1 for station in edge}

    def is_inside(station):
        return not rim & {s for ring in stations if station in ring for s in ring}

    centre = next(station for station in sorted({s for ring in stations for s in ring}) if is_inside(station))
    rest = [name for name, ring in zip(triangles.polygon, stations) if centre not in ring]
    text = demo.read_text()
    for old, new in (
        ('"stations.csv"', json.dumps(str(demo.parent / "stations.csv"))),
        ("../../examples", str(ROOT / "examples")),
        ("smallest_angle = 15", "smallest_angle = 5"),
        (
            "[[polygons.region]]",
            f'[polygons]\nmissing = "remesh"\n[[polygons.region]]\nname = "round a hole"\npolygons = {json.dumps(rest)}\n'
            "[[polygons.region]]",
        ),
    ):
        assert text.count(old) == 1, old
        text = text.replace(old, new)
    network = folder / "hard.toml"
    network.write_text(text)
    return network


@functools.cache
def read_csv(path):
    table = pd.read_csv(path, low_memory=False)
    if "time" in table:
        table["time"] = pd.to_datetime(table["time"], utc=True)
    return table


def tables(folder):
    """pandas, Polars and pyarrow read Parquet and Arrow: to the last bit what the text holds."""
    for name in ("polygons", "kinematics"):
        text = read_csv(folder / f"{name}.csv")
        parquet, arrow = folder / f"{name}.parquet", folder / f"{name}.arrow"
        readers = {
            "pandas, Parquet": lambda: pd.read_parquet(parquet),
            "pandas, Arrow": lambda: pd.read_feather(arrow),
            "Polars, Parquet": lambda: polars.read_parquet(parquet).to_pandas(),
            "Polars, Arrow": lambda: polars.read_ipc(arrow).to_pandas(),
            "pyarrow, Parquet": lambda: pyarrow.parquet.read_table(parquet).to_pandas(),
            "pyarrow, Arrow": lambda: pyarrow.ipc.open_file(arrow).read_all().to_pandas(),
        }
        for reader, read in readers.items():
            same_table(text, read(), f"{folder.name}/{name}: {reader}")
    print(f"{folder.name}: pandas, Polars and pyarrow read what the text holds")


def same_table(text, found, what):
    assert list(text.columns) == list(found.columns), what
    assert len(text) == len(found) > 1000, what
    for column in text.columns:
        a, b = text[column], found[column]
        if column == "time":
            same = a.dt.as_unit("us") == b.dt.as_unit("us")
        elif b.dtype == np.float32:
            same = (a.astype(np.float32) == b) | (a.isna() & b.isna())
        elif column in ("polygon", "stations", "sense", "reason"):
            same = a.fillna("").astype(str) == b.astype(object).where(b.notna(), "").astype(str)
        else:
            a, b = a.astype(float), b.astype(object).where(b.notna(), np.nan).astype(float)
            same = (a == b) | (a.isna() & b.isna())
        assert same.all(), f"{what}: {column} differs in {(~same).sum()} rows"


def statistics(folder):
    """DuckDB's counts, means and extremes of the Parquet file are those of `polygon_summary.csv`; its metadata is there."""
    parquet = folder / "polygons.parquet"
    quantities = ("vorticity", "divergence")
    columns = ", ".join(f"count({q}), avg({q}), min({q}), max({q})" for q in quantities)
    query = f"select polygon::varchar, {columns} from '{parquet}' group by 1 order by 1"
    found = duckdb.sql(query).fetchall()
    summary = read_csv(folder / "polygon_summary.csv").sort_values("polygon")
    assert [row[0] for row in found] == list(summary.polygon)
    for k, quantity in enumerate(quantities):
        part = np.array([row[1 + 4 * k : 5 + 4 * k] for row in found], dtype=float)
        for j, name in enumerate(("values", "mean", "min", "max")):
            expected = summary[f"{quantity}_{name}"].to_numpy(float)
            # Sums of 289 values in another order.
            scale = np.abs(part[:, 2:]).max() if name == "mean" else 1.0
            close(part[:, j], expected, 0.0, 1e-14 * scale, f"DuckDB: {quantity} {name}")
    assert duckdb.sql(f"select count(*) from '{parquet}'").fetchall()[0][0] == len(read_csv(folder / "polygons.csv"))
    file = pyarrow.parquet.ParquetFile(parquet)
    assert b"caution" in file.metadata.metadata and b"settings" in file.metadata.metadata
    assert file.schema_arrow.field("vorticity").metadata == {b"units": b"s-1"}
    for k in range(file.metadata.num_row_groups):
        group = file.metadata.row_group(k)
        for j in range(group.num_columns):
            column = group.column(j)
            assert column.compression == "ZSTD", column
            assert column.is_stats_set and column.statistics.null_count is not None, column
        times = group.column(0).statistics
        assert times.has_min_max and times.min < times.max
        assert group.column(1).has_dictionary_page
    print(f"{folder.name}: DuckDB's counts, means and extremes are those of the summary")


def close(found, expected, relative, absolute, what):
    found, expected = np.asarray(found, float), np.asarray(expected, float)
    assert found.shape == expected.shape and found.size > 0, what
    off = ~(np.isclose(found, expected, rtol=relative, atol=absolute, equal_nan=True))
    if off.any():
        k = np.argmax(off)
        raise AssertionError(f"{what}: {off.sum()} of {off.size} differ, {found.flat[k]} for {expected.flat[k]}")


def opened(folder):
    return xr.open_dataset(folder / "polygons.nc")


def netcdf(folder):
    """xarray finds in the NetCDF file what the text holds, rounded to seven digits."""
    data = opened(folder)
    faces = [str(name) for name in data.polygon.values]
    index = pd.MultiIndex.from_product([pd.DatetimeIndex(data.time.values, tz="UTC"), faces])
    compared = 0
    for table in ("polygons", "kinematics"):
        text = read_csv(folder / f"{table}.csv").set_index(["time", "polygon"])
        assert text.index.is_unique and text.index.isin(index).all()
        # Faces that do not stand at a time have no row.
        text = text.reindex(index)
        for column in text.columns:
            if column in ("stations", "area_km2", "planetary_vorticity", "sense", "reason"):
                continue
            found = data[column].values.reshape(-1)
            expected = text[column].to_numpy(float)
            if column == "flag":
                # A hole that is filled at other times.
                expected = np.where(np.isnan(expected), np.where(found == 4, 4, 9), expected)
            elif column.endswith("_significant"):
                expected = np.where(np.isnan(expected), -1, expected)
            else:
                expected = expected.astype(np.float32)
                assert data[column].dtype == np.float32 and data[column].attrs["units"]
            close(found, expected, 0.0, 0.0, f"xarray: {column}")
            compared += np.isfinite(expected).sum()
        if table == "polygons":
            reasons(data, text)
            fixed = text.groupby(level=1)[["area_km2", "planetary_vorticity"]].first().loc[faces]
            close(data.area.values / 1e6, fixed.area_km2, 1e-15, 0.0, "xarray: area")
            close(data.planetary_vorticity.values, fixed.planetary_vorticity, 0.0, 0.0, "xarray: planetary_vorticity")
    for variable in data.variables.values():
        for name in str(variable.attrs.get("ancillary_variables", "")).split():
            assert name in data, name
    assert data.flag.dtype == np.int8 and list(data.flag.attrs["flag_values"]) == [1, 2, 3, 4, 9]
    assert "not warnings" in data.attrs["comment"]
    assert json.loads(str(data.settings.values))["analysis"]["interval_s"] == 300
    print(f"{folder.name}: xarray finds the {compared} values of the text")


def reasons(data, text):
    words = data.reason.attrs["flag_meanings"].split()
    stations = [str(name) for name in data.station.values]
    codes, nodes = data.reason.values.reshape(-1), data.reason_node.values.reshape(-1)

    def phrase(code, node):
        if code == 0:
            return ""
        return words[code] + (f" {stations[int(node)]}" if node >= 0 else "")

    found = [phrase(c, -1 if np.isnan(n) else n) for c, n in zip(codes, nodes)]
    assert found == list(text.reason.fillna(""))
    assert any(found)


def compliance(folder):
    """The CF checker finds nothing but what is known of it."""
    checker = Path(sys.executable).with_name("compliance-checker")
    command = [checker, "--test=cf:1.8", "--format=json", "--output=-", folder / "polygons.nc"]
    # It ends with 1 if it has anything to say.
    said = subprocess.run(command, capture_output=True, text=True, check=False).stdout
    report = json.loads(said)["cf:1.8"]
    assert report["possible_points"] > 500

    def messages(level):
        return {message for part in report[level] for message in part["msgs"]}

    errors = messages("high_priorities")
    assert errors == ALLOWED_ERRORS, errors ^ ALLOWED_ERRORS
    others = messages("medium_priorities") | messages("low_priorities")
    others = {message for message in others if not ALLOWED_WARNING.fullmatch(message)}
    assert not others, others
    print(f"{folder.name}: the CF checker reports nothing new")


def mesh(folder):
    """A reader of UGRID, and one of the geometries of CF, find the areas; edges straight on an equal-area map."""
    data = opened(folder)
    grid = xugrid.open_dataset(folder / "polygons.nc").ugrid.grid
    grid.set_crs(epsg=4326, allow_override=True)
    centre = float(data.node_lat.mean()), float(data.node_lon.mean())
    flat = grid.to_crs("+proj=laea +lat_0={} +lon_0={} +ellps=WGS84 +units=m".format(*centre))
    areas = data.area.values
    polygons = geometries(data)
    holes = np.array([len(shape.interiors) > 0 for shape in polygons])
    assert flat.n_face == len(areas)
    # A face of UGRID has no hole.
    close(flat.area[~holes], areas[~holes], 1e-3, 0.0, "xugrid: area")
    assert holes.sum() == (1 if folder.name == "hard" else 0)
    if holes.any():
        assert (flat.area[holes] > 1.01 * areas[holes]).all()
    found = [WGS84.geometry_area_perimeter(shape)[0] for shape in polygons]
    close(found, areas, 1e-6, 0.0, "CF geometry: area, counter-clockwise")
    print(f"{folder.name}: xugrid finds {len(areas)} areas")


def geometries(data):
    """The polygons of CF 7.5."""
    x, y = data.ring_lon.values, data.ring_lat.values
    counts = data.ring_node_count.values
    parts = data.ring_part_node_count.values if "ring_part_node_count" in data else counts
    if "ring_is_hole" in data:
        assert data.ring_is_hole.dims == data.ring_part_node_count.dims == ("ring_part",)
    hole = data.ring_is_hole.values if "ring_is_hole" in data else np.zeros(len(parts), int)
    rings = np.split(np.column_stack([x, y]), np.cumsum(parts)[:-1])
    out, k = [], 0
    for count in counts:
        shell, holes = None, []
        while count > 0:
            assert (rings[k][0] == rings[k][-1]).all(), "a ring is not closed"
            if hole[k]:
                holes.append(rings[k])
            else:
                assert shell is None
                shell = rings[k]
            count -= len(rings[k])
            k += 1
        out.append(shapely.Polygon(shell, holes))
    assert k == len(rings)
    return out


def winds(folder):
    """The winds of the stations give the values of the triangles: a plane through three winds, on a map that keeps
    distances from the middle."""
    data = opened(folder)
    u, v = data.station_u.values.astype(float), data.station_v.values.astype(float)
    compared = 0
    for face in np.flatnonzero(data.kind.values == 1):
        nodes = data.face_nodes.values[face][:3].astype(int)
        lat, lon = float(data.face_lat[face]), float(data.face_lon[face])
        plane = pyproj.Proj(f"+proj=aeqd +lat_0={lat} +lon_0={lon} +ellps=WGS84")
        x, y = plane(data.node_lon.values[nodes], data.node_lat.values[nodes])
        slopes = np.linalg.inv(np.column_stack([np.ones(3), x, y]))
        # Components along the axes of the map, which leave true north by the convergence of the meridians.
        factors = plane.get_factors(data.node_lon.values[nodes], data.node_lat.values[nodes])
        turn = -np.radians(factors.meridian_convergence)
        east = u[:, nodes] * np.cos(turn) + v[:, nodes] * np.sin(turn)
        north = v[:, nodes] * np.cos(turn) - u[:, nodes] * np.sin(turn)
        (ux, uy), (vx, vy) = slopes[1:] @ east.T, slopes[1:] @ north.T
        vorticity, divergence = vx - uy, ux + vy
        there = np.isfinite(data.vorticity.values[:, face])
        for found, name in ((vorticity, "vorticity"), (divergence, "divergence")):
            expected = data[name].values[there, face]
            close(found[there], expected, 1e-4, 1e-8, f"winds of the stations: {name} of face {face}")
            compared += there.sum()
    assert compared > 10_000
    print(f"{folder.name}: the winds of the stations give {compared} values")


def shapes(folder):
    """GDAL reads the GeoJSON, GeoPandas the GeoParquet."""
    text = read_csv(folder / "polygons.csv")
    text = text[text.time == text.time.max()].set_index("polygon")
    found = pyogrio.read_dataframe(folder / "polygons.geojson").set_index("polygon")
    assert sorted(found.index) == sorted(text.index) and found.crs.to_epsg() == 4326
    found = found.loc[text.index]
    for column in ("vorticity", "vorticity_se", "divergence", "divergence_se", "flag", "area_km2"):
        close(found[column], text[column], 1e-14, 0.0, f"GDAL: {column}")
    assert list(found.reason.fillna("")) == list(text.reason.fillna(""))
    kinematics = read_csv(folder / "kinematics.csv")
    kinematics = kinematics[kinematics.time == kinematics.time.max()].set_index("polygon")
    common = found.index.intersection(kinematics.index)
    close(found.okubo_weiss[common], kinematics.okubo_weiss[common], 1e-14, 0.0, "GDAL: okubo_weiss")
    areas(found, "GDAL")
    mesh = geopandas.read_parquet(folder / "mesh.parquet").set_index("polygon")
    assert mesh.crs.to_authority() == ("OGC", "CRS84")
    assert set(text.index) <= set(mesh.index)
    areas(mesh, "GeoPandas")
    same = pyogrio.read_dataframe(folder / "mesh.geojson").set_index("polygon").loc[mesh.index]
    pairs = zip(same.geometry, mesh.geometry)
    assert all(a.equals_exact(b, 1e-9) for a, b in pairs)
    assert mesh.excluded.notna().any() and (mesh.excluded.fillna("") == same.excluded.fillna("")).all()
    print(f"{folder.name}: GDAL and GeoPandas read the shapes")


def areas(shapes, what):
    found = [WGS84.geometry_area_perimeter(shape)[0] / 1e6 for shape in shapes.geometry]
    # Edges in pieces of 25 km, coordinates to 1 cm.
    close(found, shapes.area_km2, 1e-3, 0.0, f"{what}: area, counter-clockwise")


if __name__ == "__main__":
    main(Path(sys.argv[1]).resolve(), Path(sys.argv[2]).resolve())
