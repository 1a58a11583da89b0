//! Is the sensor alive and as quiet as it was? What is watched besides the drift:
//!
//! - `flat`: one value again and again, judged by the indications alone where noise and resolution
//!   say that it cannot be chance
//! - `still`: an indication that does not follow while the reference moves
//! - `jump`: a change faster than the measurand can make
//! - `precision`: noise that grows while the mean stays
//!
//! The spike test is the innovation gate in `screening`: it looks at innovations, never at raw
//! values. Flags and how they count are told at [`Flag`].

mod flat;
mod jump;
mod precision;
mod still;

use super::pairing::Pair;
use super::screening::Innovation;
use crate::event::{Flag, Rejection};
use crate::setup::ChannelSetup;
use crate::time::Timestamp;
use flat::Flat;
pub(crate) use jump::jumps;
pub(super) use precision::Precision;
use serde::{Deserialize, Serialize};
use still::Still;

/// The state of the checks of one sensor. It belongs to the sensor, not to a stretch: a cleaning
/// does not change how noisy the sensor is.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub(super) struct Checks {
    flat: Flat,
    still: Still,
    precision: Precision,
}

/// Why a sensor counts as stuck.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) enum Stuck {
    /// It has shown one value so many times in a row, counted with the first.
    Repeats { value: f64, times: u32, limit: u32 },
    /// It has shown one value while the reference moved so far.
    Unmoved {
        value: f64,
        reference_moved: f64,
        limit: f64,
    },
}

impl Checks {
    /// Takes an indication that came in; its flag by the count of equal values.
    pub(super) fn take_indication(
        &mut self,
        time: Timestamp,
        value: f64,
        setup: &ChannelSetup,
    ) -> Flag {
        if !setup.screening.enabled {
            return Flag::Pass;
        }
        self.flat.take(time, value, setup)
    }

    /// Looks at a pair before anything else does; the rejection if the indication has stopped
    /// following the reference. `scatter`: residual standard deviation of the fit, where known.
    pub(super) fn take_pair(
        &mut self,
        pair: &Pair,
        scatter: Option<f64>,
        setup: &ChannelSetup,
    ) -> Option<Rejection> {
        if !setup.screening.enabled {
            return None;
        }
        self.still.take(pair, scatter, setup)
    }

    /// Takes an innovation for the precision. What was `rejected` is an outlier, not noise.
    pub(super) fn take_innovation(
        &mut self,
        innovation: Innovation,
        rejected: bool,
        setup: &ChannelSetup,
    ) {
        if !rejected {
            self.precision.take(innovation, setup);
        }
    }

    /// Why the sensor counts as stuck now, if it does.
    pub(super) fn stuck(&self) -> Option<Stuck> {
        self.flat.failed().or_else(|| self.still.failed())
    }

    /// The noise's precision chart.
    pub(super) fn precision(&self) -> &Precision {
        &self.precision
    }

    /// Begins anew with what is judged by pairs; the indications go on.
    pub(super) fn forget_pairs(&mut self) {
        self.still = Still::default();
        self.precision = Precision::default();
    }

    /// Screening was switched off.
    pub(super) fn forget_screens(&mut self) {
        self.flat = Flat::default();
        self.still = Still::default();
    }
}
