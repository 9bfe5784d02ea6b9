//! The network linearised at its bias: complex gain, impedances, poles.
//!
//! Gain and impedances by the complex nodal solution of the unreduced network. Poles: with the charges q as states and
//! `v = −R·dq/dt` the voltages they see through the resistive network, `q = C·v` gives the eigenvalues μ of C·R, and
//! every pole is s = −1/μ.

use super::bank::{Evaluation, PortBank};
use super::bias::OperatingPoint;
use super::error::EngineError;
use crate::network::Network;
use crate::network::assembly::{Assembly, Probe};
use crate::network::elements::EMF;
use nalgebra::{DMatrix, DVector};
use num_complex::Complex64;
use std::f64::consts::TAU;

/// Poles this much faster than the slowest one are rounding.
const FASTEST_RELATIVE: f64 = 1e-14;
/// A growth rate this small beside the slowest time constant is rounding.
const GROWTH_FLOOR: f64 = 1e-12;

/// The linearised network.
#[derive(Clone, Debug)]
pub struct Linearised<'a> {
    network: &'a Network,
    assembly: Assembly,
    /// Devices included.
    conductance: DMatrix<f64>,
    capacitance: DMatrix<f64>,
    bank: PortBank<f64>,
    slopes: Evaluation<f64>,
}

impl<'a> Linearised<'a> {
    /// `network` linearised at `point`.
    pub fn at(network: &'a Network, point: &OperatingPoint) -> Self {
        let assembly = Assembly::of(network, 0.0);
        let bank = point.bank(network);
        let mut slopes = Evaluation::for_bank(&bank);
        bank.evaluate(&vec![0.0; bank.ports()], &mut slopes);
        let mut linearised = Linearised {
            network,
            conductance: assembly.conductance.clone(),
            capacitance: assembly.capacitance.clone(),
            assembly,
            bank,
            slopes,
        };
        linearised.stamp_devices();
        linearised
    }

    fn stamp_devices(&mut self) {
        let probes = self.assembly.port_probes(self.network);
        let conductance = self.dense(&self.slopes.conductance);
        let capacitance = self.dense(&self.slopes.capacitance);
        for (blocks, matrix, drives) in [
            (
                &conductance,
                &mut self.conductance,
                &mut self.assembly.drive_conductance,
            ),
            (
                &capacitance,
                &mut self.capacitance,
                &mut self.assembly.drive_capacitance,
            ),
        ] {
            for (row, port) in probes.iter().enumerate() {
                for (column, other) in probes.iter().enumerate() {
                    let slope = blocks[(row, column)];
                    if slope != 0.0 {
                        *matrix += &port.unknowns * other.unknowns.transpose() * slope;
                        *drives -= &port.unknowns * other.drives.transpose() * slope;
                    }
                }
            }
        }
    }

    /// Device derivatives as a ports × ports matrix.
    fn dense(&self, blocks: &[f64]) -> DMatrix<f64> {
        let ports = self.bank.ports();
        let mut matrix = DMatrix::zeros(ports, ports);
        for column in 0..ports {
            let mut unit = vec![0.0; ports];
            unit[column] = 1.0;
            let mut result = vec![0.0; ports];
            self.bank.add_blocks_times(blocks, &unit, &mut result);
            for (row, value) in result.into_iter().enumerate() {
                matrix[(row, column)] = value;
            }
        }
        matrix
    }

    /// Small-signal derivatives of the ports at the bias.
    pub fn slopes(&self) -> &Evaluation<f64> {
        &self.slopes
    }

    /// Unknowns per unit of drive number `drive` at `frequency` in Hz, as complex amplitudes. `None` where singular.
    pub fn solve(&self, drive: usize, frequency: f64) -> Option<DVector<Complex64>> {
        let omega = TAU * frequency;
        let right = DVector::from_fn(self.assembly.size(), |row, _| {
            Complex64::new(
                self.assembly.drive_conductance[(row, drive)],
                omega * self.assembly.drive_capacitance[(row, drive)],
            )
        });
        self.solve_for(frequency, right)
    }

    fn solve_for(&self, frequency: f64, right: DVector<Complex64>) -> Option<DVector<Complex64>> {
        let omega = TAU * frequency;
        let matrix = DMatrix::from_fn(self.assembly.size(), self.assembly.size(), |row, column| {
            Complex64::new(
                self.conductance[(row, column)],
                omega * self.capacitance[(row, column)],
            )
        });
        matrix.lu().solve(&right)
    }

    /// The voltage of `plus` against `minus` in a solution for drive `drive`.
    pub fn read(
        &self,
        solution: &DVector<Complex64>,
        drive: usize,
        plus: usize,
        minus: usize,
    ) -> Complex64 {
        read_probe(
            &self.assembly.probe(self.network, plus, minus),
            solution,
            drive,
        )
    }

    /// Output over EMF at `frequency` in Hz. `None` where singular.
    pub fn gain(&self, frequency: f64) -> Option<Complex64> {
        let solution = self.solve(EMF, frequency)?;
        Some(self.read(&solution, EMF, self.network.output, 0))
    }

    /// The impedance seen by a current forced into `node` at `frequency` in Hz, every drive at rest. `None` where
    /// singular, or where the node's voltage is fixed.
    pub fn impedance(&self, node: usize, frequency: f64) -> Option<Complex64> {
        self.impedance_between(node, 0, frequency)
    }

