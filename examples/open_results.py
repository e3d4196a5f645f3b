# %% [markdown]
# Opens the results of `gyremesh estimate` with xarray and DuckDB and redraws a figure: the strongest convergence of the
# demo, its polygon's series with its errors, and the map of that time.
#
#     gyremesh estimate networks/ostrin/network.toml --format csv,parquet,netcdf
#     python examples/open_results.py out/ostrin figure.png
#
# It needs xarray, netCDF4, duckdb and matplotlib. The cells (`# %%`) also run one by one in an editor that knows them.

# %%
import sys
from pathlib import Path

import duckdb
import matplotlib
import matplotlib.dates
import matplotlib.pyplot as plt
import numpy as np
import xarray as xr
from matplotlib.collections import PolyCollection

arguments = [a for a in sys.argv[1:] if not a.startswith("-")]
folder = Path(arguments[0] if arguments else "out/ostrin")
picture = Path(arguments[1] if len(arguments) > 1 else folder / "convergence.png")
SCALE = 1e5  # values are 1/s, the figure shows 1e-5 1/s

# %% [markdown]
# Parquet is a long table, a row for each time and polygon. Which triangles saw the strongest convergence that no check
# found fault with (flag 1) and that differs from zero?

# %%
strongest = duckdb.sql(
    f"""
    select polygon, time, divergence, divergence_se
    from '{folder / "polygons.parquet"}'
    where flag = 1 and divergence_significant and divergence < 0
    order by divergence limit 5
    """
).df()
print(strongest.to_string(index=False), "\n")

# %% [markdown]
# NetCDF has the same values over time and face, beside the mesh and the winds of the stations.

# %%
data = xr.open_dataset(folder / "polygons.nc")
faces = data.polygon.values.astype(str)
face = int(np.flatnonzero(faces == strongest.polygon[0])[0])
moment = strongest.time[0].tz_convert("UTC").tz_localize(None)
now = data.sel(time=moment)
assert np.isclose(now.divergence[face], strongest.divergence[0], rtol=1e-6)

# %% [markdown]
# Above: the series of that polygon. The band holds the truth 95 times in 100 (1.96 standard errors). Below: the map.
# Hatched polygons do not differ from zero at that time, among all of them; grey ones have no value.

# %%
figure, (series, chart) = plt.subplots(2, 1, figsize=(8, 10.5), height_ratios=[1, 2.4], layout="constrained")

value = data.divergence[:, face] * SCALE
band = 1.96 * data.divergence_se[:, face] * SCALE
doubted = data.flag[:, face] != 1
series.axhline(0, color="0.6", linewidth=0.8)
series.fill_between(data.time, value - band, value + band, color="tab:blue", alpha=0.25, linewidth=0, label="95 % interval")
series.plot(data.time, value, color="tab:blue", linewidth=1.4, label="area mean")
if (doubted & np.isfinite(value)).any():
    series.plot(data.time[doubted], value[doubted], "x", color="tab:red", markersize=5, label="suspect")
series.axvline(moment, color="0.2", linestyle=":", linewidth=1.2, label="time of the map")
series.set_title(f"Divergence over {faces[face]}, {float(data.area[face]) / 1e6:.0f} km²", loc="left")
series.set_ylabel("divergence, 10⁻⁵ s⁻¹")
series.set_xlabel(f"UTC, {moment:%d %B %Y}")
series.set_xlim(data.time[0], data.time[-1])
series.xaxis.set_major_formatter(matplotlib.dates.DateFormatter("%H:%M"))
series.legend(loc="lower left", ncols=2, frameon=False, fontsize=9)

# %%
longitude, latitude = data.node_lon.values, data.node_lat.values
triangles = np.flatnonzero(data.kind.values == 1)
corners = data.face_nodes.values[triangles, :3].astype(int)
outlines = np.stack([longitude[corners], latitude[corners]], axis=-1)
values = now.divergence.values[triangles] * SCALE
there = np.isfinite(values)
# The strongest twentieth goes beyond the scale, so that the rest can be told apart.
limit = np.ceil(np.nanquantile(np.abs(values), 0.95) / 10) * 10

chart.add_collection(PolyCollection(outlines[~there], facecolor="0.82", edgecolor="white"))
colours = PolyCollection(outlines[there], array=values[there], cmap="PuOr_r", edgecolor="white", linewidth=0.8)
colours.set_clim(-limit, limit)
chart.add_collection(colours)
plain = there & (now.divergence_significant.values[triangles] != 1)
hatched = PolyCollection(outlines[plain], facecolor="none", edgecolor="0.72", linewidth=0, hatch="////")
chart.add_collection(hatched)
chart.add_collection(PolyCollection(outlines[triangles == face], facecolor="none", edgecolor="black", linewidth=2))

KNOT = 1852 / 3600  # m/s
u, v = now.station_u.values / KNOT, now.station_v.values / KNOT
chart.barbs(longitude, latitude, u, v, length=6, linewidth=0.9, flip_barb=latitude < 0)
chart.plot(longitude, latitude, "o", color="black", markersize=2.5)
chart.set_aspect(1 / np.cos(np.radians(latitude.mean())))
chart.margins(0.06)
chart.xaxis.set_major_formatter(lambda x, _: f"{abs(x):.2f}° {'W' if x < 0 else 'E'}")
chart.yaxis.set_major_formatter(lambda y, _: f"{abs(y):.1f}° {'S' if y < 0 else 'N'}")
chart.set_title(f"{moment:%Y-%m-%d %H:%M} UTC", loc="left")
label = "divergence, 10⁻⁵ s⁻¹ (below 0 air converges)"
figure.colorbar(colours, ax=chart, orientation="horizontal", shrink=0.6, aspect=40, extend="both", label=label)
figure.suptitle(f"{data.attrs['institution']}: strongest convergence of the run", fontweight="bold")
note = """Hatched: not different from zero. Grey: no value. White: left out. Barbs in knots.
Estimates, not warnings: follow the national weather service, site safety rules and local codes."""
figure.supxlabel(note, fontsize=8)
figure.savefig(picture, dpi=150)
print(f"{picture}: {faces[face]} at {moment}Z, {float(now.divergence[face]) * SCALE:.1f}e-5 1/s")
