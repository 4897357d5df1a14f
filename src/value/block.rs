use std::sync::Arc;

use crate::base::{Cancellation, Cancelled};

/// Members × columns of numbers: row `m` holds what member `m` of the block in hand says.
///
/// A certain value has one row, whatever the block; rows are spread when certain and uncertain values meet.
/// The nominal path is evaluated like a block of one member. Gaps are NaN. A clone shares the numbers.
#[derive(Clone, Debug, PartialEq)]
pub struct Block {
    rows: usize,
    columns: usize,
    data: Arc<Vec<f64>>,
}

impl Block {
    /// Build from rows laid one after the other; what is missing is a gap, what is too much is dropped.
    pub fn new(rows: usize, columns: usize, mut data: Vec<f64>) -> Self {
        data.resize(rows * columns, f64::NAN);
        Self { rows, columns, data: Arc::new(data) }
    }

    /// One row, one column.
    pub fn single(value: f64) -> Self {
        Self::new(1, 1, vec![value])
    }

    /// One certain row.
    pub fn row(data: Vec<f64>) -> Self {
        Self::new(1, data.len(), data)
    }

    /// One column, a row for each member.
    pub fn column(data: Vec<f64>) -> Self {
        Self::new(data.len(), 1, data)
    }

    /// Number of rows: 1, or the members of the block in hand.
    pub fn rows(&self) -> usize {
        self.rows
    }

    /// Number of columns: 1 for a quantity, the length of the axis for a series.
    pub fn columns(&self) -> usize {
        self.columns
    }

    /// Rows times columns.
    pub fn len(&self) -> usize {
        self.data.len()
    }

    /// Whether there is no number at all.
    pub fn is_empty(&self) -> bool {
        self.data.is_empty()
    }

    /// The first number; a gap where there is none.
    pub fn first(&self) -> f64 {
        self.data.first().copied().unwrap_or(f64::NAN)
    }

    /// The row of member `member`; the single row of a certain value for every member.
    pub fn member(&self, member: usize) -> &[f64] {
        let row = if self.rows <= 1 { 0 } else { member.min(self.rows - 1) };
        self.data.get(row * self.columns..(row + 1) * self.columns).unwrap_or(&[])
    }

    /// The number of a quantity for member `member`.
    pub fn scalar(&self, member: usize) -> f64 {
        self.member(member).first().copied().unwrap_or(f64::NAN)
    }

    /// All numbers, row after row.
    pub fn data(&self) -> &[f64] {
        &self.data
    }

    /// Apply `function` to every number.
    #[must_use]
    pub fn map(&self, function: impl Fn(f64) -> f64) -> Self {
        Self::new(self.rows, self.columns, self.data.iter().map(|value| function(*value)).collect())
    }

    /// Multiply every number; by one, exactly nothing changes.
    #[must_use]
    pub fn times(&self, factor: f64) -> Self {
        self.map(|value| value * factor)
    }

    /// Combine number by number, spreading a single row over the members and a single column over the axis.
    #[must_use]
    pub fn zip(&self, other: &Self, function: impl Fn(f64, f64) -> f64) -> Self {
        let rows = self.rows.max(other.rows);
        let columns = self.columns.max(other.columns);
        let mut data = Vec::with_capacity(rows * columns);
        for member in 0..rows {
            match (self.member(member), other.member(member)) {
                ([left], right) => data.extend(right.iter().map(|value| function(*left, *value))),
                (left, [right]) => data.extend(left.iter().map(|value| function(*value, *right))),
                (left, right) => {
                    data.extend(left.iter().zip(right).map(|(left, right)| function(*left, *right)));
                }
            }
        }
        Self::new(rows, columns, data)
    }

    /// Turn every row into a new row of `columns` numbers.
    #[must_use]
    pub fn map_rows(&self, columns: usize, mut function: impl FnMut(&[f64], &mut [f64])) -> Self {
        let mut data = vec![f64::NAN; self.rows * columns];
        if columns > 0 {
            for (member, target) in data.chunks_exact_mut(columns).enumerate() {
                function(self.member(member), target);
            }
        }
        Self::new(self.rows, columns, data)
    }

    /// As [`Self::map_rows`], for a function that takes long enough to be interrupted.
    ///
    /// # Errors
    /// What the function gives for the first row where it stops; [`Cancelled`] between two rows.
    pub fn map_rows_until(
        &self,
        columns: usize,
        cancellation: &Cancellation,
        mut function: impl FnMut(&[f64], &mut [f64]) -> Result<(), Cancelled>,
    ) -> Result<Self, Cancelled> {
        let mut stopped = Ok(());
        let out = self.map_rows(columns, |from, to| {
            if stopped.is_ok() {
                stopped = cancellation.check().and_then(|()| function(from, to));
            }
        });
        stopped.map(|()| out)
    }

    /// The columns `range`, for all rows.
    #[must_use]
    pub fn columns_in(&self, range: std::ops::Range<usize>) -> Self {
        let columns = range.len();
        self.map_rows(columns, |from, to| {
            if let Some(part) = from.get(range.clone()) {
                to.copy_from_slice(part);
            }
        })
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn rows_that_are_interrupted_are_not_computed() {
        let block = Block::new(3, 1, vec![1.0, 2.0, 3.0]);
        let cancellation = Cancellation::new();
        let mut computed = 0;
        let stopped = block.map_rows_until(1, &cancellation, |_, _| {
            computed += 1;
            cancellation.cancel();
            Ok(())
        });
        assert!(stopped.is_err() && computed == 1);
        cancellation.reset();
        let doubled = block.map_rows_until(1, &cancellation, |from, to| {
            to[0] = 2.0 * from[0];
            Ok(())
        });
        assert_eq!(doubled.unwrap().data(), [2.0, 4.0, 6.0]);
    }

    #[test]
    fn a_certain_row_meets_every_member() {
        let series = Block::row(vec![1.0, 2.0, 3.0]);
        let factor = Block::column(vec![10.0, 100.0]);
        let product = series.zip(&factor, |a, b| a * b);
        assert_eq!((product.rows(), product.columns()), (2, 3));
        assert_eq!(product.member(1), [100.0, 200.0, 300.0]);
        assert_eq!(factor.zip(&series, |a, b| a * b), product);
    }

    #[test]
    fn a_single_column_series_is_not_taken_for_a_quantity_of_another_length() {
        let one = Block::row(vec![2.0]);
        assert_eq!(one.zip(&one, |a, b| a + b).data(), [4.0]);
    }
}
