//! Which rows, and what number each bears in its file: runs where they follow each other, lists where not.

use std::ops::Range;

/// Rows of a table by their index, in an order of their own.
#[derive(Debug, Clone, PartialEq, Eq)]
pub enum Rows {
    /// One after the other.
    Run(Range<usize>),
    /// In this order.
    Listed(Vec<u32>),
}

impl Default for Rows {
    fn default() -> Self {
        Rows::Run(0..0)
    }
}

impl FromIterator<usize> for Rows {
    fn from_iter<I: IntoIterator<Item = usize>>(rows: I) -> Self {
        let index = |row| u32::try_from(row).expect("a table holds fewer than 2^32 rows");
        Rows::Listed(rows.into_iter().map(index).collect())
    }
}

impl Rows {
    /// How many there are.
    pub fn len(&self) -> usize {
        match self {
            Rows::Run(run) => run.len(),
            Rows::Listed(rows) => rows.len(),
        }
    }

    /// Whether there are none.
    pub fn is_empty(&self) -> bool {
        self.len() == 0
    }

    /// The k-th of them.
    pub fn get(&self, k: usize) -> usize {
        match self {
            Rows::Run(run) => run.start + k,
            Rows::Listed(rows) => rows[k] as usize,
        }
    }

    /// All of them.
    pub fn iter(&self) -> impl Iterator<Item = usize> + '_ {
        (0..self.len()).map(|k| self.get(k))
    }

    /// Those at the places that `chosen` counts.
    pub fn pick(&self, chosen: &Rows) -> Rows {
        match (self, chosen) {
            (Rows::Run(run), Rows::Run(part)) => {
                Rows::Run(run.start + part.start..run.start + part.end)
            }
            _ => chosen.iter().map(|k| self.get(k)).collect(),
        }
    }
}

/// The numbers that rows bear in their file: kept where they do not follow each other.
#[derive(Debug, Default)]
pub(super) struct RowNumbers {
    /// Index of a row and its number; the rows after it count on from there.
    runs: Vec<(u32, u32)>,
}

impl RowNumbers {
    /// The next row's index and number.
    pub fn push(&mut self, index: usize, number: usize) {
        let follows =
            |(first, begun): &(u32, u32)| *begun as usize + index - *first as usize == number;
        if !self.runs.last().is_some_and(follows) {
            let small = |n| u32::try_from(n).expect("a file holds fewer than 2^32 lines");
            self.runs.push((small(index), small(number)));
        }
    }

    /// The number of a row.
    pub fn get(&self, index: usize) -> usize {
        let after = self
            .runs
            .partition_point(|(first, _)| *first as usize <= index);
        let (first, number) = self.runs[after - 1];
        number as usize + index - first as usize
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn rows_picked_from_rows_are_rows_of_the_table() {
        let listed: Rows = [5, 3, 8].into_iter().collect();
        assert_eq!(Rows::Run(10..20).pick(&Rows::Run(2..4)), Rows::Run(12..14));
        assert_eq!(
            Rows::Run(10..20).pick(&listed),
            [15, 13, 18].into_iter().collect()
        );
        assert_eq!(listed.pick(&Rows::Run(1..3)), [3, 8].into_iter().collect());
    }

    #[test]
    fn numbers_count_on_between_gaps() {
        let mut numbers = RowNumbers::default();
        let given = [1, 4, 5, 6, 9, 10];
        for (index, number) in given.into_iter().enumerate() {
            numbers.push(index, number);
        }
        assert_eq!(numbers.runs, [(0, 1), (1, 4), (4, 9)]);
        let found: Vec<usize> = (0..given.len()).map(|index| numbers.get(index)).collect();
        assert_eq!(found, given);
    }
}
