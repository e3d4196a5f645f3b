//! The variables over time and face, and what a block gives them.

use crate::integral::{Cause, EstimateBlock};
use crate::kinematics::Quantity;

/// A variable of numbers over time and face.
pub(super) struct FaceVariable {
    pub(super) name: String,
    /// Of the table of CF, with the modifier of an error; empty if there is none.
    pub(super) standard_name: String,
    pub(super) long_name: String,
    pub(super) units: &'static str,
    /// Names of the variables that qualify it.
    pub(super) ancillary: String,
    /// True for a mean over the face.
    pub(super) is_mean: bool,
    pub(super) source: Source,
}

/// Where the numbers come from.
#[derive(Clone, Copy)]
pub(super) enum Source {
    /// From the estimates: the block, the cell, the planetary vorticity.
    Estimate(fn(&EstimateBlock, usize, f64) -> f64),
    /// From the kinematics.
    Value(Quantity),
    /// The error of that.
    Error(Quantity),
}

/// A variable of flags over time and face.
pub(super) struct FlagVariable {
    pub(super) name: &'static str,
    /// Of the table of CF; empty if there is none.
    pub(super) standard_name: &'static str,
    pub(super) long_name: &'static str,
    pub(super) values: &'static [i8],
    pub(super) meanings: &'static str,
    /// Where the face does not stand.
    pub(super) absent: i8,
    pub(super) of: fn(&EstimateBlock, usize) -> i8,
}

/// QARTOD flags, of estimates and of winds.
pub(super) const FLAG_VALUES: &[i8] = &[1, 2, 3, 4, 9];
/// Their meanings.
pub(super) const FLAG_MEANINGS: &str = "pass not_evaluated suspect fail missing";

/// The variables of flags.
pub(super) const FLAGS: [FlagVariable; 4] = [
    FlagVariable {
        name: "flag",
        standard_name: "aggregate_quality_flag",
        long_name: "quality of vorticity and divergence, IOOS QARTOD",
        values: FLAG_VALUES,
        meanings: FLAG_MEANINGS,
        absent: 9,
        of: |block, cell| flag_value(block.flag[cell]),
    },
    FlagVariable {
        name: "vorticity_significant",
        standard_name: "",
        long_name: "whether vorticity differs from zero, among all faces of the time",
        values: &[-1, 0, 1],
        meanings: "no_value no yes",
        absent: -1,
        of: |block, cell| significant(block, 0, cell),
    },
    FlagVariable {
        name: "divergence_significant",
        standard_name: "",
        long_name: "whether divergence differs from zero, among all faces of the time",
        values: &[-1, 0, 1],
        meanings: "no_value no yes",
        absent: -1,
        of: |block, cell| significant(block, 1, cell),
    },
    FlagVariable {
        name: "reason",
        standard_name: "",
        long_name: "why flag is suspect, fail or missing; reason_node says of which station",
        values: &[0, 1, 2, 3, 4, 5],
        meanings: "none missing failed suspect old_wind fit_disagrees",
        absent: 0,
        of: |block, cell| {
            let cause = block.causes.get(cell).copied().flatten();
            // Five causes.
            cause.map_or(0, |cause| {
                i8::try_from(cause.index() + 1).unwrap_or_default()
            })
        },
    },
];

/// The value of a flag as NetCDF stores it.
pub(super) fn flag_value(flag: crate::check::Flag) -> i8 {
    // The values are 1 to 9.
    i8::try_from(flag.value()).unwrap_or(9)
}

fn significant(block: &EstimateBlock, quantity: usize, cell: usize) -> i8 {
    let called = block.significant[quantity].get(cell);
    let called = called.filter(|_| block.flag[cell].is_usable());
    called.map_or(-1, |&called| i8::from(called))
}

/// The node behind the reason of a cell, -1 for none.
pub(super) fn reason_node(block: &EstimateBlock, cell: usize) -> i32 {
    let cause = block.causes.get(cell).copied().flatten();
    let station = cause.and_then(Cause::station);
    station.map_or(-1, |station| i32::try_from(station).unwrap_or(-1))
}

