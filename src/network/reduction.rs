//! Reduction of the linear part to the nonlinear ports, once per step size and scheme.
//!
//! A scheme of s stages replaces the derivative of any charge q at stage i by `Σ αij·qj − βi·q0`, with βi = Σ αij: a
//! Runge–Kutta method by its inverse coefficients over the step, a backward-difference formula by one stage whose q0 is
//! the weighted history. All stages are solved together:
//!
//! ```text
//! v = Vq·q0 + Ve·e − K·(j − g·v)        port voltages at every stage
//! q = Qq·q0 + Qe·e − Qj·(j − g·v)       linear states at the last stage
//! y = Yq·q0 + Ye·e − Yj·(j − g·v)       output at every stage
//! ```
//! The positive conductance g across every port in the linear part keeps nodes that touch only device terminals
//! regular; the ports give it back, which is exact.

use super::assembly::{Assembly, Probe};
use super::elements::Network;
use crate::numeric::{Lane, Matrix};
use nalgebra::DMatrix;

/// Conductance put across every port in the linear part, S. Any positive value is exact; this one lies between the
/// conductance of a conducting junction and that of a blocking one, so neither side loses many digits.
pub const PORT_CONDUCTANCE: f64 = 1e-5;

/// How a scheme forms the derivative of a charge at its stages.
#[derive(Clone, Debug, PartialEq)]
pub struct Scheme {
    /// αij in 1/s, s × s.
    pub rates: Matrix<f64>,
}

impl Scheme {
    /// Number of stages s.
    pub fn stages(&self) -> usize {
        self.rates.rows()
    }

    /// βi = Σj αij in 1/s.
    pub fn history_rate(&self, stage: usize) -> f64 {
        self.rates.row(stage).iter().sum()
    }
}

/// The reduced linear part. Stage-major order: all ports of stage 1, all ports of stage 2, ….
#[derive(Clone, Debug)]
pub struct Reduction<L> {
    /// Number of stages s.
    pub stages: usize,
    /// Number of ports.
    pub ports: usize,
    /// αij.
    pub rates: Matrix<L>,
    /// βi.
    pub history_rates: Vec<L>,
    /// Vq, s·ports × states.
    pub ports_from_state: Matrix<L>,
    /// Ve, s·ports × s.
    pub ports_from_drive: Matrix<L>,
    /// K, s·ports × s·ports.
    pub ports_from_current: Matrix<L>,
    /// K·(α ⊗ I): how port charges act on port voltages, s·ports × s·ports.
    pub ports_from_charge: Matrix<L>,
    /// Qq, states × states.
    pub state_from_state: Matrix<L>,
    /// Qe, states × s.
    pub state_from_drive: Matrix<L>,
    /// Qj, states × s·ports.
    pub state_from_current: Matrix<L>,
    /// Yq, s × states.
    pub output_from_state: Matrix<L>,
    /// Ye, s × s.
    pub output_from_drive: Matrix<L>,
    /// Yj, s × s·ports.
    pub output_from_current: Matrix<L>,
}

/// The linear part cannot be solved: some node or branch is not determined.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct UndeterminedNetwork;

impl Reduction<f64> {
    /// Reduce `network`, driven through drive number `drive`, for `scheme`.
    ///
    /// # Errors
    /// Where the equations of the linear part are singular.
    pub fn of(
        network: &Network,
        drive: usize,
        scheme: &Scheme,
    ) -> Result<Self, UndeterminedNetwork> {
        let assembly = Assembly::of(network, PORT_CONDUCTANCE);
        let system = StageSystem {
            assembly: &assembly,
            scheme,
            drive,
        };
        let ports = assembly.port_probes(network);
        let states = assembly.state_probes(network);
        let output = [assembly.probe(network, network.output, 0)];
        let factored = system.matrix().lu();
        let solve = |right: DMatrix<f64>| {
            let solution = factored.solve(&right).ok_or(UndeterminedNetwork)?;
            solution
                .iter()
                .all(|value| value.is_finite())
                .then_some(solution)
                .ok_or(UndeterminedNetwork)
        };
        let from_state = solve(system.state_columns(network))?;
        let from_drive = solve(system.drive_columns())?;
        let from_current = solve(system.port_columns(&ports))?;
        let all = 0..scheme.stages();
        let last = scheme.stages() - 1..scheme.stages();
        let read =
            |probes: &[Probe],
             stages: std::ops::Range<usize>,
             solution: &DMatrix<f64>,
             direct: bool| { system.read(probes, stages, solution, direct) };
        let ports_from_current = read(&ports, all.clone(), &from_current, false);
        Ok(Reduction {
            stages: scheme.stages(),
            ports: ports.len(),
            rates: scheme.rates.clone(),
            history_rates: all
                .clone()
                .map(|stage| scheme.history_rate(stage))
                .collect(),
            ports_from_charge: system.act_on_charges(&ports_from_current, ports.len()),
            ports_from_state: read(&ports, all.clone(), &from_state, false),
            ports_from_drive: read(&ports, all.clone(), &from_drive, true),
            ports_from_current,
            state_from_state: read(&states, last.clone(), &from_state, false),
            state_from_drive: read(&states, last.clone(), &from_drive, true),
            state_from_current: read(&states, last, &from_current, false),
            output_from_state: read(&output, all.clone(), &from_state, false),
            output_from_drive: read(&output, all.clone(), &from_drive, true),
            output_from_current: read(&output, all, &from_current, false),
        })
    }

