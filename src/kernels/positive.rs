//! Linear systems with a symmetric matrix that is positive, or nearly so.

/// Pivots below this share of their diagonal entry count as none.
const LEAST: f64 = 1e-13;

/// Solves `A x = b` for a symmetric positive matrix, row after row, by Cholesky's factors.
///
/// Directions in which the matrix vanishes are left at 0.
pub fn solve(matrix: &[f64], b: &[f64]) -> Vec<f64> {
    let size = b.len();
    let mut factor = vec![0.0; size * size];
    let mut x = b.to_vec();
    for i in 0..size {
        for j in 0..=i {
            let before: f64 = (0..j)
                .map(|k| factor[i * size + k] * factor[j * size + k])
                .sum();
            let rest = matrix[i * size + j] - before;
            let pivot = factor[j * size + j];
            factor[i * size + j] = if i == j {
                let diagonal = matrix[i * size + i];
                if rest > LEAST * diagonal {
                    rest.sqrt()
                } else {
                    0.0
                }
            } else if pivot > 0.0 {
                rest / pivot
            } else {
                0.0
            };
        }
    }
    for i in 0..size {
        let before: f64 = (0..i).map(|k| factor[i * size + k] * x[k]).sum();
        x[i] = over(x[i] - before, factor[i * size + i]);
    }
    for i in (0..size).rev() {
        let after: f64 = (i + 1..size).map(|k| factor[k * size + i] * x[k]).sum();
        x[i] = over(x[i] - after, factor[i * size + i]);
    }
    x
}

fn over(value: f64, pivot: f64) -> f64 {
    if pivot > 0.0 { value / pivot } else { 0.0 }
}
