//! Which elements carry the error of a steady state.

use super::element::{Element, FINEST, FINEST_LEVEL};
use super::shooting::factor_or_shift;
use super::sweep::{Pass, Sweep};
use super::{PeriodicSolver, UnitDrive, WATCHED_HARMONICS};
use crate::engine::error::EngineError;
use crate::numeric::Matrix;

/// Harmonics whose sensitivity to the state weighs the elements for refinement.
const WEIGHED_HARMONICS: usize = 3;

/// Share of the tolerance that elements left alone may add up to.
const REFINEMENT_SHARE: f64 = 0.3;

impl PeriodicSolver<'_> {
    /// The mesh of `coarse` with those elements bisected that carry its error.
    pub(super) fn refined(
        &mut self,
        drive: UnitDrive,
        amplitude: f64,
        coarse: &Pass,
    ) -> Result<Vec<Element>, EngineError> {
        let effects = self.effects(drive, amplitude, coarse)?;
        let limit = refinement_limit(&effects, REFINEMENT_SHARE * self.options.tolerance);
        let mut mesh = Vec::with_capacity(coarse.mesh.len() * 2);
        for (element, effect) in coarse.mesh.iter().zip(&effects) {
            if *effect <= limit || element.level >= FINEST_LEVEL {
                mesh.push(*element);
            } else if *effect > 64.0 * limit && element.level + 1 < FINEST_LEVEL {
                mesh.extend(element.halves().iter().flat_map(Element::halves));
            } else {
                mesh.extend(element.halves());
            }
        }
        Ok(mesh)
    }

    /// For each element of `coarse`, how far the harmonics move, relative to H1, when it alone is bisected.
    ///
    /// The element's own defects (how its end state and its share of each harmonic move) are weighed with the
    /// sensitivity of the harmonics to the state at that moment, found backwards through the period: a dual-weighted
    /// residual (R. Becker and R. Rannacher, "An optimal control approach to a posteriori error estimation in finite
    /// element methods", Acta Numerica 10, 2001). A charge out of balance by a millionth matters little in itself and
    /// much in a capacitor that takes a thousand periods to lose it; only the weights know.
    fn effects(
        &mut self,
        drive: UnitDrive,
        amplitude: f64,
        coarse: &Pass,
    ) -> Result<Vec<f64>, EngineError> {
        let defects = self.defects(drive, amplitude, coarse)?;
        let size = coarse.end.len();
        let rows = 2 * WEIGHED_HARMONICS;
        let whole = defects.iter().fold(Matrix::identity(size), |map, defect| {
            defect.map.product(&map)
        });
        let backwards = |terminal: Matrix<f64>| {
            let mut weights = vec![terminal];
            for defect in defects.iter().rev() {
                let after = &weights[weights.len() - 1];
                let mut before = after.product(&defect.map);
                for row in 0..rows {
                    for (value, own) in before
                        .row_mut(row)
                        .iter_mut()
                        .zip(defect.output_map.row(row))
                    {
                        *value += own;
                    }
                }
                weights.push(before);
            }
            weights.reverse();
            weights
        };
        // what the start of the period does to the harmonics, then what a kick does by moving that start for good
        let from_start = backwards(Matrix::zero(rows, size)).swap_remove(0);
        let weights = backwards(self.settle_rows(&from_start, &whole)?);
        let reference = self.harmonics(coarse)[0].peak().max(f64::MIN_POSITIVE);
        Ok(defects
            .iter()
            .zip(&weights[1..])
            .map(|(defect, weights)| {
                let mut largest = 0.0f64;
                for row in 0..rows {
                    let moved: f64 = weights
                        .row(row)
                        .iter()
                        .zip(&defect.state)
                        .map(|(w, e)| w * e)
                        .sum();
                    largest = largest.max((moved + defect.harmonics[row]).abs());
                }
                largest / reference
            })
            .collect())
    }

    /// R·(I − Φ)⁻¹ for the rows R and the map Φ of a whole period.
    fn settle_rows(
        &self,
        rows: &Matrix<f64>,
        whole: &Matrix<f64>,
    ) -> Result<Matrix<f64>, EngineError> {
        let scales = self.state_scales();
        let size = whole.rows();
        let mut transposed = Matrix::zero(size, size);
        for row in 0..size {
            for column in 0..size {
                let identity = if row == column { 1.0 } else { 0.0 };
                transposed[(column, row)] =
                    identity - whole[(row, column)] * scales[column] / scales[row];
            }
        }
        let factored = factor_or_shift(&mut transposed)?;
        let mut result = Matrix::zero(rows.rows(), size);
        for row in 0..rows.rows() {
            let mut x: Vec<f64> = rows
                .row(row)
                .iter()
                .zip(&scales)
                .map(|(r, scale)| r * scale)
                .collect();
            factored.solve(&mut x);
            for ((into, x), scale) in result.row_mut(row).iter_mut().zip(&x).zip(&scales) {
                *into = x / scale;
            }
        }
        Ok(result)
    }

    /// Solve each element of `coarse` in two halves from its own start.
    fn defects(
        &mut self,
        drive: UnitDrive,
        amplitude: f64,
        coarse: &Pass,
    ) -> Result<Vec<Defect>, EngineError> {
        let stages = self.radau.stages();
        let ports = self.bank.ports();
        let (nodes, weights) = (self.radau.nodes.clone(), self.radau.weights.clone());
        let inside: [Vec<Vec<f64>>; 2] = [0.0, 0.5].map(|first| {
            self.radau
                .nodes
                .iter()
                .map(|node| self.radau.reading(first + 0.5 * node))
                .collect()
        });
        let size = coarse.end.len();
        let mut sweep = Sweep::new(self, drive, amplitude, &coarse.states[0], false);
        let mut defects = Vec::with_capacity(coarse.mesh.len());
        for (k, element) in coarse.mesh.iter().enumerate() {
            let own = &coarse.ports[k * stages * ports..(k + 1) * stages * ports];
            let before = if k == 0 { coarse.mesh.len() - 1 } else { k - 1 };
            let last =
                &coarse.ports[((before + 1) * stages - 1) * ports..(before + 1) * stages * ports];
            let mut defect = Defect::new(size);
            sweep.state.clone_from(&coarse.states[k]);
            for (half, reading) in element.halves().iter().zip(&inside) {
                for (stage, weights) in reading.iter().enumerate() {
                    for port in 0..ports {
                        let inner: f64 = (0..stages)
                            .map(|j| weights[j + 1] * own[j * ports + port])
                            .sum();
                        sweep.v[stage * ports + port] = weights[0] * last[port] + inner;
                    }
                }
                if !sweep.solve(*half)? {
                    return Err(sweep.no_step(*half));
                }
                let mut dy = Matrix::zero(stages, size);
                let mut own_map = Matrix::identity(size);
                sweep.advance_carrying(*half, &mut own_map, Some(&mut dy));
                let dy = dy.product(&defect.map);
                defect.map = own_map.product(&defect.map);
                for stage in 0..stages {
                    defect.add_output(
                        half,
                        nodes[stage],
                        weights[stage],
                        sweep.y[stage],
                        Some(dy.row(stage)),
                    );
                }
            }
            for stage in 0..stages {
                defect.add_output(
                    element,
                    nodes[stage],
                    -weights[stage],
                    coarse.outputs[k * stages + stage],
                    None,
                );
            }
            for ((defect, now), then) in defect
                .state
                .iter_mut()
                .zip(sweep.state.iter())
                .zip(coarse.states[k + 1].iter())
            {
                *defect = now - then;
            }
            defects.push(defect);
        }
        Ok(defects)
    }
}

