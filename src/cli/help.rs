//! The longer help texts.

/// Columns of the longer help: with a margin of 2 it fits a page of the manual on a terminal of 80.
const WIDTH: usize = 76;
/// A second line begins under the last column of a table, unless that leaves too little room.
const DEEPEST: usize = 40;

/// The text with its long lines broken, the rest of each under where its last column begins.
pub(super) fn laid_out(text: &str) -> String {
    let mut out = String::new();
    for line in text.lines() {
        let words = line.trim_start();
        let start = line.len() - words.len();
        // Columns stand at least two spaces apart, or after a colon.
        let first = words.split(' ').next().filter(|word| word.ends_with(':'));
        let column = words.rfind("  ").map(|at| at + 2);
        let column = column.or(first.map(|word| word.len() + 1)).unwrap_or(0);
        let hang = start + if start + column <= DEEPEST { column } else { 2 };
        let mut width = start;
        out.push_str(&line[..start]);
        for (k, word) in words.split(' ').enumerate() {
            let length = word.chars().count();
            if k > 0 && !word.is_empty() && width + 1 + length > WIDTH {
                out.truncate(out.trim_end().len());
                out.push('\n');
                out.push_str(&" ".repeat(hang));
                width = hang;
            } else if k > 0 {
                out.push(' ');
                width += 1;
            }
            out.push_str(word);
            width += length;
        }
        out.push('\n');
    }
    out.truncate(out.trim_end().len());
    out
}

pub(super) const COMPLETIONS: &str = "\
Examples: gyremesh completions bash > ~/.local/share/bash-completion/completions/gyremesh
          gyremesh completions zsh > DIR/_gyremesh, DIR being a folder of $fpath
          gyremesh completions fish > ~/.config/fish/completions/gyremesh.fish";

pub(super) const MANUAL: &str = "\
Example: gyremesh manual --out ~/.local/share/man/man1
         man gyremesh-estimate";

pub(super) const LONG_ABOUT: &str = "\
Gyremesh reads the reports of a network of wind stations, joins the stations to polygons, integrates the wind along \
the edges of each polygon, and gives area-mean vorticity and divergence with their errors.

Every command takes the settings file of a network, `network.toml`. Options on the command line override it. Paths in \
it are relative to it.";

pub(super) const AFTER_HELP: &str = "\
Exit status: 0 complete; 1 complete, but some input was unusable (stderr says what); 2 not done.

These are estimates, not warnings: follow the national weather service, site safety rules and local codes.";

pub(super) const CHECK: &str = "\
Reads:   settings, station list, report files.
Prints:  for each file the rows, passed on and set aside by reason; for each station what its reports hold, first and \
last report, the usual time between them, gaps, and the steps to which it rounds; repeats that disagree; how many \
reports each test found suspect or failed, and the worst stations.
Writes:  with --out: reports_flagged.csv, every report by time with its own flag, the flag of each test, and its line; \
reports_flagged.parquet with --format parquet or csv,parquet.

