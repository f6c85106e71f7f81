//! The expansion of a homogeneous universe with matter, radiation, curvature and dark energy of constant w.
//!
//! H²(a)/H0² = E²(a) = Ωr a⁻⁴ + Ωm a⁻³ + Ωk a⁻² + ΩΛ a^(−3(1+w)), with Ωk = 1 − Ωm − ΩΛ − Ωr: the Friedmann
//! equation, as in Hogg 1999 (astro-ph/9905116), eq. 14, with the usual terms of radiation and w added. Ages are
//! integrals of dx/H over x = ln a. In that variable every term of E² is an exponential, so the integrand is
//! smooth on the scale of an e-fold and Gauss–Legendre panels converge to rounding; below the first panel only
//! matter and radiation are left and the integral is known in closed form.

use std::fmt;

use super::constants::{GRAVITATION, KM_PER_S_PER_MPC};
use super::quadrature::integrate;

/// The dimensionless numbers of a cosmology, all at a = 1.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Parameters {
    /// Hubble constant in units of 100 km/s/Mpc.
    pub h: f64,
    /// Matter density over critical density.
    pub omega_matter: f64,
    /// Dark energy density over critical density.
    pub omega_lambda: f64,
    /// Radiation density over critical density.
    pub omega_radiation: f64,
    /// Pressure over energy density of the dark energy; -1 is a cosmological constant.
    pub w: f64,
}

/// Whether space expands, and how.
#[derive(Clone, Debug, PartialEq)]
pub enum Expansion {
    /// No cosmology: a = 1, H = 0.
    Static,
    /// Scale factor and age follow the Friedmann equation.
    Expanding(Cosmology),
}

impl Expansion {
    /// Expansion rate at scale factor `a` (s⁻¹); 0 when static.
    pub fn hubble_rate(&self, a: f64) -> f64 {
        self.cosmology()
            .map_or(0.0, |cosmology| cosmology.hubble_rate(a))
    }

    /// The cosmology, if there is one.
    pub fn cosmology(&self) -> Option<&Cosmology> {
        match self {
            Expansion::Static => None,
            Expansion::Expanding(cosmology) => Some(cosmology),
        }
    }
}

/// A cosmology that has been checked, with its ages laid out for quick use.
#[derive(Clone, Debug, PartialEq)]
pub struct Cosmology {
    parameters: Parameters,
    /// Ωk, what is left to 1.
    omega_curvature: f64,
    /// Panels that tile ln a from [`LOWEST`] to the highest supported value, in order.
    panels: Vec<Panel>,
    largest: f64,
}

/// A stretch of ln a over which the quadrature has converged.
#[derive(Clone, Copy, Debug, PartialEq)]
struct Panel {
    start: f64,
    /// H0 times the age at `start`.
    age: f64,
    /// H0 times the time spent between `start` and the next panel.
    span: f64,
}

/// Why a set of parameters describes no usable universe.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct CosmologyError {
    /// The parameter that is out of range, by its config key; empty where it is their combination.
    pub parameter: &'static str,
    /// What was found and what was expected.
    pub message: String,
}

impl fmt::Display for CosmologyError {
    fn fmt(&self, formatter: &mut fmt::Formatter<'_>) -> fmt::Result {
        formatter.write_str(&self.message)
    }
}

impl std::error::Error for CosmologyError {}

/// ln a below which matter and radiation are all there is: the next term, a curvature of order Ωm, is then
/// below the last bit.
const LOWEST: f64 = -40.0;
/// Scale factor up to which every cosmology must be well behaved.
const REQUIRED: f64 = 2.0;
/// Scale factor up to which ages are laid out when the cosmology allows.
const FARTHEST: f64 = 1000.0;
/// E² may cancel down to this fraction of its terms: beyond, ages would begin to lose digits, and a halt could
/// hide between the points at which it is looked for.
const LEAST_RATE: f64 = 1e-4;
/// Widest panel in ln a.
const WIDEST: f64 = 1.0;