/// The variables of numbers.
pub(super) fn face_variables(complete: bool, kinematics: bool) -> Vec<FaceVariable> {
    let mut out = Vec::new();
    type Of = fn(&EstimateBlock, usize, f64) -> f64;
    type Quantities = [(&'static str, &'static str, &'static str, Of, Of, [Of; 3]); 2];
    let quantities: Quantities = [
        (
            "vorticity",
            "atmosphere_upward_relative_vorticity",
            "area-mean relative vorticity, positive counter-clockwise",
            |b, c, _| b.vorticity[c],
            |b, c, _| b.vorticity_se[c],
            [
                |b, c, _| b.budget.vorticity.instrument[c],
                |b, c, _| b.budget.vorticity.sampling[c],
                |b, c, _| b.budget.vorticity.timing[c],
            ],
        ),
        (
            "divergence",
            "divergence_of_wind",
            "area-mean horizontal divergence, positive for air flowing out",
            |b, c, _| b.divergence[c],
            |b, c, _| b.divergence_se[c],
            [
                |b, c, _| b.budget.divergence.instrument[c],
                |b, c, _| b.budget.divergence.sampling[c],
                |b, c, _| b.budget.divergence.timing[c],
            ],
        ),
    ];
    for (name, standard_name, long_name, value, error, parts) in quantities {
        out.push(FaceVariable {
            name: name.into(),
            standard_name: standard_name.into(),
            long_name: long_name.into(),
            units: "s-1",
            ancillary: format!("{name}_se flag {name}_significant reason"),
            is_mean: true,
            source: Source::Estimate(value),
        });
        out.push(FaceVariable {
            name: format!("{name}_se"),
            standard_name: format!("{standard_name} standard_error"),
            long_name: format!("standard error of {name}"),
            units: "s-1",
            ancillary: String::new(),
            is_mean: false,
            source: Source::Estimate(error),
        });
        let shown = if complete { 3 } else { 1 };
        let words = [
            "sensors and sites",
            "the wind between the stations",
            "reports beside the time",
        ];
        for ((part, words), of) in ["instrument", "sampling", "timing"]
            .iter()
            .zip(words)
            .zip(parts)
            .take(shown)
        {
            out.push(FaceVariable {
                name: format!("{name}_se_{part}"),
                standard_name: String::new(),
                long_name: format!("part of the standard error of {name}: {words}"),
                units: "s-1",
                ancillary: String::new(),
                is_mean: false,
                source: Source::Estimate(of),
            });
        }
    }
    out.push(FaceVariable {
        name: "absolute_vorticity".into(),
        standard_name: "atmosphere_upward_absolute_vorticity".into(),
        long_name: "area-mean absolute vorticity: vorticity and planetary_vorticity".into(),
        units: "s-1",
        ancillary: "flag".into(),
        is_mean: true,
        source: Source::Estimate(|b, c, planetary| b.vorticity[c] + planetary),
    });
    out.push(FaceVariable {
        name: "age_s".into(),
        standard_name: String::new(),
        long_name: "largest age of the winds".into(),
        units: "s",
        ancillary: String::new(),
        is_mean: false,
        source: Source::Estimate(|b, c, _| f64::from(b.age[c])),
    });
    if kinematics {
        out.extend(Quantity::ALL.iter().flat_map(|&q| of_quantity(q)));
    }
    out
}

/// A quantity of the kinematics and its error.
fn of_quantity(quantity: Quantity) -> [FaceVariable; 2] {
    let name = quantity.name();
    let (standard_name, long_name) = match quantity {
        Quantity::MeanU => ("eastward_wind", "mean wind over the face, towards east"),
        Quantity::MeanV => ("northward_wind", "mean wind over the face, towards north"),
        Quantity::MeanSpeed => ("wind_speed", "speed of the mean wind"),
        Quantity::MeanDirection => (
            "wind_from_direction",
            "direction from which the mean wind blows",
        ),
        Quantity::Stretching => ("", "stretching deformation du/dx - dv/dy"),
        Quantity::Shearing => ("", "shearing deformation dv/dx + du/dy"),
        Quantity::TotalDeformation => ("", "total deformation"),
        Quantity::DilatationAxis => ("", "axis of dilatation, clockwise from true north"),
        Quantity::CurvatureVorticity => ("", "vorticity of winds that turn downwind"),
        Quantity::ShearVorticity => ("", "vorticity of winds that differ across the wind"),
        Quantity::Diffluence => ("", "divergence of streamlines that spread"),
        Quantity::DownwindAcceleration => ("", "divergence of winds that speed up downwind"),
        Quantity::OkuboWeiss => ("", "total deformation squared less vorticity squared"),
        Quantity::ContractionRate => ("", "rate at which lines across the axis shorten now"),
        Quantity::AsymptoticContractionRate => ("", "the same after long"),
        Quantity::RossbyNumber => ("", "vorticity over planetary vorticity"),
        Quantity::VorticityStretching => ("", "change of absolute vorticity by stretching"),
    };
    let modifier = if standard_name.is_empty() {
        ""
    } else {
        " standard_error"
    };
    [
        FaceVariable {
            name: name.into(),
            standard_name: standard_name.into(),
            long_name: long_name.into(),
            units: quantity.units(),
            ancillary: format!("{name}_se"),
            is_mean: true,
            source: Source::Value(quantity),
        },
        FaceVariable {
            name: format!("{name}_se"),
            standard_name: format!("{standard_name}{modifier}"),
            long_name: format!("standard error of {name}"),
            units: quantity.units(),
            ancillary: String::new(),
            is_mean: false,
            source: Source::Error(quantity),
        },
    ]
}
