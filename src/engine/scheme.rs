//! Implicit schemes as inverse coefficients over the step (see [`crate::network::reduction`]).
//!
//! Backward differences: the derivative of the polynomial through the last points (C. W. Gear, *Numerical Initial
//! Value Problems in Ordinary Differential Equations*, 1971). Radau IIA: collocation at the right-hand Radau points
//! (E. Hairer and G. Wanner, *Solving Ordinary Differential Equations II*, section IV.5).

use crate::network::Scheme;
use crate::numeric::Matrix;
use nalgebra::{DMatrix, DVector};

/// Backward differences of third order: `(11·q0 − 18·q1 + 9·q2 − 2·q3)/(6·h)`, newest first.
pub const BDF3: [f64; 4] = [11.0 / 6.0, -3.0, 1.5, -1.0 / 3.0];

/// The single-stage scheme of a backward-difference formula whose leading coefficient is `leading`, for a step of
/// `step` seconds.
pub fn backward_difference(leading: f64, step: f64) -> Scheme {
    let mut rates = Matrix::zero(1, 1);
    rates[(0, 0)] = leading / step;
    Scheme { rates }
}

/// A collocation method on the right-hand Radau points of [0, 1].
#[derive(Clone, Debug)]
pub struct Radau {
    /// Stage positions c, ascending, the last exactly 1.
    pub nodes: Vec<f64>,
    /// Quadrature weights b of the stages, exact to degree 2s − 2.
    pub weights: Vec<f64>,
    /// Inverse coefficients for a unit step, s × s.
    pub unit_rates: Matrix<f64>,
}

impl Radau {
    /// The method of `stages` stages, of order 2·`stages` − 1.
    pub fn new(stages: usize) -> Self {
        let nodes = radau_nodes(stages);
        let mut points = vec![0.0];
        points.extend(&nodes);
        let mut unit_rates = Matrix::zero(stages, stages);
        for i in 0..stages {
            let row = derivative_weights(&points, i + 1);
            for j in 0..stages {
                unit_rates[(i, j)] = row[j + 1];
            }
        }
        Radau {
            weights: interpolatory_weights(&nodes),
            nodes,
            unit_rates,
        }
    }

    /// Number of stages.
    pub fn stages(&self) -> usize {
        self.nodes.len()
    }

    /// The scheme for a step of `step` seconds.
    pub fn scheme(&self, step: f64) -> Scheme {
        Scheme {
            rates: self.unit_rates.map(|rate| rate / step),
        }
    }

    /// Weights by which the values at (start, stage 1, …, stage s) of a unit step give the value at `position`, which
    /// may lie beyond 1.
    pub fn reading(&self, position: f64) -> Vec<f64> {
        let mut points = vec![0.0];
        points.extend(&self.nodes);
        lagrange(&points, position)
    }
}

/// Legendre polynomials P_n and P_{n−1} at x.
fn legendre(n: usize, x: f64) -> (f64, f64) {
    let (mut before, mut now) = (0.0, 1.0);
    for k in 0..n {
        let next = ((2 * k + 1) as f64 * x * now - k as f64 * before) / (k + 1) as f64;
        before = now;
        now = next;
    }
    (now, before)
}

/// Roots of P_s − P_{s−1}, mapped to (0, 1].
fn radau_nodes(stages: usize) -> Vec<f64> {
    let f = |x: f64| {
        let (now, before) = legendre(stages, x);
        now - before
    };
    // the inner roots interlace well inside a fine grid; the last root is 1 itself
    let grid = 200 * stages;
    let at = |k: usize| -1.0 + (2.0 - 1e-6) * k as f64 / grid as f64;
    let mut nodes: Vec<f64> = (0..grid)
        .filter_map(|k| crate::numeric::roots::bisect(at(k), at(k + 1), 0.0, f))
        .map(|x| 0.5 * (1.0 + x))
        .collect();
    nodes.push(1.0);
    nodes
}

