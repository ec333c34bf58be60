//! Products of a sparse row matrix with vectors, `G x` and `Gᵀ y`.
//!
//! Both split the rows into chunks of about as many stored values; where they
//! are cut depends on the matrix alone. `Gᵀ y` adds the chunks' results in order,
//! and a row is always summed over the same lanes, so the result has the same
//! bits on any number of threads.

use rayon::prelude::*;

use crate::error::{CoreError, Result};

/// Chunks of rows of `G x`.
const ROW_CHUNKS: usize = 64;

/// Most chunks of rows of `Gᵀ y`, each of which needs a vector of its own …
const MOST_PARTIAL_SUMS: usize = 16;

/// … so there are fewer of them where they would hold less than this many stored
/// values per column.
const STORED_PER_SUM: usize = 8;

/// Sums of one row that run side by side; they hide the latency of an addition.
const LANES: usize = 8;

/// Columns of `Gᵀ y` whose partial sums are added at a time.
const COLUMNS_AT_ONCE: usize = 4096;

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
        let mut parts = Vec::with_capacity(ROW_CHUNKS);
        let mut rest = out;
        for rows in self.row_chunks(ROW_CHUNKS) {
            let (part, after) = rest.split_at_mut(rows.len());
            parts.push((rows, part));
            rest = after;
        }
        parts.into_par_iter().for_each(|(rows, part)| {
            for (row, sum) in rows.zip(part) {
                *sum = self.row_dot(row, x);
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
        let fitting = self.columns.len() / (STORED_PER_SUM * self.column_count).max(1);
        let chunks = self.row_chunks(fitting.clamp(2, MOST_PARTIAL_SUMS));
        let partial: Vec<Vec<f64>> = chunks
            .into_par_iter()
            .map(|rows| {
                let mut sums = vec![0.0; self.column_count];
                for row in rows {
                    self.add_row(row, y[row], &mut sums);
                }
                sums
            })
            .collect();
        out.par_chunks_mut(COLUMNS_AT_ONCE)
            .enumerate()
            .for_each(|(chunk, out)| {
                let first = chunk * COLUMNS_AT_ONCE;
                out.fill(0.0);
                for part in &partial {
                    for (sum, more) in out.iter_mut().zip(&part[first..]) {
                        *sum += more;
                    }
                }
            });
        Ok(())
    }

    /// Ranges of rows that hold about as many stored values each.
    fn row_chunks(&self, count: usize) -> Vec<std::ops::Range<usize>> {
        let stored = self.columns.len();
        let cut = |chunk: usize| {
            let value = (stored * chunk / count) as i64;
            let row = self.row_pointers.partition_point(|&start| start < value);
            row.min(self.row_count())
        };
        let mut cuts: Vec<usize> = (0..count).map(cut).collect();
        cuts.push(self.row_count());
        cuts[0] = 0;
        cuts.windows(2).map(|ends| ends[0]..ends[1]).collect()
    }

    fn row_range(&self, row: usize) -> std::ops::Range<usize> {
        self.row_pointers[row] as usize..self.row_pointers[row + 1] as usize
    }

    fn row_dot(&self, row: usize, x: &[f64]) -> f64 {
        let range = self.row_range(row);
        let (columns, last_columns) = self.columns[range.clone()].as_chunks::<LANES>();
        let (values, last_values) = self.values[range].as_chunks::<LANES>();
        let mut sums = [0.0; LANES];
        for (columns, values) in columns.iter().zip(values) {
            for lane in 0..LANES {
                sums[lane] += values[lane].into() * x[columns[lane] as usize];
            }
        }
        for (lane, (&column, &value)) in last_columns.iter().zip(last_values).enumerate() {
            sums[lane] += value.into() * x[column as usize];
        }
        sums.iter().sum()
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
