//! What the gauges of a run declare: fields they need, columns they own, cells they reduce.

use crate::lend::{Field, Species};
use crate::series::schema::{Column, Kind, Table, ValueType};

/// A field that a gauge reads of a species.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Need {
    /// Of which species.
    pub species: Species,
    /// Which array.
    pub field: Field,
    /// Can the gauge do without it?
    pub optional: bool,
    /// Does the gauge look at some elements only?
    pub of_some: bool,
    /// Does it find them by rough values?
    pub roughly: bool,
}

/// Exact sums of one gauge.
#[derive(Clone, Copy, Debug)]
pub struct Sums {
    pub(super) first: usize,
    pub(super) length: usize,
}

/// Counts of one gauge.
#[derive(Clone, Copy, Debug)]
pub struct Counts {
    pub(super) first: usize,
    pub(super) length: usize,
}

/// Sums and counts in bins of one gauge.
#[derive(Clone, Copy, Debug)]
pub struct BinSums(pub(super) usize);

/// How many bins of how many quantities, and how they are summed.
#[derive(Clone, Debug)]
pub(crate) struct BinShape {
    pub bins: usize,
    pub quantities: usize,
    /// For each quantity the power of two to whose multiples contributions are rounded; empty where sums are exact.
    pub quanta: Vec<i32>,
}

/// A list of largest items of one gauge.
#[derive(Clone, Copy, Debug)]
pub struct Top(pub(super) usize);

/// A table of one gauge; its number in the schema.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct TableHandle(pub u32);

/// Length of a list of largest items.
#[derive(Clone, Copy, Debug)]
pub(crate) struct TopShape {
    pub words: usize,
    pub items: usize,
}

/// Collects the declarations of all gauges.
#[derive(Debug)]
pub struct Plan {
    /// Tables so far; the run's own first.
    pub tables: Vec<Table>,
    /// Needs of each gauge, in the order of the gauges.
    pub needs: Vec<Vec<Need>>,
    /// Columns of the run table that each gauge owns: first and number.
    pub(crate) columns: Vec<(usize, usize)>,
    pub(crate) sums: usize,
    pub(crate) counts: usize,
    pub(crate) bins: Vec<BinShape>,
    pub(crate) tops: Vec<TopShape>,
    gauge: String,
}

impl Plan {
    /// A plan with the library's own tables, the run's first.
    pub fn new(tables: Vec<Table>) -> Plan {
        Plan {
            tables,
            needs: Vec::new(),
            columns: Vec::new(),
            sums: 0,
            counts: 0,
            bins: Vec::new(),
            tops: Vec::new(),
            gauge: String::new(),
        }
    }

    /// What is declared from now on belongs to this gauge.
    pub(super) fn begin(&mut self, gauge: &str) {
        self.gauge = gauge.to_string();
        self.needs.push(Vec::new());
        self.columns.push((self.tables[0].columns.len(), 0));
    }

    /// The gauge reads this field; without it the gauge has nothing to say about the species.
    pub fn need(&mut self, species: Species, field: Field) {
        self.add_need(Need {
            species,
            field,
            optional: false,
            of_some: false,
            roughly: false,
        });
    }

    /// As [`Plan::need`], for a gauge that looks at the field of some elements only: it is not made ready in blocks,
    /// and read with [`crate::sweep::Block::gather`].
    pub fn need_of_some(&mut self, species: Species, field: Field) {
        self.add_need(Need {
            species,
            field,
            optional: false,
            of_some: true,
            roughly: false,
        });
    }

    /// As [`Plan::need_of_some`], for a field of vectors by whose rough values the gauge finds its elements: see
    /// [`crate::sweep::Block::roughly`].
    pub fn need_roughly(&mut self, species: Species, field: Field) {
        self.add_need(Need {
            species,
            field,
            optional: false,
            of_some: true,
            roughly: true,
        });
    }

    /// The gauge reads this field where it is lent.
    pub fn may_use(&mut self, species: Species, field: Field) {
        self.add_need(Need {
            species,
            field,
            optional: true,
            of_some: false,
            roughly: false,
        });
    }

    fn add_need(&mut self, need: Need) {
        if let Some(needs) = self.needs.last_mut() {
            needs.push(need);
        }
    }

    /// The gauge owns a float column of the run table.
    pub fn column(
        &mut self,
        name: impl Into<String>,
        unit: &str,
        kind: Kind,
        description: impl Into<String>,
    ) {
        self.typed_column(name, unit, kind, ValueType::Float, description);
    }

    /// The gauge owns a column of the run table.
    pub fn typed_column(
        &mut self,
        name: impl Into<String>,
        unit: &str,
        kind: Kind,
        value: ValueType,
        description: impl Into<String>,
    ) {
        let column = Column::new(&self.gauge, name, unit, kind, value, description);
        self.tables[0].columns.push(column);
        if let Some((_, number)) = self.columns.last_mut() {
            *number += 1;
        }
    }

    /// The gauge owns a table.
    pub fn table(&mut self, name: &str, description: &str, columns: Vec<Column>) -> TableHandle {
        self.tables.push(Table {
            name: name.to_string(),
            description: description.to_string(),
            columns,
        });
        TableHandle(self.tables.len() as u32 - 1)
    }

    /// The gauge sums `length` quantities exactly.
    pub fn sums(&mut self, length: usize) -> Sums {
        let first = self.sums;
        self.sums += length;
        Sums { first, length }
    }

    /// The gauge counts `length` things.
    pub fn counts(&mut self, length: usize) -> Counts {
        let first = self.counts;
        self.counts += length;
        Counts { first, length }
    }

    /// The gauge sums `quantities` quantities exactly in each of `bins` bins, and counts what comes to each.
    pub fn bins(&mut self, bins: usize, quantities: usize) -> BinSums {
        self.bins.push(BinShape {
            bins,
            quantities,
            quanta: Vec::new(),
        });
        BinSums(self.bins.len() - 1)
    }

    /// As [`Plan::bins`] where there are too many bins for exact sums: each contribution of a quantity is rounded to
    /// a multiple of 2^quantum first, in host units. One quantum a quantity.
    pub fn rounded_bins(&mut self, bins: usize, quanta: Vec<i32>) -> BinSums {
        self.bins.push(BinShape {
            bins,
            quantities: quanta.len(),
            quanta,
        });
        BinSums(self.bins.len() - 1)
    }

    /// The gauge keeps the `items` largest items of `words` integers each, compared from the first on.
    pub fn top(&mut self, items: usize, words: usize) -> Top {
        self.tops.push(TopShape { words, items });
        Top(self.tops.len() - 1)
    }
}