Flags are those of IOOS QARTOD: 1 pass, 2 not evaluated, 3 suspect, 4 fail, 9 missing. Tests: timing_gap (9: the report \
before is missing; not in the report's own flag), location, gross_range, climatology, spike, rate_of_change, flat_line, \
stuck_vane, frozen_anemometer, persistence, agreement, attenuated_signal. A report that fails is left out of estimates, \
a suspect one is used and flagged. The last report of a station has no successor: it is not tested for a spike. \
`gyremesh estimate --help` lists the limits.

Examples: gyremesh check networks/ostrin/network.toml
          gyremesh check networks/ostrin/network.toml --explain OS36 --at 2031-06-14T12:00:00Z";

pub(super) const POLYGONS: &str = "\
Reads:   settings, station list.
Prints:  a line for each polygon: area, longest edge, smallest angle, shape quality (1 = regular), the error of \
vorticity or divergence for an error of 1 m/s in each wind component (1e-5 /s), and why it is left out.
With --expect: the errors to expect, by sensors and by the wind that no station sees.
Writes:  with --out: with --expect expected.csv; mesh.csv, mesh.geojson (RFC 7946).

Example: gyremesh polygons networks/ostrin/network.toml";

pub(super) const ESTIMATE: &str = "\
Reads:   settings, station list, report files.
Prints:  period, share of reports used, polygons, strongest convergence and spin-up, stations that reported least.
Writes:  polygons.csv (a row for each time and polygon; other formats with --format), polygon_summary.csv (a row for \
each polygon: mean, standard deviation, extremes, share beyond 1.96 standard errors), mesh.geojson, stations.csv, \
summary.json; with --kinematics also kinematics.csv (mean wind, deformation, curvature and shear vorticity and more, a \
row for each time and polygon) and scalars.csv (observed scalars); with --w-at vertical_motion.csv (w = -D h); with \
--decompose decompose.csv (energies of the rotational, divergent and harmonic part of the wind at each time) and \
decompose_stations.csv (streamfunction and velocity potential); with --by polygon_means.csv, and kinematics_means.csv. Files \
appear only when they are whole.
Formats: csv; parquet (polygons.parquet, mesh.parquet), arrow (polygons.arrow); netcdf (polygons.nc, CF and UGRID); \
geojson (polygons.geojson, at the last time or those of --at); html (report.html, see `gyremesh report --help`). With --plot \
also map_vorticity, map_divergence, series and structure (.png, .svg). A NetCDF file is made in memory, 220 bytes for each polygon \
and time, with kinematics 480: take long archives in parts, with --from and --to.
Stations that moved within the period: a run for each part in which none does, in the folders epoch1, epoch2, ...

Settings file (defaults in brackets):
  name                        name of the network
  [stations]  file            table with a header line, or GeoJSON points; gzip and Zstandard are recognised
              columns         id, latitude, longitude [of these names], name, elevation, aliases (one or a list),
                              valid_from, valid_to (RFC 3339 or YYYY-MM-DD), speed_unit, north, declination (degrees),
                              sensor_height, roughness (m), direction_correction (degrees, added), speed_factor \
(multiplied), correction_from, correction_origin (all of `calibrate --apply`) [none]
              elevation_unit  m, km or ft [m]
              only            list of identifiers [all]
              first_of_each   true for a table of reports: the first row of each station with a position [false]
              delimiter [found], decimal [.], encoding [utf-8], skip_lines [0], missing: as in [[reports]]
  [[reports]] files           list of names and patterns, - for standard input; gzip and Zstandard are recognised, \
${NAME} is an environment variable
              form            table, metar or synop [table]
              columns         station, time (one or a list), direction, speed [of these names]; one of direction and \
speed if the other stands in another file; or eastward, northward; or report (METAR text); {station} in a name makes \
the table wide; gust, latitude, longitude, level [none]; scalars: \
{ NAME = column }, of tables with a row for each station
              speed_unit      m/s, km/h, mph or kt [m/s]
              north           true or magnetic [true]
              level_unit      Pa, hPa, m, km or ft [Pa or m]
              time            form: RFC 3339, YYYYMMDDHHMM, epoch seconds, epoch milliseconds or a pattern such as \
%d.%m.%Y %H:%M [RFC 3339]; zone: UTC, +08:00 or Asia/Hong_Kong [in the text]; repeated_hour: first or second [first]; \
label: start, middle or end of the window [end], averaging
              reference       a time within two weeks of METAR and SYNOP reports
              missing         texts that mean no value [NA, N/A, NaN, null, none, M, MM, -, /, //, ///, -9999, -999]
              delimiter       one sign or tab [found]; decimal [.]; encoding: utf-8 or latin-1 [utf-8]; skip_lines [0]
  [sensor]    speed_sd [0.25 m/s], speed_sd_share [0.05], direction_sd [2.5 degrees]: standard deviations
              speed_step, direction_step: steps of the reports [found for each station]; calm_below [0.5 m/s]
  [analysis]  interval [10 min], method: nearest, linear or mean [nearest], tolerance [half the interval],
              window [the interval], least_reports [1], from, to [all]
              height (common height), profile: log or power [log], exponent [1/7]; level, such as 850 hPa
  [errors]    parts: all or instrument [all]; false_discovery_rate [0.05]; window [24 h] and memory [1 h] of the
              structure function; prior_difference [4.5 m2/s2], prior_distance [30 km], prior_exponent [2/3]
  [kinematics]  write: true for kinematics.csv or .parquet [false]; w_at: height above the ground for \
vertical_motion.csv [none]; least_speed [1 m/s]: no curvature, shear or \
diffluence in weaker mean winds
  [scalars.NAME]  error: standard error of a scalar of `columns.scalars`, in its own unit; see scalars.csv
  [decompose] write: true for decompose.csv and decompose_stations.csv [false]
  [means]     by: hour, day, month or period [none]; zone: UTC, +08:00 or Asia/Hong_Kong [UTC]
  [[periods]] name, from, to (RFC 3339, both included): for means by period
  [check]     speed_suspect [75 m/s], speed_fail [100 m/s], starting_speed [sensor.calm_below], displacement of \
reports with a position: a length or any [20 km], gap: reports further apart do not follow each other [70 min], off: \
tests not to make []
  [[check.climatology]]       months (1 to 12), speed_least, speed_most
  [check.spike]               suspect [20 m/s], fail [40 m/s]
  [check.rate_of_change]      deviations [3], period [8 h], least [10 m/s], least_changes [6]
  [check.flat_line]           speed [0 m/s], direction [0.05 degrees]: what counts as the same; and
              suspect_reports [3], suspect_after [20 min], fail_reports [5], fail_after [30 min]; for stations that \
round coarsely coarse_suspect_after [6 h], coarse_fail_after [12 h], longer for steps beyond 10 degrees
  [check.stuck_vane]          varies [0.5 m/s], and the same keys [6, 3 h, 12, 6 h, 18 h, 48 h]
  [check.frozen_anemometer]   varies [10 degrees], and the same keys [6, 3 h, 12, 6 h, 12 h, 24 h]
  [check.persistence]         speed [0.5 m/s], direction [5 degrees], period [60 min], interval [2 min], exempt_below [1 m/s]
  [check.agreement]           gust_below [0.5 m/s], calm_direction: true to doubt it [false]
  [check.attenuated_signal]   period [12 h], least_range [0.5 m/s], usual_times [4], calm_after [48 h]
  [check.neighbour]           deviations [5], least_neighbours [3], report_within [70 min]
  [polygons]  triangles [true], missing [skip]; remesh fills the holes of missing stations with other triangles
  [[polygons.ring]]    name, stations in order
  [[polygons.region]]  name, and polygons, triangles_of (stations) or all_triangles = true
  [limits]    smallest_angle [15 degrees], longest_edge, smallest_area, largest_area, elevation_spread [none],
              slope_error [none], vertical_shear [0.01 1/s]; largest_age [none]: older winds are suspect

Example: gyremesh estimate networks/ostrin/network.toml --out out/ostrin";

pub(super) const CALIBRATE: &str = "\
Reads:   settings, station list, report files: a day at least, better some weeks.
Prints:  a list of what is wrong: station, cause, size and standard error, since when, evidence, what to check on site, \
and what leaving it adds to the error of the polygons around.
Writes:  with --out: maintenance.csv (the list) and calibration.csv (turn, factor and clock of every station); with \
--apply: a station list with corrections and their origin. Nothing is corrected unless the settings read that list, and \
then every command says so.

Turn: reported minus true direction, degrees clockwise. Factor: reported over true speed. Both are relative to the \
network's median: a network that is turned or scaled as a whole cannot be told from another wind. With fewer than five \
days the errors are less sure.

Settings:
  [calibration]  exclude_sectors     sectors of direction left out, degrees, such as [[120, 160]] (wakes, lee)
                 exclude_sectors_of  the same by station: { T01 = [[200, 230]] }
                 rotor_diameter      of turbines, m: leaves out the sectors that they disturb for each other
                 rotor_diameter_of   the same by station: { T01 = 120, MAST = 0 }
                 wake_reach          distance in diameters up to which a turbine disturbs another [20]

Example: gyremesh calibrate networks/ostrin/network.toml --out out/ostrin

These are estimates, not warnings: follow the national weather service, site safety rules and local codes.";

pub(super) const EVENTS: &str = "\
Reads:   settings, station list, report files.
Prints:  a bulletin, the most important first: lines along which the wind shifts, how they move and when they reach the \
places of the settings; areas where the air converges, diverges or spins up, their strongest mean, place and motion.
Writes:  with --out: events.csv (a row for each line, then each area), arrivals.csv (first forecast and final time for each \
line and place), shifts.csv (each wind shift at a station), events.geojson (RFC 7946: largest areas, paths, lines at \
whole hours).

An area is made of triangles of the mesh without a fault. A line needs wind shifts alike at six stations; a forecast rests \
on no later report than its made_at. There is no arrival for a place behind the first station passed, further than \
reach beyond the last, or more than the spacing of the stations to the side. Errors are standard errors.

Settings (defaults in brackets):
  [events]    jump            an area begins with a mean as strong as such a jump of the wind across the triangle makes \
it: value times the root of the area [5 m/s]; or
              threshold       this value, 1/s
              lasting         shorter areas are left out [15 min]
              shift           least change of the wind at a station [3 m/s]
              window          over which the wind before and after is a mean [30 min]
              least_stations  of a line [6]
              reach           how far beyond the stations passed arrivals are given [50 km]
  [[places]]  name, latitude, longitude (degrees)

Example: gyremesh events networks/ostrin/network.toml --out out/ostrin

These are estimates, not warnings: follow the national weather service, site safety rules and local codes.";

pub(super) const PROFILE: &str = "\
Reads:   settings with [profile], station list, report files with a level (and a position, if the instruments drift).
Prints:  vorticity, divergence and vertical motion of the polygons whose motion is largest against its error, and what \
is assumed.
Writes:  with --out: profile.csv, a row for each time, polygon and level: stations, pressure or height (Pa, m), middle, \
area, vorticity and divergence (1/s), omega (Pa/s, positive downward) and w (m/s, positive upward) with and without \
adjustment, each with its standard errors, flag, reason.

Each platform's reports within analysis.tolerance of an analysis time (at least as long as an ascent) give its wind and \
place at every level. Triangles are those of the station list's places, and lie at each level between the places where \
the platforms were. A triangle without one of its platforms is left out at that level, a ring goes on without it while \
three are left; the reason says so. Regions make no profiles, and the neighbour test is not made.

Vertical motion: continuity from the lowest level with an estimate up to the first gap; adjusted to the upper boundary \
where the profile is complete. Standard errors: _se for independent errors of the levels, _se_correlated for fully \
correlated ones; the truth lies between, as errors of the sensors are independent and what the platforms do not see of \
the wind between them is alike at neighbouring levels.

Settings:
  [profile]  levels          such as [\"850 hPa\", \"700 hPa\", \"500 hPa\"] or [\"100 m\", \"500 m\"]: linear in ln p or z
             layers          in place of levels: means of layers, such as [[\"1000 hPa\", \"850 hPa\"], ...]
             largest_gap     no wind between reports further apart [200 hPa or 2500 m]
             lower_boundary  zero, slope (air along the plane of the stations' elevations), or a motion such as \
0.05 Pa/s or 0.02 m/s [zero]
             upper_boundary  zero or a motion [zero]
             adjustment      linear (O'Brien 1970), constant or none [linear]
             density         over height: standard (anelastic) or constant [standard]
             height          for reports without levels, such as 500 m: w there from the divergence at the ground

Example: gyremesh profile soundings/network.toml --out out/soundings

These are estimates, not warnings: follow the national weather service, site safety rules and local codes.";

pub(super) const REPORT: &str = "\
Reads:   settings, station list, report files, twice: for the estimates and for the calibration.
Prints:  where the page is.
Writes:  report.html: a map of the polygons coloured by vorticity or divergence with the winds as barbs (WMO), which \
moves in time; the series of each polygon with 95 % intervals; strongest values; events and arrivals; stations with \
their flags and calibration; polygons left out, and why; settings. One file that loads nothing from elsewhere. Of more \
than some days it shows every second, fourth, ... analysis time, and says so.

Example: gyremesh report networks/ostrin/network.toml --out out/ostrin

These are estimates, not warnings: follow the national weather service, site safety rules and local codes.";
