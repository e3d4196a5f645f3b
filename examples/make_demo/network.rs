//! The invented stations and the local plane in which the wind field is written.

use std::fmt::Write as _;

/// Latitude of the network centre, degrees north.
pub const CENTRE_LATITUDE: f64 = 46.5;
/// Longitude of the network centre, degrees east.
pub const CENTRE_LONGITUDE: f64 = -30.0;

/// A station as it stands in the station list.
pub struct Station {
    /// Identifier, `OS01` to `OS38`.
    pub id: &'static str,
    /// Invented name.
    pub name: &'static str,
    /// Degrees north.
    pub latitude: f64,
    /// Degrees east.
    pub longitude: f64,
    /// Metres above sea level.
    pub elevation: u32,
}

const fn station(
    id: &'static str,
    name: &'static str,
    latitude: f64,
    longitude: f64,
    elevation: u32,
) -> Station {
    Station {
        id,
        name,
        latitude,
        longitude,
        elevation,
    }
}

/// All stations, in the order of their identifiers.
pub const STATIONS: [Station; 38] = [
    station("OS01", "Withyholt", 46.9093, -30.8038, 228),
    station("OS02", "Karsevane", 46.9114, -30.1932, 336),
    station("OS03", "Dunmarrow", 46.9840, -29.8437, 399),
    station("OS04", "Ethelask", 46.9270, -29.5754, 455),
    station("OS05", "Reedwater Bar", 46.7276, -30.7574, 201),
    station("OS06", "Tolvane", 46.9022, -30.4499, 301),
    station("OS07", "Quillamere", 46.7393, -30.0554, 339),
    station("OS08", "Sarnholt", 46.7843, -29.9772, 356),
    station("OS09", "Pellask Rise", 46.9057, -29.9264, 378),
    station("OS10", "Varnesk", 46.7129, -29.7891, 391),
    station("OS11", "Ulmsteader", 46.8900, -29.3318, 506),
    station("OS12", "Orrinsk", 46.5765, -30.8702, 188),
    station("OS13", "Crannet Fell", 46.6696, -30.3892, 251),
    station("OS14", "Gristhorn", 46.5295, -30.2006, 286),
    station("OS15", "Lathermoor", 46.5547, -29.9745, 345),
    station("OS16", "Ivelundsk", 46.5142, -29.8898, 365),
    station("OS17", "Harrowlund", 46.5159, -29.5897, 393),
    station("OS18", "Morrowfen", 46.6676, -29.5411, 422),
    station("OS19", "Cairnask", 46.6709, -29.1983, 464),
    station("OS20", "Hallow Spit", 46.4841, -30.8325, 186),
    station("OS21", "Skelvane", 46.3404, -30.6581, 196),
    station("OS22", "Ambersk Tarn", 46.5009, -30.5478, 205),
    station("OS23", "Noldrake", 46.3187, -30.3731, 209),
    station("OS24", "Brannask Fell", 46.4868, -29.2921, 421),
    station("OS25", "Thessask", 46.3201, -29.1207, 426),
    station("OS26", "Ostrin Mole", 46.1286, -30.7484, 188),
    station("OS27", "Zevenmoor", 46.2467, -30.3080, 221),
    station("OS28", "Kesterask", 46.2826, -30.1283, 263),
    station("OS29", "Lindaskel", 46.2705, -29.8290, 313),
    station("OS30", "Bolvertarn", 46.1216, -29.7481, 298),
    station("OS31", "Eskermoor", 46.1122, -29.6364, 310),
    station("OS32", "Wrenfoldsk", 46.2955, -29.4745, 371),
    station("OS33", "Yarrowsk", 46.2944, -29.1635, 425),
    station("OS34", "Fenlow Bar", 46.0804, -30.5510, 187),
    station("OS35", "Dovrask", 46.0088, -30.2736, 186),
    station("OS36", "Jessamoor", 46.1001, -30.1492, 215),
    station("OS37", "Pinnask Gap", 46.0946, -29.8393, 259),
    station("OS38", "Stolvane Ridge", 46.0850, -29.2569, 402),
];

/// Point of the local plane, metres east and north of the network centre.
#[derive(Clone, Copy)]
pub struct Point {
    /// Metres toward the east.
    pub x: f64,
    /// Metres toward the north.
    pub y: f64,
}

/// Equirectangular plane about the network centre.
///
/// `x` is the difference of longitude and `y` the difference of latitude, each times a constant number of metres per
/// degree: those of the WGS 84 ellipsoid at the centre. The eastward scale is off by up to 1 % at the northern and
/// southern ends of the network.
pub struct LocalPlane {
    /// Metres in one degree of longitude.
    pub metres_per_degree_east: f64,
    /// Metres in one degree of latitude.
    pub metres_per_degree_north: f64,
}

impl LocalPlane {
    /// The plane about the network centre.
    pub fn about_centre() -> Self {
        // WGS 84 defining constants (National Geospatial-Intelligence Agency, NGA.STND.0036).
        let semi_major_axis: f64 = 6_378_137.0;
        let flattening: f64 = 1.0 / 298.257_223_563;
        let eccentricity_squared = flattening * (2.0 - flattening);
        let (sin, cos) = CENTRE_LATITUDE.to_radians().sin_cos();
        let root = (1.0 - eccentricity_squared * sin * sin).sqrt();
        let meridional_radius = semi_major_axis * (1.0 - eccentricity_squared) / root.powi(3);
        let transverse_radius = semi_major_axis / root;
        Self {
            metres_per_degree_east: (transverse_radius * cos).to_radians(),
            metres_per_degree_north: meridional_radius.to_radians(),
        }
    }

    /// Place of a station in the plane.
    pub fn point(&self, station: &Station) -> Point {
        Point {
            x: (station.longitude - CENTRE_LONGITUDE) * self.metres_per_degree_east,
            y: (station.latitude - CENTRE_LATITUDE) * self.metres_per_degree_north,
        }
    }

    /// Latitude and longitude of a point of the plane, degrees.
    pub fn geographic(&self, point: Point) -> (f64, f64) {
        (
            CENTRE_LATITUDE + point.y / self.metres_per_degree_north,
            CENTRE_LONGITUDE + point.x / self.metres_per_degree_east,
        )
    }
}

/// The station list as CSV text.
pub fn station_list() -> String {
    let mut text = String::from("id,name,latitude,longitude,elevation_m\n");
    for s in &STATIONS {
        // Writing to a string cannot fail.
        let _ = writeln!(
            text,
            "{},{},{:.4},{:.4},{}",
            s.id, s.name, s.latitude, s.longitude, s.elevation
        );
    }
    text
}