/// Lagrange polynomials of `points` at `x`.
fn lagrange(points: &[f64], x: f64) -> Vec<f64> {
    (0..points.len())
        .map(|j| {
            (0..points.len())
                .filter(|&k| k != j)
                .map(|k| (x - points[k]) / (points[j] - points[k]))
                .product()
        })
        .collect()
}

/// Derivatives at point number `at` of the Lagrange polynomials of `points`.
fn derivative_weights(points: &[f64], at: usize) -> Vec<f64> {
    let product = |j: usize, skip: usize| -> f64 {
        (0..points.len())
            .filter(|&k| k != j && k != skip)
            .map(|k| (points[at] - points[k]) / (points[j] - points[k]))
            .product()
    };
    (0..points.len())
        .map(|j| {
            if j == at {
                (0..points.len())
                    .filter(|&k| k != at)
                    .map(|k| 1.0 / (points[at] - points[k]))
                    .sum()
            } else {
                product(j, at) / (points[j] - points[at])
            }
        })
        .collect()
}

/// Weights that integrate every polynomial of degree below the number of nodes over [0, 1].
fn interpolatory_weights(nodes: &[f64]) -> Vec<f64> {
    let size = nodes.len();
    let powers = DMatrix::from_fn(size, size, |power, node| nodes[node].powi(power as i32));
    let integrals = DVector::from_fn(size, |power, _| 1.0 / (power + 1) as f64);
    match powers.lu().solve(&integrals) {
        Some(weights) => weights.iter().copied().collect(),
        // distinct nodes always give a regular system
        None => vec![1.0 / size as f64; size],
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn three_stages_are_the_published_radau_iia() {
        let radau = Radau::new(3);
        let root = 6f64.sqrt();
        // Hairer & Wanner II, table IV.5.6
        let nodes = [(4.0 - root) / 10.0, (4.0 + root) / 10.0, 1.0];
        let weights = [(16.0 - root) / 36.0, (16.0 + root) / 36.0, 1.0 / 9.0];
        for k in 0..3 {
            assert!((radau.nodes[k] - nodes[k]).abs() < 1e-15);
            assert!((radau.weights[k] - weights[k]).abs() < 1e-14);
        }
        let first_row = [
            (88.0 - 7.0 * root) / 360.0,
            (296.0 - 169.0 * root) / 1800.0,
            (-2.0 + 3.0 * root) / 225.0,
        ];
        let mut identity = [0.0; 3];
        for (j, entry) in identity.iter_mut().enumerate() {
            *entry = (0..3)
                .map(|k| first_row[k] * radau.unit_rates[(k, j)])
                .sum();
        }
        assert!(
            (identity[0] - 1.0).abs() < 1e-14
                && identity[1].abs() < 1e-14
                && identity[2].abs() < 1e-14
        );
    }

    #[test]
    fn weights_integrate_to_degree_two_s_minus_two() {
        for stages in 1..=6 {
            let radau = Radau::new(stages);
            for degree in 0..=2 * stages - 2 {
                let sum: f64 = (0..stages)
                    .map(|k| radau.weights[k] * radau.nodes[k].powi(degree as i32))
                    .sum();
                assert!(
                    (sum * (degree + 1) as f64 - 1.0).abs() < 1e-12,
                    "{stages} stages, degree {degree}"
                );
            }
        }
    }

    #[test]
    fn backward_differences_are_exact_for_a_cubic() {
        let at = |t: f64| 2.0 + t - 3.0 * t * t + 0.5 * t * t * t;
        let (t, h) = (0.7, 0.1);
        let slope: f64 = BDF3
            .iter()
            .enumerate()
            .map(|(k, c)| c * at(t - k as f64 * h))
            .sum::<f64>()
            / h;
        assert!((slope - (1.0 - 6.0 * t + 1.5 * t * t)).abs() < 1e-13);
    }
}
