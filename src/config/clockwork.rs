//! Which time the host counts in, and what it means.

use std::fmt;

use super::section::Section;
use super::units::{Quantity, Units};
use crate::units::{Dimension, Expansion};

/// A coordinate of time.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Coordinate {
    /// The scale factor a, 1 today.
    ScaleFactor,
    /// Its natural logarithm.
    LogScaleFactor,
    /// A time; with a cosmology the time since a = 0.
    Time,
    /// The redshift 1/a - 1; only births are given in it.
    Redshift,
}

/// Which moment a star's birth time names, when it forms in the course of a step.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum BirthStamp {
    /// The moment its step ends: stars born between rows lie in (last row, this row].
    StepEnd,
    /// The moment its step begins: they lie in [last row, this row).
    StepStart,
}

/// One moment of the run.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Moment {
    /// 1 without a cosmology.
    pub scale_factor: f64,
    /// 1/a - 1; 0 without a cosmology.
    pub redshift: f64,
    /// Time since a = 0; without a cosmology the host's own time (s).
    pub age_seconds: f64,
    /// Natural logarithm of the scale factor; 0 without a cosmology.
    pub ln_a: f64,
}

/// A moment whose age is computed only where it is wanted: that is most of the work.
#[derive(Clone, Copy, Debug)]
struct Place {
    scale_factor: f64,
    redshift: f64,
    /// Where it follows without the cosmology.
    age_seconds: Option<f64>,
    ln_a: f64,
}

/// Why a time means nothing.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct ClockError {
    /// What was found and what was expected.
    pub message: String,
}

impl fmt::Display for ClockError {
    fn fmt(&self, formatter: &mut fmt::Formatter<'_>) -> fmt::Result {
        formatter.write_str(&self.message)
    }
}

impl std::error::Error for ClockError {}

/// Turns the host's time coordinate into scale factor and age, and row times into windows of birth.
#[derive(Clone, Debug, PartialEq)]
pub struct Clockwork {
    /// The coordinate of the host's clock.
    pub coordinate: Coordinate,
    /// The coordinate in which birth times of stars are given.
    pub birth: Coordinate,
    /// What a birth time names.
    pub birth_stamp: BirthStamp,
    unit_seconds: f64,
    birth_unit_seconds: f64,
    expansion: Expansion,
}

impl Clockwork {
    /// Seconds in the host's unit of time, where the coordinate is a time.
    pub fn unit_seconds(&self) -> f64 {
        self.unit_seconds
    }

    /// What the host's time `time` means.
    ///
    /// # Errors
    /// When it is not finite, or outside what the coordinate or the cosmology allows.
    pub fn moment(&self, time: f64) -> Result<Moment, ClockError> {
        self.read(time, self.coordinate, self.unit_seconds)
    }

    /// What a star's birth time means.
    ///
    /// # Errors
    /// As for [`Clockwork::moment`].
    pub fn birth_moment(&self, birth: f64) -> Result<Moment, ClockError> {
        self.read(birth, self.birth, self.birth_unit_seconds)
    }

    /// Time that passes between two values of the host's coordinate (s); accurate also for short steps.
    ///
    /// # Errors
    /// As for [`Clockwork::moment`].
    pub fn elapsed_seconds(&self, from: f64, to: f64) -> Result<f64, ClockError> {
        let (start, end) = (self.place(from)?, self.place(to)?);
        Ok(match (&self.expansion, self.coordinate) {
            (
                Expansion::Expanding(cosmology),
                Coordinate::ScaleFactor | Coordinate::LogScaleFactor,
            ) => cosmology.time_between(start.scale_factor, end.scale_factor),
            _ => (to - from) * self.unit_seconds,
        })
    }

