//! Shooting: Newton's method on the state at the start of the period.

use super::element::{Element, FINEST};
use super::solution::PeriodicSolution;
use super::sweep::{Mesh, Pass, Sweep};
use super::{PeriodicSolver, UnitDrive, WATCHED_HARMONICS};
use crate::engine::error::EngineError;
use crate::engine::step::State;
use crate::numeric::fourier::{Coefficient, UnevenPeriod};
use crate::numeric::{Factored, Matrix};

impl PeriodicSolver<'_> {
    /// Shoot with a mesh chosen anew in every pass until the start is nearly periodic; returns the last mesh.
    pub(super) fn shoot_adaptively(
        &mut self,
        drive: UnitDrive,
        amplitude: f64,
        start: &mut State<f64>,
    ) -> Result<Vec<Element>, EngineError> {
        let local_error = self.options.first_local_error;
        let mut last = f64::INFINITY;
        for sweep in 0..25 {
            let first_scale = self.output_peak.is_none();
            let pass = self.pass(
                drive,
                amplitude,
                start,
                Mesh::Adaptive { local_error },
                true,
            )?;
            let change = self.newton_update(&pass, start, pass.map.as_ref())?;
            if !change.is_finite() {
                return Err(self.no_period(amplitude, "the shooting diverged"));
            }
            if !first_scale
                && (change < 1e-3 || (sweep > 2 && change < 0.05 && change > 0.5 * last))
            {
                return Ok(pass.mesh);
            }
            last = change;
        }
        Err(self.no_period(amplitude, "the shooting did not settle"))
    }

    /// Shoot on a fixed mesh to rounding. `known` is a map from a coarser mesh, good enough for a first update.
    pub(super) fn shoot(
        &mut self,
        drive: UnitDrive,
        amplitude: f64,
        start: &mut State<f64>,
        mesh: &[Element],
        known: Option<&Matrix<f64>>,
    ) -> Result<Pass, EngineError> {
        let mut last = f64::INFINITY;
        let mut map: Option<Matrix<f64>> = known.cloned();
        for iteration in 0..12 {
            let sensitive = map.is_none();
            let mut pass = self.pass(drive, amplitude, start, Mesh::Fixed(mesh), sensitive)?;
            if let Some(fresh) = pass.map.take() {
                map = Some(fresh);
            }
            let change = self.newton_update(&pass, start, map.as_ref())?;
            if !change.is_finite() {
                return Err(self.no_period(amplitude, "the shooting diverged"));
            }
            if change < 1e-11 || (iteration > 2 && change < 1e-7 && change > 0.3 * last) {
                pass.map = map;
                return Ok(pass);
            }
            // a map from a coarser mesh or an earlier start is renewed as soon as it stops converging fast
            if change > 0.02 * last || change > 1e-4 {
                map = None;
            }
            last = change;
        }
        Err(self.no_period(amplitude, "the shooting did not settle on its mesh"))
    }

    /// Move `start` by the Newton correction of the shooting; returns its size relative to the states' own size.
    fn newton_update(
        &self,
        pass: &Pass,
        start: &mut State<f64>,
        map: Option<&Matrix<f64>>,
    ) -> Result<f64, EngineError> {
        let size = start.len();
        let scales = self.state_scales();
        let mut matrix = Matrix::zero(size, size);
        for row in 0..size {
            for column in 0..size {
                let carried = map.map_or(0.0, |map| map[(row, column)]);
                let identity = if row == column { 1.0 } else { 0.0 };
                matrix[(row, column)] = identity - carried * scales[column] / scales[row];
            }
        }
        let mut update: Vec<f64> = pass
            .end
            .iter()
            .zip(start.iter())
            .zip(&scales)
            .map(|((end, start), scale)| (end - start) / scale)
            .collect();
        factor_or_shift(&mut matrix)?.solve(&mut update);
        let largest_state = pass
            .states
            .iter()
            .flat_map(|state| state.iter().zip(&scales))
            .map(|(value, scale)| value.abs() / scale)
            .fold(0.0, f64::max);
        let mut change = 0.0f64;
        for ((value, update), scale) in start.iter_mut().zip(&update).zip(&scales) {
            *value += update * scale;
            change = change.max(update.abs());
            if !update.is_finite() {
                change = f64::NAN;
                break;
            }
        }
        Ok(if largest_state > 0.0 {
            change / largest_state
        } else {
            change
        })
    }

    /// A charge or flux that one volt or one milliampere stands for, by which states become comparable.
    pub(super) fn state_scales(&self) -> Vec<f64> {
        let capacitors = self.network.capacitors.iter().map(|element| element.farads);
        let inductors = self
            .network
            .inductors
            .iter()
            .map(|element| element.henries * 1e-3);
        let ports = (0..self.bank.ports()).map(|_| 1e-11);
        capacitors.chain(inductors).chain(ports).collect()
    }

    /// Largest difference of H1…H20 relative to H1.
    pub(super) fn change(&self, coarse: &Pass, fine: &Pass) -> f64 {
        let a = self.harmonics(coarse);
        let b = self.harmonics(fine);
        let reference = b[0].peak();
        let largest = a
            .iter()
            .zip(&b)
            .map(|(a, b)| a.distance(b))
            .fold(0.0, f64::max);
        if reference > 0.0 {
            largest / reference
        } else {
            0.0
        }
    }

    pub(super) fn harmonics(&self, pass: &Pass) -> Vec<Coefficient> {
        let (phases, weights) = self.samples(&pass.mesh);
        UnevenPeriod::new(&phases, weights)
            .spectrum(&pass.outputs, WATCHED_HARMONICS)
            .harmonics
    }

    fn samples(&self, mesh: &[Element]) -> (Vec<f64>, Vec<f64>) {
        let whole = (1u64 << FINEST) as f64;
        let mut phases = Vec::with_capacity(mesh.len() * self.radau.stages());
        let mut weights = Vec::with_capacity(phases.capacity());
        for element in mesh {
            let share = element.length() as f64 / whole;
            for (node, weight) in self.radau.nodes.iter().zip(&self.radau.weights) {
                phases.push(element.phase(*node));
                weights.push(share * weight);
            }
        }
        (phases, weights)
    }

    pub(super) fn solution(
        &self,
        pass: Pass,
        start: State<f64>,
        map: Option<&Matrix<f64>>,
        error_estimate: f64,
    ) -> PeriodicSolution {
        let (phases, weights) = self.samples(&pass.mesh);
        let whole = (1u64 << FINEST) as f64;
        let ports = self.bank.ports().max(1);
        PeriodicSolution {
            start,
            phases,
            weights,
            outputs: pass.outputs,
            beyond_early_range: pass
                .ports
                .chunks_exact(ports)
                .any(|v| self.bank.beyond_early_range(v)),
            ports: pass.ports,
            elements: pass
                .mesh
                .iter()
                .map(|element| {
                    (
                        element.start as f64 / whole,
                        element.length() as f64 / whole,
                    )
                })
                .collect(),
            stages: self.radau.stages(),
            error_estimate,
            largest_multiplier: map.map_or(0.0, |map| self.largest_multiplier(map)),
        }
    }

    fn largest_multiplier(&self, map: &Matrix<f64>) -> f64 {
        let scales = self.state_scales();
        let matrix = nalgebra::DMatrix::from_fn(map.rows(), map.columns(), |row, column| {
            map[(row, column)] * scales[column] / scales[row]
        });
        if matrix.nrows() == 0 || matrix.iter().any(|value| !value.is_finite()) {
            return 0.0;
        }
        matrix
            .complex_eigenvalues()
            .iter()
            .map(|value| value.norm())
            .fold(0.0, f64::max)
    }

    /// One sweep over the period from `start`.
    fn pass(
        &mut self,
        drive: UnitDrive,
        amplitude: f64,
        start: &State<f64>,
        mesh: Mesh,
        sensitive: bool,
    ) -> Result<Pass, EngineError> {
        Sweep::new(self, drive, amplitude, start, sensitive).run(mesh)
    }
}

/// Factor a matrix I − Φ. A floating charge keeps what it started with and makes it singular: a shift far below any
/// real loss leaves its direction alone.
pub(super) fn factor_or_shift(matrix: &mut Matrix<f64>) -> Result<Factored<f64>, EngineError> {
    Factored::of(matrix)
        .or_else(|_| {
            for k in 0..matrix.rows() {
                matrix[(k, k)] += 1e-12;
            }
            Factored::of(matrix)
        })
        .map_err(|_| EngineError::Undetermined)
}
