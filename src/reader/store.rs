//! A column of one leg in memory: the cells that are there, packed, and a bit for each row.

use crate::series::encoding::{Cell, words};
use crate::series::schema::{Column, ValueType};

/// Which rows have a cell; nulls cost a bit, as in the file.
#[derive(Clone, Debug, Default)]
struct Presence {
    bits: Vec<u64>,
    /// Cells before each word of bits.
    before: Vec<usize>,
    rows: usize,
    cells: usize,
}

impl Presence {
    fn push(&mut self, is_present: bool) {
        if self.rows.is_multiple_of(64) {
            self.bits.push(0);
            self.before.push(self.cells);
        }
        if let (true, Some(word)) = (is_present, self.bits.last_mut()) {
            *word |= 1 << (self.rows % 64);
            self.cells += 1;
        }
        self.rows += 1;
    }

    /// The number of the row's cell among those that are there.
    fn rank(&self, row: usize) -> Option<usize> {
        let word = *self.bits.get(row / 64)?;
        let bit = 1_u64 << (row % 64);
        (word & bit != 0).then(|| self.before[row / 64] + (word & (bit - 1)).count_ones() as usize)
    }
}

/// One column of one table of one leg.
#[derive(Clone, Debug)]
pub struct Store {
    presence: Presence,
    length: usize,
    words: Vec<u64>,
    is_text: bool,
    text: String,
    text_ends: Vec<usize>,
}

impl Store {
    /// An empty one for cells of this column.
    pub fn new(column: &Column) -> Store {
        Store {
            presence: Presence::default(),
            length: column.length as usize,
            words: Vec::new(),
            is_text: column.value == ValueType::Text,
            text: String::new(),
            text_ends: Vec::new(),
        }
    }

    /// Adds a row.
    pub fn push(&mut self, cell: &Cell<'_>) {
        self.presence.push(!matches!(cell, Cell::Null));
        match cell {
            Cell::Null => {}
            Cell::Word(word) => self.words.push(*word),
            Cell::Words(bytes) => self.words.extend(words(bytes)),
            Cell::Text(text) => {
                self.text.push_str(text);
                self.text_ends.push(self.text.len());
            }
        }
    }

    /// The words of a row's cell; `None` when it is null.
    pub fn words(&self, row: usize) -> Option<&[u64]> {
        let start = self.presence.rank(row)? * self.length;
        self.words.get(start..start + self.length)
    }

    /// The text of a row's cell; `None` when it is null.
    pub fn text(&self, row: usize) -> Option<&str> {
        let rank = self.presence.rank(row).filter(|_| self.is_text)?;
        let start = if rank == 0 {
            0
        } else {
            *self.text_ends.get(rank - 1)?
        };
        self.text.get(start..*self.text_ends.get(rank)?)
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::series::schema::Kind;

    #[test]
    fn cells_and_nulls_come_back_in_their_rows() {
        let column = Column::new("clock", "step", "", Kind::Key, ValueType::Unsigned, "");
        let mut store = Store::new(&column);
        let cell = |row: u64| {
            if row.is_multiple_of(3) {
                Cell::Null
            } else {
                Cell::Word(row * row)
            }
        };
        (0..1000).for_each(|row| store.push(&cell(row)));
        for row in 0..1000_u64 {
            let expected = (!row.is_multiple_of(3)).then_some(row * row);
            assert_eq!(store.words(row as usize).map(|words| words[0]), expected);
        }
        assert_eq!(store.words(1000), None);
    }
}