    /// The births that belong to the row at `now` when the last one was at `last`, both in the host's
    /// coordinate. Without a last row the window reaches back to the beginning.
    ///
    /// # Errors
    /// As for [`Clockwork::moment`].
    pub fn birth_window(&self, last: Option<f64>, now: f64) -> Result<BirthWindow, ClockError> {
        let is_reversed = self.birth == Coordinate::Redshift;
        let beginning = if is_reversed {
            f64::INFINITY
        } else {
            f64::NEG_INFINITY
        };
        let from = last.map_or(Ok(beginning), |time| self.as_birth(time))?;
        Ok(BirthWindow {
            from,
            to: self.as_birth(now)?,
            is_reversed,
            stamp: self.birth_stamp,
        })
    }

    /// A clock time in the coordinate of births; the very same number where the two coordinates agree.
    fn as_birth(&self, time: f64) -> Result<f64, ClockError> {
        let place = self.place(time)?;
        if self.birth == self.coordinate {
            let same_unit =
                self.birth != Coordinate::Time || self.birth_unit_seconds == self.unit_seconds;
            return Ok(if same_unit {
                time
            } else {
                time * self.unit_seconds / self.birth_unit_seconds
            });
        }
        Ok(match self.birth {
            Coordinate::ScaleFactor => place.scale_factor,
            Coordinate::LogScaleFactor => place.ln_a,
            Coordinate::Redshift => place.redshift,
            Coordinate::Time => self.age(place) / self.birth_unit_seconds,
        })
    }

    fn read(
        &self,
        value: f64,
        coordinate: Coordinate,
        unit_seconds: f64,
    ) -> Result<Moment, ClockError> {
        let place = self.find(value, coordinate, unit_seconds)?;
        Ok(Moment {
            scale_factor: place.scale_factor,
            redshift: place.redshift,
            age_seconds: self.age(place),
            ln_a: place.ln_a,
        })
    }

    fn age(&self, place: Place) -> f64 {
        match (place.age_seconds, &self.expansion) {
            (None, Expansion::Expanding(cosmology)) => cosmology.age(place.scale_factor),
            (age_seconds, _) => age_seconds.unwrap_or_default(),
        }
    }

    fn place(&self, time: f64) -> Result<Place, ClockError> {
        self.find(time, self.coordinate, self.unit_seconds)
    }

    fn find(
        &self,
        value: f64,
        coordinate: Coordinate,
        unit_seconds: f64,
    ) -> Result<Place, ClockError> {
        if !value.is_finite() {
            return Err(ClockError {
                message: format!("found the time {value}; expected a finite number"),
            });
        }
        let Expansion::Expanding(cosmology) = &self.expansion else {
            let age_seconds = value * unit_seconds;
            return Ok(Place {
                scale_factor: 1.0,
                redshift: 0.0,
                age_seconds: Some(age_seconds),
                ln_a: 0.0,
            });
        };
        let largest = cosmology.largest_scale_factor();
        let refuse = |what: &str| {
            Err(ClockError {
                message: format!(
                    "found {what} = {value}; expected a scale factor in (0, {largest}]"
                ),
            })
        };
        let in_range = |a: f64| a > 0.0 && a <= largest;
        match coordinate {
            Coordinate::ScaleFactor if in_range(value) => Ok(Place {
                scale_factor: value,
                redshift: 1.0 / value - 1.0,
                age_seconds: None,
                ln_a: value.ln(),
            }),
            Coordinate::LogScaleFactor if in_range(value.exp()) => Ok(Place {
                scale_factor: value.exp(),
                redshift: (-value).exp_m1(),
                age_seconds: None,
                ln_a: value,
            }),
            Coordinate::Redshift if in_range(1.0 / (1.0 + value)) => Ok(Place {
                scale_factor: 1.0 / (1.0 + value),
                redshift: value,
                age_seconds: None,
                ln_a: -value.ln_1p(),
            }),
            Coordinate::Time => match cosmology.scale_factor(value * unit_seconds) {
                Some(scale_factor) => Ok(Place {
                    scale_factor,
                    redshift: 1.0 / scale_factor - 1.0,
                    age_seconds: Some(value * unit_seconds),
                    ln_a: scale_factor.ln(),
                }),
                None => {
                    let age = cosmology.age(largest) / unit_seconds;
                    let message = format!(
                        "found t = {value}; expected a time since a = 0 in (0, {age:.6e}], in the unit of time of the \
                         config"
                    );
                    Err(ClockError { message })
                }
            },
            Coordinate::ScaleFactor => refuse("a"),
            Coordinate::LogScaleFactor => refuse("ln a"),
            Coordinate::Redshift => refuse("z"),
        }
    }
}

