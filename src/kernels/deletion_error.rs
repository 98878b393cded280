//! The Monte Carlo error of one column's score.

use super::deletion::Order;
use super::deletion_column::Work;
use super::deletion_loops::Powers;
use super::error::KernelError;
use super::ordered::Interrupt;
use super::vector::dispatch;

impl Work<'_> {
    /// Monte Carlo error and contributions of the series `n z` with these `Σ z²` and `Σ z³`; the
    /// series itself is looked at where draws are not independent.
    pub(super) fn error(
        &mut self,
        mut powers: (f64, f64),
        efficiency: f64,
        interrupt: &Interrupt<'_>,
    ) -> Result<(f64, f64), KernelError> {
        let count = self.series.len() as f64;
        if let Order::Repeated(repeats) = self.shared.order {
            let mut sums = vec![0.0; self.series.len()];
            for (entry, &repeat) in self.series.iter().zip(repeats) {
                if let Some(sum) = usize::try_from(repeat).ok().and_then(|r| sums.get_mut(r)) {
                    *sum += entry;
                }
            }
            powers = dispatch(Powers {
                z: &sums,
                to: &mut [],
            });
        }
        // The series is the influence over n, and its mean is 0.
        let variance = match &mut self.lagged {
            Some(lagged) => {
                lagged.take(&self.series);
                count * lagged.long_run(&self.series, interrupt)?
            }
            None => powers.0,
        };
        Ok((variance.sqrt(), efficiency.sqrt() * contributions(powers)))
    }
}

/// `(Σ z²)³/(Σ z³)²`; `+inf` for a symmetric series.
fn contributions((squares, cubes): (f64, f64)) -> f64 {
    if squares == 0.0 || cubes == 0.0 {
        return f64::INFINITY;
    }
    squares.powi(3) / (cubes * cubes)
}
