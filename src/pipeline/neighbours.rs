//! The neighbour test beside the reading of the reports, for `check`.

use rayon::prelude::*;

use super::Window;
use super::estimation::{corrections, height_factors, sensor_errors};
use super::field::FieldState;
use super::outliers::{OutlierBooks, judged_in};
use crate::align::{Aligner, StationSensors, WindBlock, block_times};
use crate::check::{Explained, Finding, Flag, StationReading, Test};
use crate::polygon::{build_polygons, median_edge};
use crate::settings::Settings;
use crate::spatial::{Deviation, Outlier, SpatialCheck, Support};
use crate::station::Network;
use crate::structure::{StructureFunction, typical_spacing};
use crate::time::Time;

/// Judges the winds of each window by their neighbours.
pub(super) struct NeighbourRun<'a> {
    settings: &'a Settings,
    network: &'a Network,
    sensors: StationSensors,
    field: FieldState,
    spatial: SpatialCheck,
    outliers: OutlierBooks,
    explain: Option<(usize, Time)>,
    /// What was found of the reports to explain, by their time.
    findings: Vec<(Time, Finding)>,
}

impl<'a> NeighbourRun<'a> {
    /// `None` where the test is not made, or there are fewer than two places.
    pub(super) fn new(
        settings: &'a Settings,
        network: &'a Network,
        explain: Option<(usize, Time)>,
    ) -> Option<Self> {
        if !settings.tests_neighbours() {
            return None;
        }
        // The spacing that `estimate` uses, where there are polygons.
        let built = build_polygons(network, &settings.polygons, &settings.limits).ok();
        let edge = built.and_then(|built| median_edge(&built.edges));
        let spacing = edge.or_else(|| typical_spacing(network))?;
        Some(Self {
            settings,
            network,
            sensors: StationSensors {
                errors: Vec::new(),
                height_factors: height_factors(settings, network).0,
            },
            field: FieldState::new(settings, network, spacing),
            spatial: SpatialCheck::new(network, spacing, settings.check.neighbour),
            outliers: OutlierBooks::default(),
            explain,
            findings: Vec::new(),
        })
    }

    /// For each report of a window the flag of the test.
    pub(super) fn window(&mut self, window: &Window) -> Vec<Flag> {
        let table = &window.table;
        self.sensors.errors = sensor_errors(&self.settings.sensor, &window.rounding);
        let analysis = &self.settings.analysis;
        let aligner = Aligner::new(table, analysis, &self.sensors, window.multiples.clone())
            .with_corrections(corrections(self.network));
        let blocks = aligner.grid().blocks(block_times(table.stations()));
        let mut winds: Vec<WindBlock> = blocks
            .into_par_iter()
            .map(|times| aligner.align(times))
            .collect();
        let within = self.settings.check.neighbour.report_within;
        let changes = |station, time| aligner.changes_around(station, time, within);
        let (models, outliers) = self.field.judge(&mut winds, &mut self.spatial, &changes);
        let mut flags = vec![Flag::NotEvaluated; table.len()];
        for block in &winds {
            for station in 0..table.stations() {
                for (t, &time) in block.times.iter().enumerate() {
                    if self.spatial.can_judge(block, station, t)
                        && let Some(i) = judged_in(&aligner, analysis, station, time)
                    {
                        flags[i] = Flag::Pass;
                    }
                }
            }
        }
        for (i, flag) in self.outliers.add(&aligner, analysis, &winds, &outliers) {
            flags[i] = flag;
        }
        let found = self.listen(&aligner, &winds, &models, &outliers);
        self.findings.extend(found);
        self.field.keep_last(winds);
        flags
    }

    /// What is found of the report at, or before and after, the time to explain.
    fn listen(
        &self,
        aligner: &Aligner,
        winds: &[WindBlock],
        models: &[Vec<StructureFunction>],
        outliers: &[Outlier],
    ) -> Vec<(Time, Finding)> {
        let mut findings = Vec::new();
        let Some((station, at)) = self.explain else {
            return findings;
        };
        let table = aligner.table();
        let reports = table.of_station(station);
        let after = table.of_station_from(station, at.plus_micros(1)).start;
        let wanted = [after.wrapping_sub(1), after].map(|i| reports.contains(&i).then_some(i));
        for (b, (block, models)) in winds.iter().zip(models).enumerate() {
            for (t, &time) in block.times.iter().enumerate() {
                let Some(i) = judged_in(aligner, &self.settings.analysis, station, time) else {
                    continue;
                };
                if !wanted.contains(&Some(i)) {
                    continue;
                }
                let outlier = outliers
                    .iter()
                    .find(|o| o.at == (b, t) && o.deviation.station == station);
                let deviation = match outlier {
                    Some(outlier) => Some(outlier.deviation),
                    None => self.spatial.deviation(block, models, station, t),
                };
                let finding = self.finding(deviation.as_ref(), outlier);
                findings.push((table.times()[i], finding));
            }
        }
        findings
    }

    fn finding(&self, deviation: Option<&Deviation>, outlier: Option<&Outlier>) -> Finding {
        let limits = self.settings.check.neighbour;
        let Some(found) = deviation else {
            return Finding {
                test: Test::Neighbour,
                flag: Flag::NotEvaluated,
                words: format!("fewer than {} neighbours report", limits.least_neighbours),
            };
        };
        let towards = found.residual.from_direction();
        let towards = towards.map_or(0.0, |d| (d.degrees() + 180.0) % 360.0);
        let mut words = format!(
            "{:.1} m/s towards {towards:.0} degrees off what {} neighbours predict; {:.1} standard deviations of \
             {:.2} m/s, limit {}",
            found.residual.speed(),
            found.neighbours,
            found.size(),
            found.variance.sqrt(),
            limits.deviations
        );
        if let Some(outlier) = outlier {
            let supported = match outlier.support {
                Support::Neighbour(other) => {
                    let id = self.network.stations().get(other).map(|s| s.id.as_str());
                    id.unwrap_or("another").to_string() + " departs likewise"
                }
                Support::OwnReport => "its report before or after departs likewise".to_string(),
                Support::Unknown => "its report before or after is not known".to_string(),
                Support::None => "neither a neighbour nor its own reports do so".to_string(),
            };
            words.push_str("; ");
            words.push_str(&supported);
        }
        Finding {
            test: Test::Neighbour,
            flag: outlier.map_or(Flag::Pass, Outlier::flag),
            words,
        }
    }

    /// Adds what was found to the books of the other tests.
    pub(super) fn finish(self, readings: &mut [StationReading], explained: &mut [Explained]) {
        self.outliers.put(readings);
        for report in explained {
            let found = self.findings.iter().rev().find(|f| f.0 == report.time);
            let finding = match found {
                Some((_, finding)) => finding.clone(),
                None => Finding {
                    test: Test::Neighbour,
                    flag: Flag::NotEvaluated,
                    words: "no analysis time is judged by this report".into(),
                },
            };
            report.flag = report.flag.worst(finding.flag);
            report.findings.push(finding);
        }
    }
}
