//! Small dense least squares: Householder QR of columns scaled to unit length.
//!
//! Source: Golub and Van Loan (2013), Matrix Computations, 4th edition, sections 5.2 (QR), 5.3 (least squares) and 8.6
//! (one-sided Jacobi singular values).

/// The factorisation X D = Q R of n × k columns, D dividing each column by its length. Scaling makes the result the
/// same for a column in W/m2 and the same column in mW/m2.
pub(crate) struct Factorisation {
    /// Columns of R, entry `i` of column `j` for i ≤ j.
    upper: Vec<Vec<f64>>,
    /// Householder vectors, `reflectors[j][i]` for rows j.. .
    reflectors: Vec<Vec<f64>>,
    /// Lengths of the columns.
    lengths: Vec<f64>,
}

/// A column that the ones before it combine to, and the places of those that take part.
#[derive(Debug)]
pub(crate) struct Dependence {
    pub(crate) column: usize,
    pub(crate) with: Vec<usize>,
}

/// √ Σ x², by way of the largest value only where the squares would leave the range of a double.
fn length(values: &[f64]) -> f64 {
    let plain = dot(values, values);
    if plain > 1e-200 && plain < 1e200 {
        return plain.sqrt();
    }
    let largest = values.iter().fold(0.0_f64, |largest, value| largest.max(value.abs()));
    if largest > 0.0 {
        largest * values.iter().map(|value| (value / largest).powi(2)).sum::<f64>().sqrt()
    } else {
        0.0
    }
}

/// Σ a b in four interleaved sums, always the same four: one running sum waits for each addition to finish.
fn dot(a: &[f64], b: &[f64]) -> f64 {
    let mut sums = [0.0; 4];
    let (mut fours_of_a, mut fours_of_b) = (a.chunks_exact(4), b.chunks_exact(4));
    for (four_of_a, four_of_b) in (&mut fours_of_a).zip(&mut fours_of_b) {
        for (sum, (a, b)) in sums.iter_mut().zip(four_of_a.iter().zip(four_of_b)) {
            *sum += a * b;
        }
    }
    let rest: f64 = fours_of_a.remainder().iter().zip(fours_of_b.remainder()).map(|(a, b)| a * b).sum();
    (sums[0] + sums[1]) + (sums[2] + sums[3]) + rest
}

/// Subtracts 2 (v · x) v for a unit v.
fn reflect(reflector: &[f64], values: &mut [f64]) {
    let twice = 2.0 * dot(reflector, values);
    for (value, &along) in values.iter_mut().zip(reflector) {
        *value -= twice * along;
    }
}

impl Factorisation {
    /// Factorises columns of one length, at least as many rows as columns.
    ///
    /// A column whose distance from the span of those before it is within the rounding of its own length is a
    /// [`Dependence`].
    pub(crate) fn of(columns: &[Vec<f64>]) -> Result<Self, Dependence> {
        let mut upper: Vec<Vec<f64>> = Vec::with_capacity(columns.len());
        let mut reflectors: Vec<Vec<f64>> = Vec::with_capacity(columns.len());
        let mut lengths = Vec::with_capacity(columns.len());
        for (place, column) in columns.iter().enumerate() {
            let size = length(column);
            if size <= 0.0 {
                return Err(Dependence { column: place, with: Vec::new() });
            }
            let mut values: Vec<f64> = column.iter().map(|value| value / size).collect();
            for (row, reflector) in reflectors.iter().enumerate() {
                reflect(reflector, &mut values[row..]);
            }
            let rest = length(&values[place..]);
            if rest <= 8.0 * f64::EPSILON * (column.len() as f64).sqrt() {
                return Err(Dependence { column: place, with: takes_part(&upper, &values[..place]) });
            }
            let diagonal = -rest.copysign(values[place]);
            let mut reflector = values[place..].to_vec();
            reflector[0] -= diagonal;
            let size_of_reflector = length(&reflector);
            reflector.iter_mut().for_each(|value| *value /= size_of_reflector);
            values.truncate(place);
            values.push(diagonal);
            upper.push(values);
            reflectors.push(reflector);
            lengths.push(size);
        }
        Ok(Self { upper, reflectors, lengths })
    }

