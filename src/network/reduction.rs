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
use crate::numeric::{Factored, Lane, Matrix};
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
        let system = StageSystem::new(network, &assembly, scheme, drive)?;
        let ports = assembly.port_probes(network);
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
        let from_state = solve(system.state_columns())?;
        let from_drive = solve(system.drive_columns())?;
        let from_current = solve(system.port_columns(&ports))?;
        let ports_from_current = system.read(&ports, &from_current, false);
        Ok(Reduction {
            stages: scheme.stages(),
            ports: ports.len(),
            rates: scheme.rates.clone(),
            history_rates: (0..scheme.stages())
                .map(|stage| scheme.history_rate(stage))
                .collect(),
            ports_from_charge: system.act_on_charges(&ports_from_current, ports.len()),
            ports_from_state: system.read(&ports, &from_state, false),
            ports_from_drive: system.read(&ports, &from_drive, true),
            ports_from_current,
            state_from_state: system.end_states(&from_state, true),
            state_from_drive: system.end_states(&from_drive, false),
            state_from_current: system.end_states(&from_current, false),
            output_from_state: system.read(&output, &from_state, false),
            output_from_drive: system.read(&output, &from_drive, true),
            output_from_current: system.read(&output, &from_current, false),
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
///
/// Per stage the unknowns are the node voltages and inductor currents of the assembly, then the capacitor currents.
/// Capacitors and inductors stand in integrated form, with T the inverse of the rates (for a Runge–Kutta method its
/// coefficients times the step):
///
/// ```text
/// v_i − Σ Tij·i_j/C = q0/C        i_i − Σ Tij·v_j/L = φ0/L
/// ```
/// so that a microsecond's step over hundreds of microfarads meets no conductance beside which the circuit's own is
/// rounding.
struct StageSystem<'a> {
    network: &'a Network,
    assembly: &'a Assembly,
    scheme: &'a Scheme,
    drive: usize,
    /// T in s, s × s; empty where there are no states.
    times: Matrix<f64>,
    /// Voltage of each capacitor.
    capacitor_probes: Vec<Probe>,
}

impl<'a> StageSystem<'a> {
    fn new(
        network: &'a Network,
        assembly: &'a Assembly,
        scheme: &'a Scheme,
        drive: usize,
    ) -> Result<Self, UndeterminedNetwork> {
        let stages = scheme.stages();
        let times = if network.linear_states() == 0 {
            Matrix::zero(stages, stages)
        } else {
            Factored::of(&scheme.rates)
                .map_err(|_| UndeterminedNetwork)?
                .solve_matrix(&Matrix::identity(stages))
        };
        let capacitor_probes = network
            .capacitors
            .iter()
            .map(|capacitor| assembly.probe(network, capacitor.pins[0], capacitor.pins[1]))
            .collect();
        Ok(StageSystem {
            network,
            assembly,
            scheme,
            drive,
            times,
            capacitor_probes,
        })
    }

    /// Unknowns of one stage.
    fn size(&self) -> usize {
        self.assembly.size() + self.capacitor_probes.len()
    }

    fn stages(&self) -> usize {
        self.scheme.stages()
    }

    fn total(&self) -> usize {
        self.size() * self.stages()
    }

    fn stage_pairs(&self) -> impl Iterator<Item = (usize, usize)> + use<> {
        let stages = self.stages();
        (0..stages).flat_map(move |i| (0..stages).map(move |j| (i, j)))
    }

    /// Row and column of inductor number `k` within a stage.
    fn inductor_row(&self, k: usize) -> usize {
        self.assembly.nodes + k
    }

    /// Row and column of capacitor number `k` within a stage.
    fn capacitor_row(&self, k: usize) -> usize {
        self.assembly.size() + k
    }

    fn matrix(&self) -> DMatrix<f64> {
        let size = self.size();
        let mut matrix = DMatrix::zeros(self.total(), self.total());
        for (i, j) in self.stage_pairs() {
            let mut block = matrix.view_mut((i * size, j * size), (size, size));
            let conductance = &self.assembly.conductance;
            if i == j {
                let nodes = self.assembly.nodes;
                block
                    .view_mut((0, 0), (nodes, self.assembly.size()))
                    .copy_from(&conductance.view((0, 0), (nodes, self.assembly.size())));
            }
            for (k, inductor) in self.network.inductors.iter().enumerate() {
                let row = self.inductor_row(k);
                let factor = self.times[(i, j)] / inductor.henries;
                for column in 0..self.assembly.size() {
                    block[(row, column)] += factor * conductance[(row, column)];
                }
                if i == j {
                    block[(row, row)] += 1.0;
                }
            }
            for (k, capacitor) in self.network.capacitors.iter().enumerate() {
                let row = self.capacitor_row(k);
                block[(row, row)] -= self.times[(i, j)] / capacitor.farads;
                if i == j {
                    for (node, sign) in self.capacitor_probes[k].unknowns.iter().enumerate() {
                        block[(row, node)] += sign;
                        block[(node, row)] += sign;
                    }
                }
            }
        }
        matrix
    }

    /// What a unit of each starting charge or flux puts into every stage.
    fn state_columns(&self) -> DMatrix<f64> {
        let capacitors = self.network.capacitors.len();
        let mut right = DMatrix::zeros(self.total(), self.network.linear_states());
        for stage in 0..self.stages() {
            let first = stage * self.size();
            for (k, capacitor) in self.network.capacitors.iter().enumerate() {
                right[(first + self.capacitor_row(k), k)] = 1.0 / capacitor.farads;
            }
            for (k, inductor) in self.network.inductors.iter().enumerate() {
                right[(first + self.inductor_row(k), capacitors + k)] = 1.0 / inductor.henries;
            }
        }
        right
    }

    /// What a unit of the drive at each stage puts into every stage.
    fn drive_columns(&self) -> DMatrix<f64> {
        let mut right = DMatrix::zeros(self.total(), self.stages());
        let direct = self.assembly.drive_conductance.column(self.drive);
        for (i, j) in self.stage_pairs() {
            let first = i * self.size();
            if i == j {
                for row in 0..self.assembly.nodes {
                    right[(first + row, j)] += direct[row];
                }
                for (k, probe) in self.capacitor_probes.iter().enumerate() {
                    right[(first + self.capacitor_row(k), j)] -= probe.drives[self.drive];
                }
            }
            for (k, inductor) in self.network.inductors.iter().enumerate() {
                let row = self.inductor_row(k);
                right[(first + row, j)] += self.times[(i, j)] / inductor.henries * direct[row];
            }
        }
        right
    }

    /// A unit current leaving the network through each port of each stage, negated: v = … − K·j.
    fn port_columns(&self, ports: &[Probe]) -> DMatrix<f64> {
        let mut right = DMatrix::zeros(self.total(), ports.len() * self.stages());
        for stage in 0..self.stages() {
            for (port, probe) in ports.iter().enumerate() {
                right
                    .view_mut(
                        (stage * self.size(), stage * ports.len() + port),
                        (self.assembly.size(), 1),
                    )
                    .copy_from(&probe.unknowns);
            }
        }
        right
    }

    /// The probes at every stage, from a solution; `direct` adds what the drive gives directly.
    fn read(&self, probes: &[Probe], solution: &DMatrix<f64>, direct: bool) -> Matrix<f64> {
        let mut result = Matrix::zero(self.stages() * probes.len(), solution.ncols());
        for stage in 0..self.stages() {
            for (k, probe) in probes.iter().enumerate() {
                let row = stage * probes.len() + k;
                for column in 0..solution.ncols() {
                    let unknowns =
                        solution.view((stage * self.size(), column), (self.assembly.size(), 1));
                    result[(row, column)] = unknowns.dot(&probe.unknowns);
                }
                if direct {
                    result[(row, stage)] += probe.drives[self.drive];
                }
            }
        }
        result
    }

    /// Charges and fluxes at the end of the step: what they started with (`carried`) plus the integral of their
    /// currents; a flux from the inductor's current itself.
    fn end_states(&self, solution: &DMatrix<f64>, carried: bool) -> Matrix<f64> {
        let capacitors = self.network.capacitors.len();
        let mut result = Matrix::zero(self.network.linear_states(), solution.ncols());
        let last = self.stages() - 1;
        for column in 0..solution.ncols() {
            for k in 0..capacitors {
                let row = self.capacitor_row(k);
                let moved: f64 = (0..self.stages())
                    .map(|stage| {
                        self.times[(last, stage)] * solution[(stage * self.size() + row, column)]
                    })
                    .sum();
                result[(k, column)] = moved + if carried && k == column { 1.0 } else { 0.0 };
            }
            for (k, inductor) in self.network.inductors.iter().enumerate() {
                let current = solution[(last * self.size() + self.inductor_row(k), column)];
                result[(capacitors + k, column)] = inductor.henries * current;
            }
        }
        result
    }

    /// K·(α ⊗ I).
    fn act_on_charges(&self, from_current: &Matrix<f64>, ports: usize) -> Matrix<f64> {
        let mut result = Matrix::zero(from_current.rows(), from_current.columns());
        for row in 0..from_current.rows() {
            for (i, j) in self.stage_pairs() {
                let rate = self.scheme.rates[(i, j)];
                for port in 0..ports {
                    result[(row, j * ports + port)] += from_current[(row, i * ports + port)] * rate;
                }
            }
        }
        result
    }
}
