//! Hyperparameters beside the entries they belong to.

use crate::kernels::error::KernelError;

/// Hyperparameters of one entry, in the constructor's order; what a family does not have is 0.
pub type Triple = [f64; 3];

/// Up to three hyperparameters of equal length `m`; entry `i` has number `(i / repeat) mod m`.
///
/// That covers a constant (`m = 1`), one value a row, one value a column and one an entry.
#[derive(Debug, Clone, Copy)]
pub struct Hyper<'a> {
    values: [&'a [f64]; 3],
    parameters: usize,
    length: usize,
    repeat: usize,
}

impl<'a> Hyper<'a> {
    /// # Errors
    /// [`KernelError::Shape`] for lengths that differ, [`KernelError::Empty`] for no entry.
    pub fn new(values: &[&'a [f64]], repeat: usize) -> Result<Self, KernelError> {
        let length = values.first().map_or(1, |first| first.len());
        let mut laid = [&[] as &[f64]; 3];
        for (target, &each) in laid.iter_mut().zip(values) {
            if each.is_empty() {
                return Err(KernelError::Empty { argument: "hyper" });
            }
            if each.len() != length {
                return Err(KernelError::Shape {
                    argument: "hyper",
                    expected: vec![length],
                    found: vec![each.len()],
                });
            }
            *target = each;
        }
        Ok(Self {
            values: laid,
            parameters: values.len(),
            length,
            repeat: repeat.max(1),
        })
    }

    /// The hyperparameters, where all entries share them.
    pub fn constant(&self) -> Option<Triple> {
        (self.length == 1).then(|| self.set(0))
    }

    /// Number of hyperparameters.
    pub fn parameters(&self) -> usize {
        self.parameters
    }

    /// Number of different sets of hyperparameters.
    pub fn count(&self) -> usize {
        self.length
    }

    /// The set with number `number`.
    pub fn set(&self, number: usize) -> Triple {
        self.values
            .map(|each| each.get(number).copied().unwrap_or(0.0))
    }

    /// Writes the hyperparameters of the entries from `start` on into `rows`, one row for each.
    pub fn lay_out<const N: usize>(&self, start: usize, count: usize, rows: &mut [[f64; N]; 3]) {
        for (row, values) in rows.iter_mut().zip(self.values) {
            if !values.is_empty() {
                self.lay_out_row(values, start, &mut row[..count]);
            }
        }
    }

    /// Writes what belongs to the entries from `start` on, one value a set, into `row`.
    pub fn lay_out_row(&self, values: &[f64], start: usize, row: &mut [f64]) {
        let mut number = (start / self.repeat) % self.length;
        let mut used = start % self.repeat;
        let mut rest = row;
        while !rest.is_empty() {
            // A run is one value repeated, or as many values as follow each other.
            let run = if self.repeat == 1 {
                rest.len().min(self.length - number)
            } else {
                rest.len().min(self.repeat - used)
            };
            let (now, later) = rest.split_at_mut(run);
            if self.repeat == 1 {
                now.copy_from_slice(&values[number..number + run]);
                number += run;
            } else {
                now.fill(values[number]);
                number += 1;
            }
            used = 0;
            number = if number == self.length { 0 } else { number };
            rest = later;
        }
    }
}