impl Cosmology {
    /// Checks the parameters and prepares the ages.
    ///
    /// # Errors
    /// When a parameter is out of range, or the universe they describe would not expand at all times up to
    /// a = 2 (a bounce, a turnaround or a near halt).
    pub fn new(parameters: Parameters) -> Result<Cosmology, CosmologyError> {
        check_ranges(&parameters)?;
        let omega_curvature =
            1.0 - parameters.omega_matter - parameters.omega_lambda - parameters.omega_radiation;
        // Curvature of a few units in the last place is rounding of a flat universe, not meant.
        let omega_curvature = if omega_curvature.abs() < 1e-14 {
            0.0
        } else {
            omega_curvature
        };
        let mut cosmology = Cosmology {
            parameters,
            omega_curvature,
            panels: Vec::new(),
            largest: FARTHEST,
        };
        match cosmology.first_halt() {
            None => {}
            Some(a) if a > REQUIRED => cosmology.largest = REQUIRED,
            Some(a) => return Err(cosmology.refusal(a)),
        }
        cosmology.lay_panels();
        // A halt too narrow to have been found leaves no usable ages.
        match cosmology
            .panels
            .iter()
            .find(|panel| !panel.span.is_finite())
        {
            None => Ok(cosmology),
            Some(panel) => Err(cosmology.refusal(panel.start.exp())),
        }
    }

    /// The parameters as given.
    pub fn parameters(&self) -> &Parameters {
        &self.parameters
    }

    /// Hubble constant in units of 100 km/s/Mpc.
    pub fn h(&self) -> f64 {
        self.parameters.h
    }

    /// Curvature density Ωk at a = 1: what matter, dark energy and radiation leave to 1.
    pub fn omega_curvature(&self) -> f64 {
        self.omega_curvature
    }

    /// Largest scale factor for which ages are known: 1000, or 2 for a universe that later stops expanding.
    pub fn largest_scale_factor(&self) -> f64 {
        self.largest
    }

    /// Expansion rate H(a) (s⁻¹).
    pub fn hubble_rate(&self, a: f64) -> f64 {
        self.hubble_constant() * self.rate_squared(1.0 / a, a.ln()).sqrt()
    }

    /// Critical density 3H²/(8πG) at scale factor `a` (g cm⁻³, physical).
    pub fn critical_density(&self, a: f64) -> f64 {
        let rate = self.hubble_rate(a);
        3.0 * rate * rate / (8.0 * std::f64::consts::PI * GRAVITATION)
    }

    /// Time since a = 0 (s); NaN when `a` is not in (0, [`Cosmology::largest_scale_factor`]].
    ///
    /// Relative error below 1e-12.
    pub fn age(&self, a: f64) -> f64 {
        if !(a > 0.0 && a <= self.largest) {
            return f64::NAN;
        }
        self.dimensionless_age(a) / self.hubble_constant()
    }

    /// Scale factor at the given time since a = 0; `None` for a time that is not greater than 0 or beyond
    /// the age at [`Cosmology::largest_scale_factor`]. The inverse of [`Cosmology::age`] to 1e-12.
    pub fn scale_factor(&self, age_seconds: f64) -> Option<f64> {
        let target = age_seconds * self.hubble_constant();
        if !(target > 0.0 && age_seconds <= self.age(self.largest)) {
            return None;
        }
        let index = self.panels.partition_point(|panel| panel.age <= target);
        let (mut low, mut high) = match index.checked_sub(1).map(|before| &self.panels[before]) {
            // Matter alone gives the largest a for an age, radiation alone the smallest.
            None => {
                let matter = (1.5 * target * self.parameters.omega_matter.sqrt()).ln() / 1.5;
                (matter.min(0.5 * (2.0 * target).ln()) - 80.0, LOWEST)
            }
            Some(panel) => (panel.start, self.panel_end(index - 1)),
        };
        // Newton on ln(age) against ln a, which is nearly straight, kept between bounds that always close in.
        let mut x = 0.5 * (low + high);
        for _ in 0..100 {
            let a = x.exp();
            let age = self.dimensionless_age(a);
            let excess = (age / target).ln();
            if excess > 0.0 {
                high = x;
            } else {
                low = x;
            }
            let slope = 1.0 / (age * self.rate_squared(1.0 / a, x).sqrt());
            let mut next = x - excess / slope;
            if !(next > low && next < high) {
                next = 0.5 * (low + high);
            }
            let step = next - x;
            x = next;
            if step.abs() <= 2e-16 * x.abs().max(1.0) {
                break;
            }
        }
        Some(x.exp().min(self.largest))
    }