    /// The impedance between two nodes at `frequency` in Hz, every drive at rest. `None` where singular, or where both
    /// voltages are fixed.
    pub fn impedance_between(
        &self,
        plus: usize,
        minus: usize,
        frequency: f64,
    ) -> Option<Complex64> {
        let probe = self.assembly.probe(self.network, plus, minus);
        if probe.unknowns.iter().all(|value| *value == 0.0) {
            return None;
        }
        let right = probe.unknowns.map(|value| Complex64::new(value, 0.0));
        let solution = self.solve_for(frequency, right)?;
        Some(
            probe
                .unknowns
                .iter()
                .zip(solution.iter())
                .map(|(c, x)| *x * *c)
                .sum(),
        )
    }

    /// Port voltages and the rates of the states that a unit complex EMF at `frequency` brings: (ports, linear states,
    /// port charges).
    pub fn phasors(&self, frequency: f64) -> Option<Phasors> {
        let solution = self.solve(EMF, frequency)?;
        let read = |probe: &Probe| read_probe(probe, &solution, EMF);
        let ports: Vec<Complex64> = self
            .assembly
            .port_probes(self.network)
            .iter()
            .map(read)
            .collect();
        let linear = self
            .assembly
            .state_probes(self.network)
            .iter()
            .map(read)
            .collect();
        let capacitance = self.dense(&self.slopes.capacitance);
        let charges = (0..ports.len())
            .map(|row| {
                (0..ports.len())
                    .map(|column| ports[column] * capacitance[(row, column)])
                    .sum()
            })
            .collect();
        let output = self.read(&solution, EMF, self.network.output, 0);
        Some(Phasors {
            ports,
            linear,
            charges,
            output,
        })
    }

    /// The poles, 1/s, slowest first.
    pub fn poles(&self) -> Vec<Complex64> {
        let mut times = self.time_constants();
        times.sort_by(|a, b| b.norm().total_cmp(&a.norm()));
        times.into_iter().map(|time| -time.inv()).collect()
    }

    /// The eigenvalues μ of C·R that are not rounding.
    fn time_constants(&self) -> Vec<Complex64> {
        let Some(matrix) = self.state_matrix() else {
            return Vec::new();
        };
        if matrix.nrows() == 0 || matrix.iter().any(|value| !value.is_finite()) {
            return Vec::new();
        }
        let mut balanced = matrix;
        nalgebra::linalg::balancing::balance_parlett_reinsch(&mut balanced);
        let values: Vec<Complex64> = balanced.complex_eigenvalues().iter().copied().collect();
        let slowest = values.iter().map(|value| value.norm()).fold(0.0, f64::max);
        values
            .into_iter()
            .filter(|value| value.norm() > FASTEST_RELATIVE * slowest)
            .collect()
    }

    /// C·R over the states: rows read the charges and fluxes, columns are where their currents enter.
    fn state_matrix(&self) -> Option<DMatrix<f64>> {
        let ports = self.assembly.port_probes(self.network);
        let capacitance = self.dense(&self.slopes.capacitance);
        let mut readers: Vec<DVector<f64>> = self
            .assembly
            .state_probes(self.network)
            .into_iter()
            .map(|probe| probe.unknowns)
            .collect();
        let mut entries = self.assembly.state_incidence(self.network);
        for (row, port) in ports.iter().enumerate() {
            if capacitance.row(row).iter().any(|value| *value != 0.0) {
                let mut reader = DVector::zeros(self.assembly.size());
                for (column, other) in ports.iter().enumerate() {
                    reader += &other.unknowns * capacitance[(row, column)];
                }
                readers.push(reader);
                entries.push(port.unknowns.clone());
            }
        }
        if readers.is_empty() {
            return Some(DMatrix::zeros(0, 0));
        }
        let right = DMatrix::from_columns(&entries);
        let solution = self.conductance.clone().lu().solve(&right)?;
        Some(DMatrix::from_columns(&readers).transpose() * solution)
    }

    /// Why the bias is not stable, if it is not.
    pub fn instability(&self) -> Option<EngineError> {
        let times = self.time_constants();
        let slowest = times.iter().map(|value| value.norm()).fold(0.0, f64::max);
        let growing = times
            .into_iter()
            .filter(|time| {
                time.re < -GROWTH_FLOOR * slowest.max(f64::MIN_POSITIVE)
                    && time.re < -1e-9 * time.norm()
            })
            .max_by(|a, b| (-a.inv()).re.total_cmp(&(-b.inv()).re))?;
        let pole = -growing.inv();
        Some(EngineError::UnstableBias {
            frequency: pole.im.abs() / TAU,
            time_constant: 1.0 / pole.re,
        })
    }
}

/// What a unit EMF brings at one frequency, complex amplitudes.
#[derive(Clone, Debug)]
pub struct Phasors {
    /// Port voltages, V.
    pub ports: Vec<Complex64>,
    /// Linear states: capacitor charges in C, inductor fluxes in Wb.
    pub linear: Vec<Complex64>,
    /// Port charges, C.
    pub charges: Vec<Complex64>,
    /// Output, V.
    pub output: Complex64,
}

fn read_probe(probe: &Probe, solution: &DVector<Complex64>, drive: usize) -> Complex64 {
    let unknowns: Complex64 = probe
        .unknowns
        .iter()
        .zip(solution.iter())
        .map(|(c, x)| *x * *c)
        .sum();
    unknowns + probe.drives[drive]
}
