//! What is lent of one species at the moment.

use super::{Field, Species, View};

/// The lent arrays of one species; all have the same number of elements.
#[derive(Debug, Default)]
pub struct Lot {
    count: Option<usize>,
    views: [Option<View>; Field::COUNT],
    refused: bool,
}

impl Lot {
    /// Takes a view in.
    ///
    /// # Errors
    /// When its count disagrees with what was lent before; the lot stays as it was.
    pub fn put(&mut self, species: Species, field: Field, view: View) -> Result<(), String> {
        if let Some(count) = self.count
            && count != view.count()
        {
            return Err(format!(
                "{} {}: {} elements are lent, but other fields of {} were lent with {count}; all arrays of a species \
                 must have the same count until it is sounded",
                species.name(),
                field.name(),
                view.count(),
                species.name(),
            ));
        }
        self.count = Some(view.count());
        self.views[field as usize] = Some(view);
        Ok(())
    }

    /// Notes that something of this species could not be lent: what is measured of it would be incomplete.
    pub fn refuse(&mut self) {
        self.refused = true;
    }

    /// Could something of this species not be lent?
    pub fn is_refused(&self) -> bool {
        self.refused
    }

    /// Has anything been lent, or failed to be?
    pub fn is_touched(&self) -> bool {
        self.count.is_some() || self.refused
    }

    /// Number of elements; 0 before anything is lent.
    pub fn count(&self) -> usize {
        self.count.unwrap_or(0)
    }

    /// The view of a field.
    pub fn view(&self, field: Field) -> Option<&View> {
        self.views[field as usize].as_ref()
    }

    /// Lets go of every array.
    pub fn let_go(&mut self) {
        *self = Lot::default();
    }
}
