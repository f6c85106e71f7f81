//! Reads `[cosmology]`.

use super::convert::Setting;
use super::section::Section;
use crate::units::{Cosmology, Expansion, Parameters};

/// Reads the section and lets units rely on its h from here on; `None` where it recorded a problem.
pub(super) fn read(root: &mut Section) -> Option<Expansion> {
    let read = super::within(root, "cosmology", true, |section| {
        if section.flag("expanding").or(true) {
            expanding(section)
        } else {
            not_expanding(section)
        }
    })
    .flatten();
    let (expansion, h) = match read {
        Some((expansion, h)) => (Some(expansion), h),
        // Whatever is wrong with h is said once, not with every unit that has h in it.
        None => (None, Some(0.7)),
    };
    let is_expanding = expansion != Some(Expansion::Static);
    root.set_setting(Setting {
        h,
        is_expanding,
        ..root.setting()
    });
    expansion
}

/// Stands in for a cosmology that could not be read.
pub(super) fn any() -> Option<Expansion> {
    let parameters = Parameters {
        h: 0.7,
        omega_matter: 0.3,
        omega_lambda: 0.7,
        omega_radiation: 0.0,
        w: -1.0,
    };
    Cosmology::new(parameters).ok().map(Expansion::Expanding)
}

fn expanding(section: &mut Section) -> Option<(Expansion, Option<f64>)> {
    let hubble = section.number("hubble").required();
    let omega_matter = section.number("omega_matter").required();
    let omega_lambda = section.number("omega_lambda").required();
    let omega_radiation = section.number("omega_radiation").or(0.0);
    let w = section.number("w").or(-1.0);
    let h = hubble? / 100.0;
    let parameters = Parameters {
        h,
        omega_matter: omega_matter?,
        omega_lambda: omega_lambda?,
        omega_radiation,
        w,
    };
    match Cosmology::new(parameters) {
        Ok(cosmology) => {
            (!section.has_problems()).then_some((Expansion::Expanding(cosmology), Some(h)))
        }
        Err(error) => {
            match error.parameter {
                "" => section.reject(&error.message),
                key => section.refuse(key, error.message),
            }
            None
        }
    }
}

/// Only h can be stated, for units that have it.
fn not_expanding(section: &mut Section) -> Option<(Expansion, Option<f64>)> {
    let hubble = section.number_in("hubble", 1.0..=1000.0).optional();
    for key in ["omega_matter", "omega_lambda", "omega_radiation", "w"] {
        if section.number(key).optional().is_some() {
            section.refuse(
                key,
                "has no meaning beside expanding = false; leave one of them out",
            );
        }
    }
    (!section.has_problems()).then_some((Expansion::Static, hubble.map(|hubble| hubble / 100.0)))
}
