//! Products of a sparse row matrix with vectors, `G x` and `Gᵀ y`.
//!
//! Both split the rows into a number of chunks that depends on the matrix
//! alone, and `Gᵀ y` adds the chunks' results in order, so the result has the
//! same bits on any number of threads.

use rayon::prelude::*;

use crate::error::{CoreError, Result};

/// Chunks of rows; fixed, so that the order of every sum is fixed.
const ROW_CHUNKS: usize = 16;

/// A CSR matrix: 64-bit row pointers, 32-bit column indices.
#[derive(Debug, Clone)]
pub struct SparseRows<V> {
    row_pointers: Vec<i64>,
    columns: Vec<i32>,
    values: Vec<V>,
    column_count: usize,
}

impl<V: Copy + Into<f64> + Sync> SparseRows<V> {
    /// Takes the three arrays of a CSR matrix and checks them.
    ///
    /// # Errors
    /// [`CoreError::Invalid`] if lengths disagree, row pointers fall, or a
    /// column index lies outside `0..column_count`.
    pub fn new(
        row_pointers: Vec<i64>,
        columns: Vec<i32>,
        values: Vec<V>,
        column_count: usize,
    ) -> Result<Self> {
        let stored = columns.len();
        if values.len() != stored {
            return Err(CoreError::invalid(
                "values",
                format!("{stored} stored values, one per column index"),
                values.len().to_string(),
            ));
        }
        let ends_fit = row_pointers.first() == Some(&0)
            && row_pointers.last() == Some(&(stored as i64))
            && row_pointers.windows(2).all(|pair| pair[0] <= pair[1]);
        if !ends_fit {
            return Err(CoreError::invalid(
                "row pointers",
                format!("a rising list from 0 to {stored}"),
                format!("{:?} … {:?}", row_pointers.first(), row_pointers.last()),
            ));
        }
        let outside = columns
            .iter()
            .find(|&&column| column < 0 || column as usize >= column_count);
        if let Some(column) = outside {
            return Err(CoreError::invalid(
                "column index",
                format!("0 to {}", column_count.saturating_sub(1)),
                column.to_string(),
            ));
        }
        Ok(Self {
            row_pointers,
            columns,
            values,
            column_count,
        })
    }

    /// Number of rows.
    #[must_use]
    pub fn row_count(&self) -> usize {
        self.row_pointers.len() - 1
    }

    /// Number of columns.
    #[must_use]
    pub fn column_count(&self) -> usize {
        self.column_count
    }

    /// `out = G x`; `x` has one entry per column, `out` one per row.
    ///
    /// # Errors
    /// [`CoreError::Invalid`] if a length does not fit.
    pub fn times(&self, x: &[f64], out: &mut [f64]) -> Result<()> {
        check_length("x", x.len(), self.column_count)?;
        check_length("out", out.len(), self.row_count())?;
        let rows_per_chunk = self.rows_per_chunk();
        out.par_chunks_mut(rows_per_chunk)
            .enumerate()
            .for_each(|(chunk, part)| {
                for (offset, sum) in part.iter_mut().enumerate() {
                    *sum = self.row_dot(chunk * rows_per_chunk + offset, x);
                }
            });
        Ok(())
    }

    /// `out = Gᵀ y`; `y` has one entry per row, `out` one per column.
    ///
    /// # Errors
    /// [`CoreError::Invalid`] if a length does not fit.
    pub fn transposed_times(&self, y: &[f64], out: &mut [f64]) -> Result<()> {
        check_length("y", y.len(), self.row_count())?;
        check_length("out", out.len(), self.column_count)?;
        let rows_per_chunk = self.rows_per_chunk();
        let partial: Vec<Vec<f64>> = y
            .par_chunks(rows_per_chunk)
            .enumerate()
            .map(|(chunk, part)| {
                let mut sums = vec![0.0; self.column_count];
                for (offset, &weight) in part.iter().enumerate() {
                    self.add_row(chunk * rows_per_chunk + offset, weight, &mut sums);
                }
                sums
            })
            .collect();
        out.par_iter_mut().enumerate().for_each(|(column, sum)| {
            *sum = partial.iter().map(|part| part[column]).sum();
        });
        Ok(())
    }

    fn rows_per_chunk(&self) -> usize {
        self.row_count().div_ceil(ROW_CHUNKS).max(1)
    }

    fn row_range(&self, row: usize) -> std::ops::Range<usize> {
        self.row_pointers[row] as usize..self.row_pointers[row + 1] as usize
    }

    fn row_dot(&self, row: usize, x: &[f64]) -> f64 {
        let range = self.row_range(row);
        self.columns[range.clone()]
            .iter()
            .zip(&self.values[range])
            .map(|(&column, &value)| value.into() * x[column as usize])
            .sum()
    }

    fn add_row(&self, row: usize, weight: f64, sums: &mut [f64]) {
        let range = self.row_range(row);
        for (&column, &value) in self.columns[range.clone()].iter().zip(&self.values[range]) {
            sums[column as usize] += weight * value.into();
        }
    }
}

fn check_length(what: &str, got: usize, expected: usize) -> Result<()> {
    if got == expected {
        Ok(())
    } else {
        Err(CoreError::invalid(
            what,
            format!("{expected} entries"),
            got.to_string(),
        ))
    }
}
