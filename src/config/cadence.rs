//! Which steps are measured.

use super::section::Section;
use crate::units::Expansion;

/// Which steps are measured: each of those that cross a grid line in one of the stated spacings. Grid lines lie
/// at whole multiples of the spacing, so the choice does not depend on where a run was started or stopped.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub struct Cadence {
    every_steps: Option<u64>,
    every_time: Option<f64>,
    every_ln_a: Option<f64>,
    synchronised_only: bool,
}

/// What the cadence looks at of a step.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Tick {
    /// Step number.
    pub step: u64,
    /// Time in the host's coordinate.
    pub time: f64,
    /// Natural logarithm of the scale factor.
    pub ln_a: f64,
}

impl Cadence {
    /// Is the step `now` to be measured, when `last` was the last one measured? A pure function, the same on
    /// every rank. Where no spacing is stated every step is due; the first step always is, unless only
    /// synchronised ones are wanted and it is none.
    pub fn is_due(&self, last: Option<Tick>, now: Tick, is_synchronised: bool) -> bool {
        if self.synchronised_only && !is_synchronised {
            return false;
        }
        let Some(last) = last else { return true };
        let is_free =
            self.every_steps.is_none() && self.every_time.is_none() && self.every_ln_a.is_none();
        is_free
            || self
                .every_steps
                .is_some_and(|every| now.step / every > last.step / every)
            || self
                .every_time
                .is_some_and(|every| line(now.time, every) > line(last.time, every))
            || self
                .every_ln_a
                .is_some_and(|every| line(now.ln_a, every) > line(last.ln_a, every))
    }
}

/// Number of the last grid line at or before `value`. A host that means to stop on a line may miss it by
/// rounding; it has reached it all the same.
fn line(value: f64, every: f64) -> f64 {
    (value / every + 1e-6).floor()
}

/// Reads `[cadence]`.
pub(super) fn read(section: &mut Section, expansion: &Expansion) -> Cadence {
    let every_ln_a = section.positive("every_ln_a").optional();
    if every_ln_a.is_some() && *expansion == Expansion::Static {
        section.refuse(
            "every_ln_a",
            "needs a cosmology, but [cosmology] says expanding = false; use every_time",
        );
    }
    Cadence {
        every_steps: section.integer("every_steps", 1..=1_000_000_000).optional(),
        every_time: section.positive("every_time").optional(),
        every_ln_a,
        synchronised_only: section.flag("synchronised_only").or(false),
    }
}
