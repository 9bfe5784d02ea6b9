//! A periodic steady state and how its output is read.

use crate::engine::scheme::Radau;
use crate::engine::step::State;

/// A periodic steady state.
#[derive(Clone, Debug)]
pub struct PeriodicSolution {
    /// State at phase zero.
    pub start: State<f64>,
    /// Phases of the samples in (0, 1].
    pub phases: Vec<f64>,
    /// Quadrature weights, summing to one.
    pub weights: Vec<f64>,
    /// Output deviation from bias at the samples, V.
    pub outputs: Vec<f64>,
    /// Port voltages (deviations, V) at the samples, port-minor.
    pub ports: Vec<f64>,
    /// Mesh: start phase and length of each element.
    pub elements: Vec<(f64, f64)>,
    /// Stages an element.
    pub stages: usize,
    /// Largest change of H1…H20 relative to H1 under bisection.
    pub error_estimate: f64,
    /// Magnitude of the largest Floquet multiplier.
    pub largest_multiplier: f64,
    /// Whether the base-charge denominator of some transistor left its straight line.
    pub beyond_early_range: bool,
}

impl PeriodicSolution {
    /// rms of the output's deviation from bias, V.
    pub fn rms(&self) -> f64 {
        self.weights
            .iter()
            .zip(&self.outputs)
            .map(|(w, y)| w * y * y)
            .sum::<f64>()
            .sqrt()
    }

    /// The output within each element as `Σ ck·τ^k`, k = 0…3, τ in [−1, 1], with the element's start and length as
    /// shares of the period: the cubic through its start and its three stages.
    pub fn cubics(&self) -> impl Iterator<Item = (f64, f64, [f64; 4])> + '_ {
        let radau = Radau::new(self.stages);
        // values at four even points give the cubic's coefficients
        let readings =
            [-1.0, -1.0 / 3.0, 1.0 / 3.0, 1.0].map(|tau: f64| radau.reading(0.5 * (1.0 + tau)));
        self.elements
            .iter()
            .enumerate()
            .map(move |(element, &(start, length))| {
                let first = element * self.stages;
                let before = if first == 0 {
                    self.outputs.len() - 1
                } else {
                    first - 1
                };
                let values = || {
                    std::iter::once(&self.outputs[before])
                        .chain(&self.outputs[first..first + self.stages])
                };
                let [a, b, c, d] = [0, 1, 2, 3].map(|k| {
                    readings[k]
                        .iter()
                        .zip(values())
                        .map(|(w, y)| w * y)
                        .sum::<f64>()
                });
                let cubic = [
                    (9.0 * (b + c) - (a + d)) / 16.0,
                    (27.0 * (c - b) - (d - a)) / 16.0,
                    9.0 * ((a + d) - (b + c)) / 16.0,
                    9.0 * ((d - a) - 3.0 * (c - b)) / 16.0,
                ];
                (start, length, cubic)
            })
    }

    /// The output on `size` even points of the period from phase zero, V, by the collocation polynomials.
    pub fn even_grid(&self, size: usize) -> Vec<f64> {
        let radau = Radau::new(self.stages);
        let mut grid = Vec::with_capacity(size);
        let mut element = 0;
        for k in 0..size {
            let phase = k as f64 / size as f64;
            while element + 1 < self.elements.len() && self.elements[element + 1].0 <= phase {
                element += 1;
            }
            let (start, length) = self.elements[element];
            let first = element * self.stages;
            let before = if first == 0 {
                self.outputs.len() - 1
            } else {
                first - 1
            };
            let values = std::iter::once(&self.outputs[before])
                .chain(&self.outputs[first..first + self.stages]);
            let weights = radau.reading((phase - start) / length);
            grid.push(weights.iter().zip(values).map(|(w, y)| w * y).sum());
        }
        grid
    }
}