/// What changes when one element alone is bisected, and how it passes changes on.
struct Defect {
    /// Change of the end state.
    state: Vec<f64>,
    /// Change of the element's share of (cos, sin) of harmonics 1…20.
    harmonics: Vec<f64>,
    /// ∂(end state)/∂(start state).
    map: Matrix<f64>,
    /// ∂(share of the first harmonics)/∂(start state).
    output_map: Matrix<f64>,
}

impl Defect {
    fn new(size: usize) -> Self {
        Defect {
            state: vec![0.0; size],
            harmonics: vec![0.0; 2 * WATCHED_HARMONICS],
            map: Matrix::identity(size),
            output_map: Matrix::zero(2 * WEIGHED_HARMONICS, size),
        }
    }

    /// Add an output at `node` of `element`, and its sensitivity where it is to be kept.
    fn add_output(
        &mut self,
        element: &Element,
        node: f64,
        weight: f64,
        y: f64,
        dy: Option<&[f64]>,
    ) {
        let angle = std::f64::consts::TAU * element.phase(node);
        let share = 2.0 * weight * element.length() as f64 / (1u64 << FINEST) as f64;
        let (sine, cosine) = angle.sin_cos();
        let (mut c, mut s) = (cosine, sine);
        for n in 0..WATCHED_HARMONICS {
            for (row, wave) in [(2 * n, c), (2 * n + 1, s)] {
                self.harmonics[row] += share * wave * y;
                if let Some(dy) = dy.filter(|_| n < WEIGHED_HARMONICS) {
                    for (into, dy) in self.output_map.row_mut(row).iter_mut().zip(dy) {
                        *into += share * wave * dy;
                    }
                }
            }
            (c, s) = (c * cosine - s * sine, s * cosine + c * sine);
        }
    }
}

/// The effect above which elements are bisected, so that those left alone add up to no more than `allowed`.
fn refinement_limit(effects: &[f64], allowed: f64) -> f64 {
    let mut sorted = effects.to_vec();
    sorted.sort_by(f64::total_cmp);
    let mut sum = 0.0;
    for effect in &sorted {
        sum += effect;
        if sum > allowed {
            return 0.999 * effect;
        }
    }
    // nothing sticks out and yet bisection changed too much: take the upper quarter
    sorted.get(sorted.len() * 3 / 4).copied().unwrap_or(0.0)
}