    /// The same reduction in every lane.
    pub fn splat<L: Lane>(&self) -> Reduction<L> {
        let wide = |matrix: &Matrix<f64>| matrix.map(L::splat);
        Reduction {
            stages: self.stages,
            ports: self.ports,
            rates: wide(&self.rates),
            history_rates: self
                .history_rates
                .iter()
                .map(|rate| L::splat(*rate))
                .collect(),
            ports_from_state: wide(&self.ports_from_state),
            ports_from_drive: wide(&self.ports_from_drive),
            ports_from_current: wide(&self.ports_from_current),
            ports_from_charge: wide(&self.ports_from_charge),
            state_from_state: wide(&self.state_from_state),
            state_from_drive: wide(&self.state_from_drive),
            state_from_current: wide(&self.state_from_current),
            output_from_state: wide(&self.output_from_state),
            output_from_drive: wide(&self.output_from_drive),
            output_from_current: wide(&self.output_from_current),
        }
    }
}

/// The equations of all stages together, stage-major.
struct StageSystem<'a> {
    assembly: &'a Assembly,
    scheme: &'a Scheme,
    drive: usize,
}

impl StageSystem<'_> {
    fn size(&self) -> usize {
        self.assembly.size()
    }

    fn total(&self) -> usize {
        self.size() * self.scheme.stages()
    }

    fn stage_pairs(&self) -> impl Iterator<Item = (usize, usize, f64)> + '_ {
        let stages = self.scheme.stages();
        (0..stages).flat_map(move |i| (0..stages).map(move |j| (i, j, self.scheme.rates[(i, j)])))
    }

    /// δij·G + αij·C in block (i, j).
    fn matrix(&self) -> DMatrix<f64> {
        let size = self.size();
        let mut matrix = DMatrix::zeros(self.total(), self.total());
        for (i, j, rate) in self.stage_pairs() {
            let mut block = matrix.view_mut((i * size, j * size), (size, size));
            block += &self.assembly.capacitance * rate;
            if i == j {
                block += &self.assembly.conductance;
            }
        }
        matrix
    }

    /// βi times the state's incidence: what the starting charge puts into stage i.
    fn state_columns(&self, network: &Network) -> DMatrix<f64> {
        let incidence = self.assembly.state_incidence(network);
        let mut right = DMatrix::zeros(self.total(), incidence.len());
        for (column, state) in incidence.iter().enumerate() {
            for stage in 0..self.scheme.stages() {
                let rate = self.scheme.history_rate(stage);
                right
                    .view_mut((stage * self.size(), column), (self.size(), 1))
                    .copy_from(&(state * rate));
            }
        }
        right
    }

    /// δij·Gu + αij·Cu in block (i, j), for the one drive.
    fn drive_columns(&self) -> DMatrix<f64> {
        let size = self.size();
        let mut right = DMatrix::zeros(self.total(), self.scheme.stages());
        for (i, j, rate) in self.stage_pairs() {
            let mut block = right.view_mut((i * size, j), (size, 1));
            block += self.assembly.drive_capacitance.column(self.drive) * rate;
            if i == j {
                block += self.assembly.drive_conductance.column(self.drive);
            }
        }
        right
    }

    /// A unit current leaving the network through each port of each stage, negated: v = … − K·j.
    fn port_columns(&self, ports: &[Probe]) -> DMatrix<f64> {
        let mut right = DMatrix::zeros(self.total(), ports.len() * self.scheme.stages());
        for stage in 0..self.scheme.stages() {
            for (port, probe) in ports.iter().enumerate() {
                right
                    .view_mut(
                        (stage * self.size(), stage * ports.len() + port),
                        (self.size(), 1),
                    )
                    .copy_from(&probe.unknowns);
            }
        }
        right
    }

    /// The probes at the given stages, from the solution of all stages; `direct` adds what the drive gives directly.
    fn read(
        &self,
        probes: &[Probe],
        stages: std::ops::Range<usize>,
        solution: &DMatrix<f64>,
        direct: bool,
    ) -> Matrix<f64> {
        let mut result = Matrix::zero(stages.len() * probes.len(), solution.ncols());
        for (row_block, stage) in stages.enumerate() {
            for (k, probe) in probes.iter().enumerate() {
                let row = row_block * probes.len() + k;
                for column in 0..solution.ncols() {
                    let unknowns = solution.view((stage * self.size(), column), (self.size(), 1));
                    result[(row, column)] = unknowns.dot(&probe.unknowns);
                }
                if direct {
                    result[(row, stage)] += probe.drives[self.drive];
                }
            }
        }
        result
    }

    /// K·(α ⊗ I).
    fn act_on_charges(&self, from_current: &Matrix<f64>, ports: usize) -> Matrix<f64> {
        let mut result = Matrix::zero(from_current.rows(), from_current.columns());
        for row in 0..from_current.rows() {
            for (i, j, rate) in self.stage_pairs() {
                for port in 0..ports {
                    result[(row, j * ports + port)] += from_current[(row, i * ports + port)] * rate;
                }
            }
        }
        result
    }
}