/// The birth times that fall between two rows. Windows of successive rows meet without gap or overlap.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct BirthWindow {
    from: f64,
    to: f64,
    is_reversed: bool,
    stamp: BirthStamp,
}

impl BirthWindow {
    /// Is a star with this birth time born in the window? Never for NaN.
    #[inline]
    pub fn contains(&self, birth: f64) -> bool {
        let (birth, from, to) = if self.is_reversed {
            (-birth, -self.from, -self.to)
        } else {
            (birth, self.from, self.to)
        };
        match self.stamp {
            BirthStamp::StepEnd => birth > from && birth <= to,
            BirthStamp::StepStart => birth >= from && birth < to,
        }
    }

    /// The same window for births that the host holds as 32-bit floats: its edges are rounded as the host's
    /// times were when it stored them, so that a star born on an edge falls on the right side.
    #[must_use]
    pub fn in_single_precision(self) -> BirthWindow {
        let round = |edge: f64| f64::from(edge as f32);
        BirthWindow {
            from: round(self.from),
            to: round(self.to),
            ..self
        }
    }
}

/// Reads `[time]`; `None` where it recorded a problem. `units` is `None` where they have problems.
pub(super) fn read(
    section: &mut Section,
    expansion: &Expansion,
    units: Option<&Units>,
) -> Option<Clockwork> {
    const CLOCKS: [(&str, Coordinate); 3] = [
        ("a", Coordinate::ScaleFactor),
        ("ln a", Coordinate::LogScaleFactor),
        ("t", Coordinate::Time),
    ];
    const BIRTHS: [(&str, Coordinate); 4] = [
        ("a", Coordinate::ScaleFactor),
        ("ln a", Coordinate::LogScaleFactor),
        ("t", Coordinate::Time),
        ("z", Coordinate::Redshift),
    ];
    const STAMPS: [(&str, BirthStamp); 2] = [
        ("end of step", BirthStamp::StepEnd),
        ("start of step", BirthStamp::StepStart),
    ];
    let coordinate = section.choice("coordinate", &CLOCKS).required();
    let birth = section.choice("birth", &BIRTHS).optional().or(coordinate);
    let birth_stamp = section
        .choice("birth_stamp", &STAMPS)
        .or(BirthStamp::StepEnd);
    for (key, chosen) in [("coordinate", coordinate), ("birth", birth)] {
        if *expansion == Expansion::Static
            && section.has(key)
            && chosen.is_some_and(|chosen| chosen != Coordinate::Time)
        {
            section.refuse(
                key,
                "needs a cosmology, but [cosmology] says expanding = false; expected \"t\"",
            );
        }
    }
    let default_seconds = units.map_or(1.0, |units| units.factor(Quantity::Time, 1.0));
    let unit_seconds = unit_of_time(section, "unit", coordinate).unwrap_or(default_seconds);
    let birth_unit_seconds = unit_of_time(section, "birth_unit", birth).unwrap_or(unit_seconds);
    if section.has_problems() {
        return None;
    }
    let expansion = expansion.clone();
    Some(Clockwork {
        coordinate: coordinate?,
        birth: birth?,
        birth_stamp,
        unit_seconds,
        birth_unit_seconds,
        expansion,
    })
}

/// A unit of time under `key` (s), which only makes sense where the coordinate is a time.
fn unit_of_time(section: &mut Section, key: &str, coordinate: Option<Coordinate>) -> Option<f64> {
    let seconds = section.constant(key, Dimension::TIME).optional();
    if section.has(key) && coordinate.is_some_and(|coordinate| coordinate != Coordinate::Time) {
        section.refuse(
            key,
            "has no meaning unless the coordinate is \"t\"; leave it out",
        );
    }
    seconds
}
