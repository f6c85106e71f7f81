//! What is lent of one species at the moment.

use super::{Field, Species, View};

/// The lent arrays of one species; all have the same number of elements.
#[derive(Debug, Default)]
pub struct Lot {
    count: Option<usize>,
    views: [Option<View>; Field::COUNT],
    /// Fields that could not be lent; lending them rightly later makes it good.
    missed: [Option<Reason>; Field::COUNT],
    misnamed: bool,
}

/// Why a field could not be lent.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
enum Reason {
    /// Something about this field alone.
    Own,
    /// Its count disagrees with that of others, and nobody can say which is right.
    Count,
}

impl Lot {
    /// Takes a view in.
    ///
    /// # Errors
    /// When its count disagrees with what was lent before; the lot stays as it was.
    pub fn put(&mut self, species: Species, field: Field, view: View) -> Result<(), String> {
        let others_have_it = self
            .views
            .iter()
            .enumerate()
            .any(|(index, held)| held.is_some() && index != field as usize);
        if let Some(count) = self.count
            && count != view.count()
            && others_have_it
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
        self.missed[field as usize] = None;
        Ok(())
    }

    /// Notes that a field could not be lent.
    pub fn miss(&mut self, field: Field) {
        self.missed[field as usize].get_or_insert(Reason::Own);
    }

    /// Notes that a field could not be lent because its count disagrees.
    pub fn disagree(&mut self, field: Field) {
        self.missed[field as usize] = Some(Reason::Count);
    }

    /// Notes that something was lent under a name that does not exist: what is not lent may be what was meant.
    pub fn misname(&mut self) {
        self.misnamed = true;
    }

    /// Do counts disagree?
    pub fn disagrees(&self) -> bool {
        self.missed.contains(&Some(Reason::Count))
    }

    /// Is a field missing that the host meant to lend, as far as can be told? A field that was lent before
    /// something went wrong with it is still lent.
    pub fn lacks(&self, field: Field) -> bool {
        self.disagrees()
            || (self.views[field as usize].is_none()
                && (self.misnamed || self.missed[field as usize].is_some()))
    }

    /// Has anything been lent, or failed to be?
    pub fn is_touched(&self) -> bool {
        self.count.is_some() || self.misnamed || self.missed.iter().any(Option::is_some)
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
