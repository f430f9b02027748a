//! The numbers of rows in their file.

/// The numbers that rows bear in their file: kept where they do not follow each other.
#[derive(Debug, Default)]
pub(super) struct RowNumbers {
    /// Index of a row and its number; the rows after it count on from there.
    runs: Vec<(u32, u32)>,
}

impl RowNumbers {
    /// The next row's index and number.
    pub fn push(&mut self, index: usize, number: usize) {
        if self.runs.is_empty() || self.get(index) != number {
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