    /// The coefficients that minimise ‖y − X β‖.
    pub(crate) fn solve(&self, response: &[f64]) -> Vec<f64> {
        let mut rotated = response.to_vec();
        for (row, reflector) in self.reflectors.iter().enumerate() {
            reflect(reflector, &mut rotated[row..]);
        }
        rotated.truncate(self.upper.len());
        let scaled = back_substitute(&self.upper, rotated);
        scaled.iter().zip(&self.lengths).map(|(value, size)| value / size).collect()
    }

    /// (XᵀX)⁻¹ = D R⁻¹ R⁻ᵀ D, row by row.
    pub(crate) fn inverse_of_normal_matrix(&self) -> Vec<Vec<f64>> {
        let count = self.upper.len();
        let inverse: Vec<Vec<f64>> = (0..count)
            .map(|place| {
                let mut unit = vec![0.0; count];
                unit[place] = 1.0;
                back_substitute(&self.upper, unit)
            })
            .collect();
        let entry = |row: usize, column: usize| {
            let product: f64 = inverse.iter().map(|part| part[row] * part[column]).sum();
            product / self.lengths[row] / self.lengths[column]
        };
        (0..count).map(|row| (0..count).map(|column| entry(row, column)).collect()).collect()
    }

    /// The ratio of the largest to the smallest singular value of the columns scaled to unit length.
    pub(crate) fn condition_number(&self) -> f64 {
        let count = self.upper.len();
        let mut columns: Vec<Vec<f64>> = self.upper.clone();
        columns.iter_mut().for_each(|column| column.resize(count, 0.0));
        // One-sided Jacobi: turn pairs of columns until all are at right angles; convergence is quadratic.
        for _ in 0..60 {
            let mut largest_cosine = 0.0_f64;
            for first in 0..count {
                for second in first + 1..count {
                    largest_cosine = largest_cosine.max(orthogonalise(&mut columns, first, second));
                }
            }
            if largest_cosine < 1e-15 {
                break;
            }
        }
        let sizes = columns.iter().map(|column| length(column));
        let (least, greatest) = sizes
            .fold((f64::INFINITY, 0.0_f64), |(least, greatest), size| (least.min(size), greatest.max(size)));
        greatest / least
    }
}

/// Turns two columns in their plane so that they stand at right angles; returns the cosine they had.
fn orthogonalise(columns: &mut [Vec<f64>], first: usize, second: usize) -> f64 {
    let (a, b) = (dot(&columns[first], &columns[first]), dot(&columns[second], &columns[second]));
    let product = dot(&columns[first], &columns[second]);
    let cosine = product.abs() / (a * b).sqrt();
    if cosine < 1e-16 {
        return 0.0;
    }
    let cotangent = (b - a) / (2.0 * product);
    let tangent = cotangent.signum() / (cotangent.abs() + cotangent.hypot(1.0));
    let (cos, sin) = (1.0 / tangent.hypot(1.0), tangent / tangent.hypot(1.0));
    let (head, tail) = columns.split_at_mut(second);
    for (x, y) in head[first].iter_mut().zip(tail[0].iter_mut()) {
        (*x, *y) = (cos * *x - sin * *y, sin * *x + cos * *y);
    }
    cosine
}

/// Solves R x = b for the upper triangle given by columns.
fn back_substitute(upper: &[Vec<f64>], mut right: Vec<f64>) -> Vec<f64> {
    for column in (0..right.len()).rev() {
        right[column] /= upper[column][column];
        let solved = right[column];
        for (value, &entry) in right.iter_mut().zip(&upper[column][..column]) {
            *value -= solved * entry;
        }
    }
    right
}

/// Which of the earlier columns combine to one whose rotated entries these are.
fn takes_part(upper: &[Vec<f64>], rotated: &[f64]) -> Vec<usize> {
    let weights = back_substitute(upper, rotated.to_vec());
    weights.iter().enumerate().filter(|(_, weight)| weight.abs() > 1e-8).map(|(place, _)| place).collect()
}