    /// Time from scale factor `from` to `to` (s), negative when `to` is the smaller; accurate also where
    /// the two ages would cancel. NaN when either is out of range.
    pub fn time_between(&self, from: f64, to: f64) -> f64 {
        if !(from > 0.0 && from <= self.largest && to > 0.0 && to <= self.largest) {
            return f64::NAN;
        }
        if to < from {
            return -self.time_between(to, from);
        }
        // The width in ln a, without the cancellation of two logarithms where the two are close.
        let width = if to < 2.0 * from {
            ((to - from) / from).ln_1p()
        } else {
            (to / from).ln()
        };
        let start = from.ln();
        let elapsed = if start < LOWEST {
            self.dimensionless_age(to) - self.early_age(from)
        } else {
            self.elapsed(start, width)
        };
        elapsed / self.hubble_constant()
    }

    /// H0 times the time spent from `start` over `width` in ln a, panel by panel.
    fn elapsed(&self, mut start: f64, mut width: f64) -> f64 {
        let mut index = self.panel_at(start);
        let mut sum = 0.0;
        loop {
            let room = self.panel_end(index) - start;
            if width <= room || index + 1 >= self.panels.len() {
                return sum + integrate(start, width, |x| self.inverse_rate(x));
            }
            let panel = &self.panels[index];
            sum += if start == panel.start {
                panel.span
            } else {
                integrate(start, room, |x| self.inverse_rate(x))
            };
            width -= room;
            index += 1;
            start = self.panels[index].start;
        }
    }

    /// H0 (s⁻¹).
    fn hubble_constant(&self) -> f64 {
        100.0 * self.parameters.h * KM_PER_S_PER_MPC
    }

    /// E², from 1/a and ln a.
    fn rate_squared(&self, inverse: f64, x: f64) -> f64 {
        let Parameters {
            omega_matter,
            omega_radiation,
            ..
        } = self.parameters;
        inverse
            * inverse
            * (self.omega_curvature + inverse * (omega_matter + inverse * omega_radiation))
            + self.dark_energy(x)
    }

    fn dark_energy(&self, x: f64) -> f64 {
        let Parameters {
            omega_lambda, w, ..
        } = self.parameters;
        if w == -1.0 || omega_lambda == 0.0 {
            omega_lambda
        } else {
            omega_lambda * (-3.0 * (1.0 + w) * x).exp()
        }
    }

    /// 1/E at ln a = x.
    fn inverse_rate(&self, x: f64) -> f64 {
        1.0 / self.rate_squared((-x).exp(), x).sqrt()
    }

    /// H0 times the age.
    fn dimensionless_age(&self, a: f64) -> f64 {
        let x = a.ln();
        if x < LOWEST {
            return self.early_age(a);
        }
        let panel = &self.panels[self.panel_at(x)];
        panel.age + integrate(panel.start, x - panel.start, |x| self.inverse_rate(x))
    }

    /// H0 times the age when there is only matter and radiation: the textbook integral ∫ a da/√(Ωr + Ωm a), written
    /// as 2/3 a² (s + 2q)/(s + q)² with s² = Ωr + Ωm a and q² = Ωr, so that nothing cancels.
    fn early_age(&self, a: f64) -> f64 {
        let Parameters {
            omega_matter,
            omega_radiation,
            ..
        } = self.parameters;
        let s = (omega_radiation + omega_matter * a).sqrt();
        let q = omega_radiation.sqrt();
        let ratio = a / (s + q);
        2.0 / 3.0 * ratio * ratio * (s + 2.0 * q)
    }

    /// Index of the panel that holds `x`, which is at least [`LOWEST`].
    fn panel_at(&self, x: f64) -> usize {
        self.panels
            .partition_point(|panel| panel.start <= x)
            .saturating_sub(1)
    }

    fn panel_end(&self, index: usize) -> f64 {
        self.panels
            .get(index + 1)
            .map_or_else(|| self.largest.ln(), |next| next.start)
    }

