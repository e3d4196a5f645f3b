//! The words of why an estimate is flagged.

use crate::integral::Cause;
use crate::station::Network;

/// The reason of every cause and station, such as `missing OS36` or `old_wind`.
pub(super) struct Reasons {
    words: Vec<String>,
    stations: usize,
}

impl Reasons {
    pub(super) fn new(network: &Network) -> Self {
        let ids = || network.stations().iter().map(|s| s.id.as_str());
        let mut words = Vec::new();
        for cause in [Cause::Missing(0), Cause::Failed(0), Cause::Suspect(0)] {
            words.extend(ids().map(|id| format!("{} {id}", cause.name())));
        }
        words.push(Cause::OldWind.name().into());
        words.push(Cause::FitDisagrees.name().into());
        Self {
            words,
            stations: network.len(),
        }
    }

    /// All of them.
    pub(super) fn words(&self) -> &[String] {
        &self.words
    }

    /// Place of the words of a cause.
    pub(super) fn index(&self, cause: Cause) -> usize {
        match cause.station() {
            Some(station) => cause.index() * self.stations + station,
            // The causes of no station follow those of three for each.
            None => 3 * self.stations + cause.index() - 3,
        }
    }
}

#[cfg(test)]
#[expect(clippy::unwrap_used, reason = "a test may panic")]
mod tests {
    use super::*;
    use crate::station::{Position, Station};

    #[test]
    fn every_cause_has_its_words() {
        let station = |id: &str| Station::new(id, Position::new(1.0, 2.0).unwrap());
        let reasons = Reasons::new(&Network::new(vec![station("A"), station("B")]));
        let words = |cause| reasons.words()[reasons.index(cause)].as_str();
        assert_eq!(words(Cause::Missing(0)), "missing A");
        assert_eq!(words(Cause::Failed(1)), "failed B");
        assert_eq!(words(Cause::Suspect(1)), "suspect B");
        assert_eq!(words(Cause::OldWind), "old_wind");
        assert_eq!(words(Cause::FitDisagrees), "fit_disagrees");
    }
}