    /// Tiles ln a with panels narrow enough that halving one changes nothing.
    fn lay_panels(&mut self) {
        let end = self.largest.ln();
        let whole = ((end - LOWEST) / WIDEST).ceil();
        let width = (end - LOWEST) / whole;
        let mut age = self.early_age(LOWEST.exp());
        let mut panels = Vec::new();
        for index in 0..whole as usize {
            self.lay_panel(
                LOWEST + index as f64 * width,
                width,
                0,
                &mut age,
                &mut panels,
            );
        }
        self.panels = panels;
    }

    fn lay_panel(
        &self,
        start: f64,
        width: f64,
        depth: u32,
        age: &mut f64,
        panels: &mut Vec<Panel>,
    ) {
        let half = 0.5 * width;
        let whole = integrate(start, width, |x| self.inverse_rate(x));
        let halves = integrate(start, half, |x| self.inverse_rate(x))
            + integrate(start + half, half, |x| self.inverse_rate(x));
        if (whole - halves).abs() <= 4e-15 * halves || depth == 12 {
            panels.push(Panel {
                start,
                age: *age,
                span: halves,
            });
            *age += halves;
        } else {
            self.lay_panel(start, half, depth + 1, age, panels);
            self.lay_panel(start + half, half, depth + 1, age, panels);
        }
    }

    /// The smallest scale factor at which E² comes too near to 0, if there is one.
    fn first_halt(&self) -> Option<f64> {
        const POINTS: u32 = 1000;
        let Parameters {
            omega_matter,
            omega_lambda,
            ..
        } = self.parameters;
        let margin = |x: f64| {
            let inverse = (-x).exp();
            let matter = inverse * inverse * inverse * omega_matter;
            let curvature = (inverse * inverse * self.omega_curvature).abs();
            let terms = matter + curvature + self.dark_energy(x).abs();
            self.rate_squared(inverse, x) / terms - LEAST_RATE
        };
        // Before this matter outweighs what could be negative: curvature falls behind it by a factor a at least,
        // and so does dark energy, whose w is at most -1/3.
        let other = self.omega_curvature.abs() + omega_lambda.abs();
        let start = (0.5 * omega_matter / other.max(1e-3))
            .ln()
            .clamp(LOWEST, 0.0);
        let width = (FARTHEST.ln() - start) / f64::from(POINTS);
        (0..=POINTS)
            .map(|point| start + width * f64::from(point))
            .find(|x| margin(*x).is_nan() || margin(*x) <= 0.0)
            .map(f64::exp)
    }

    fn refusal(&self, a: f64) -> CosmologyError {
        let Parameters {
            omega_matter,
            omega_lambda,
            omega_radiation,
            w,
            ..
        } = self.parameters;
        let message = format!(
            "omega_matter = {omega_matter}, omega_lambda = {omega_lambda}, omega_radiation = {omega_radiation}, w = {w} \
             describe a universe that stops expanding near a = {a:.3}; expected one that expands from a = 0 to a = 2"
        );
        CosmologyError {
            parameter: "",
            message,
        }
    }
}

fn check_ranges(parameters: &Parameters) -> Result<(), CosmologyError> {
    let Parameters {
        h,
        omega_matter,
        omega_lambda,
        omega_radiation,
        w,
    } = *parameters;
    let refuse = |parameter: &'static str, value: f64, expected: &str| {
        Err(CosmologyError {
            parameter,
            message: format!("found {value}; expected {expected}"),
        })
    };
    if !(0.01..=10.0).contains(&h) {
        return refuse(
            "hubble",
            100.0 * h,
            "the Hubble constant in km/s/Mpc, such as 70, between 1 and 1000",
        );
    }
    if !(omega_matter > 0.0 && omega_matter <= 10.0) {
        return refuse(
            "omega_matter",
            omega_matter,
            "a number greater than 0 and at most 10",
        );
    }
    if !(-10.0..=10.0).contains(&omega_lambda) {
        return refuse("omega_lambda", omega_lambda, "a number between -10 and 10");
    }
    if !(0.0..=1.0).contains(&omega_radiation) {
        return refuse(
            "omega_radiation",
            omega_radiation,
            "a number between 0 and 1",
        );
    }
    if !(-3.0..=-1.0 / 3.0).contains(&w) {
        return refuse(
            "w",
            w,
            "a number between -3 and -1/3; -1 is a cosmological constant",
        );
    }
    Ok(())
}
