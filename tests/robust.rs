//! Stages with every part value off by up to a factor of ten still get their figures, or are refused with cause.

#![allow(clippy::unwrap_used, clippy::expect_used)]

use cleanswing::engine::bank::Evaluation;
use cleanswing::engine::{EngineError, OperatingPoint, PortBank, UniformTransient};
use cleanswing::measure::distortion::{DistortionRequest, distortion};
use cleanswing::measure::report::DistortionPoint;
use cleanswing::network::{Assembly, Network, Place};
use cleanswing::stage::{PartKind, Stage};
use nalgebra::{DMatrix, DVector};
use rand::{RngExt, SeedableRng};
use rand_chacha::ChaCha8Rng;
use rayon::prelude::*;
use std::panic::{AssertUnwindSafe, catch_unwind};
use std::path::PathBuf;

const STAGES: [&str; 8] = [
    "a_plain_common_emitter",
    "b_split_emitter",
    "c_collector_feedback",
    "d_emitter_follower",
    "e_series_feedback_pair",
    "f_complementary_pair",
    "g_long_tailed_pair",
    "h_diode_clipper",
];
const FREQUENCY: f64 = 1e3;
/// Share of the units that may be refused.
const REFUSED: f64 = 0.01;

fn open(name: &str) -> Stage {
    let folder = PathBuf::from(env!("CARGO_MANIFEST_DIR")).join("tests/expected/open");
    Stage::read(&folder.join(format!("{name}.toml"))).unwrap().0
}

/// Unit number `seed`: a stage with every part value times 0.1…10, and a level of 1 mV…1 V rms, log-uniform.
fn unit(seed: u64) -> (&'static str, Stage, f64) {
    let mut random = ChaCha8Rng::seed_from_u64(seed);
    let name = STAGES[(seed % STAGES.len() as u64) as usize];
    let mut stage = open(name);
    for part in &mut stage.parts {
        let factor = 10f64.powf(random.random_range(-1.0..1.0));
        match &mut part.kind {
            PartKind::Resistor { ohms, .. } | PartKind::Potentiometer { ohms, .. } => {
                *ohms *= factor
            }
            PartKind::Capacitor { farads, .. } => *farads *= factor,
            PartKind::Inductor { henries, .. } => *henries *= factor,
            _ => {}
        }
    }
    (name, stage, 10f64.powf(random.random_range(-3.0..0.0)))
}

#[derive(Debug)]
enum Outcome {
    Answered {
        thd: f64,
        error: f64,
    },
    /// The parts make an oscillator, as the engine says and a kicked transient shows.
    Oscillates(String),
    /// Refused with cause: the referee finds no answer either.
    Refused(String),
    /// A panic, a value that is no number, or a refusal the referee overturns.
    Defect(String),
}

fn outcome(seed: u64) -> Outcome {
    let run = catch_unwind(AssertUnwindSafe(|| {
        let (_, stage, level) = unit(seed);
        let network = Network::of(&stage);
        match OperatingPoint::of(&network) {
            Err(error) => bias_refused(&network, &error),
            Ok(point) => figures(&stage, &network, &point, level),
        }
    }));
    run.unwrap_or_else(|panic| {
        let text = panic.downcast_ref::<String>().cloned().unwrap_or_default();
        Outcome::Defect(format!("panicked: {text}"))
    })
}

fn figures(stage: &Stage, network: &Network, point: &OperatingPoint, level: f64) -> Outcome {
    if !point.nodes.iter().all(|volts| volts.is_finite()) {
        return Outcome::Defect("a bias voltage is no number".to_string());
    }
    let request = DistortionRequest {
        levels: vec![level],
        frequencies: vec![FREQUENCY],
        bandwidth: Some(80e3),
    };
    match distortion(stage, &request) {
        Ok(report) => finite(&report.points[0]),
        Err(error) if settles(network, point, level) => Outcome::Defect(format!(
            "settles to one period in a transient, but: {error}"
        )),
        Err(error) => Outcome::Refused(error.to_string()),
    }
}

fn finite(point: &DistortionPoint) -> Outcome {
    let all = point
        .harmonics
        .iter()
        .map(|harmonic| harmonic.rms)
        .chain([point.output, point.dc_shift, point.error_estimate])
        .chain(point.thd)
        .chain(point.waveform.iter().copied());
    if all.into_iter().all(f64::is_finite) {
        Outcome::Answered {
            thd: point.thd.unwrap_or(0.0),
            error: point.error_estimate,
        }
    } else {
        Outcome::Defect(format!("a figure is no number: {point:?}"))
    }
}

/// Whether a long transient from the bias comes to repeat itself every period.
fn settles(network: &Network, point: &OperatingPoint, level: f64) -> bool {
    const STEPS: usize = 1024;
    const PERIODS: usize = 2000;
    let step = 1.0 / (FREQUENCY * STEPS as f64);
    let Ok(mut transient) = UniformTransient::new(network, point, step) else {
        return false;
    };
    let drive: Vec<f64> = (1..=STEPS)
        .map(|k| {
            level
                * std::f64::consts::SQRT_2
                * (std::f64::consts::TAU * k as f64 / STEPS as f64).sin()
        })
        .collect();
    let (mut before, mut now) = (vec![0.0; STEPS], vec![0.0; STEPS]);
    for _ in 0..PERIODS {
        std::mem::swap(&mut before, &mut now);
        if transient.advance_block(&drive, &mut now).is_err() {
            return false;
        }
    }
    let square = |values: &mut dyn Iterator<Item = f64>| values.map(|v| v * v).sum::<f64>();
    let moved = square(&mut before.iter().zip(&now).map(|(a, b)| a - b));
    // the slowest coupling (seconds) moves the period by less than a thousandth once the rest has settled
    moved < 1e-6 * square(&mut now.iter().copied())
}

/// A refused bias is right where the referee finds none either, or where its bias runs away from a kick as claimed.
fn bias_refused(network: &Network, error: &EngineError) -> Outcome {
    match (error, pseudo_transient(network)) {
        (EngineError::NoBias { .. } | EngineError::Undetermined, None) => {
            Outcome::Refused(error.to_string())
        }
        (
            EngineError::UnstableBias {
                frequency,
                time_constant,
            },
            Some(x),
        ) if runs_away(network, &x, *frequency, *time_constant) => {
            Outcome::Oscillates(error.to_string())
        }
        (_, found) => Outcome::Defect(format!("the referee finds {found:?}, but: {error}")),
    }
}

/// The referee's solution as an operating point.
fn operating_point(network: &Network, x: &[f64]) -> OperatingPoint {
    let equations = Equations::of(network);
    let volts = |node: usize| match network.places[node] {
        Place::Ground => 0.0,
        Place::Known(drive) => network.drives[drive].rest,
        Place::Unknown(number) => x[number],
    };
    OperatingPoint {
        ports: equations.ports(&DVector::from_column_slice(x), 1.0),
        nodes: (0..network.nodes.len()).map(volts).collect(),
        inductor_currents: x[network.unknowns..].to_vec(),
    }
}

/// Whether a microvolt's kick at the referee's bias grows at the stated rate.
fn runs_away(network: &Network, x: &[f64], frequency: f64, time_constant: f64) -> bool {
    let point = operating_point(network, x);
    // fine enough for BDF3 to neither damp nor excite anything of the stated frequency and rate
    let step = (1.0 / (400.0 * frequency.max(1e-9))).min(time_constant / 200.0);
    let Ok(mut transient) = UniformTransient::new(network, &point, step) else {
        return false;
    };
    let window = (time_constant.max(1.0 / frequency.max(1e-9)) / step) as usize;
    let mut peaks = [0.0f64; 8];
    for (number, peak) in peaks.iter_mut().enumerate() {
        for k in 0..window {
            let kick = if number == 0 && k < 20 { 1e-6 } else { 0.0 };
            match transient.advance(kick) {
                Ok(output) => *peak = peak.max(output.abs()),
                Err(_) => return false,
            }
        }
    }
    let expected = (5.0 * window as f64 * step / time_constant).exp();
    let grown = peaks[7] / peaks[2];
    // a window's peak depends on where the swing falls in it; one that reaches the rails grows less
    grown > expected / 5.0 && grown < 5.0 * expected || peaks[7] > 0.1 && grown > 10.0
}

/// The unreduced static equations.
struct Equations<'a> {
    network: &'a Network,
    assembly: Assembly,
    bank: PortBank<f64>,
    rest: DVector<f64>,
}

impl<'a> Equations<'a> {
    fn of(network: &'a Network) -> Self {
        Equations {
            assembly: Assembly::of(network, 0.0),
            bank: PortBank::anchored(network, &vec![0.0; network.port_count()]),
            rest: DVector::from_iterator(
                network.drives.len(),
                network.drives.iter().map(|drive| drive.rest),
            ),
            network,
        }
    }

    fn ports(&self, x: &DVector<f64>, drive: f64) -> Vec<f64> {
        self.assembly
            .port_probes(self.network)
            .iter()
            .map(|probe| probe.unknowns.dot(x) + drive * probe.drives.dot(&self.rest))
            .collect()
    }

    /// Residual and Jacobian of G·x + P·i(v) − Gu·u.
    fn at(&self, x: &DVector<f64>, drive: f64) -> (DVector<f64>, DMatrix<f64>) {
        let v = self.ports(x, drive);
        let mut now = Evaluation::for_bank(&self.bank);
        self.bank.evaluate(&v, &mut now);
        let mut residual =
            &self.assembly.conductance * x - &self.assembly.drive_conductance * &self.rest * drive;
        let mut jacobian = self.assembly.conductance.clone();
        let probes = self.assembly.port_probes(self.network);
        for (k, probe) in probes.iter().enumerate() {
            residual += &probe.unknowns * now.current[k];
        }
        let mut unit = vec![0.0; v.len()];
        for column in 0..v.len() {
            unit.fill(0.0);
            unit[column] = 1.0;
            let mut slopes = vec![0.0; v.len()];
            self.bank
                .add_blocks_times(&now.conductance, &unit, &mut slopes);
            for (row, slope) in slopes
                .into_iter()
                .enumerate()
                .filter(|(_, slope)| *slope != 0.0)
            {
                jacobian += &probes[row].unknowns * probes[column].unknowns.transpose() * slope;
            }
        }
        (residual, jacobian)
    }

    /// One backward-Euler step with `held` siemens of artificial capacitance at every unknown.
    fn step(&self, before: &DVector<f64>, drive: f64, held: f64) -> Option<DVector<f64>> {
        let mut x = before.clone();
        for _ in 0..60 {
            let (mut residual, mut jacobian) = self.at(&x, drive);
            residual += (&x - before) * held;
            for k in 0..x.len() {
                jacobian[(k, k)] += held;
            }
            let update = jacobian.lu().solve(&residual)?;
            let largest = update.amax();
            if !largest.is_finite() {
                return None;
            }
            x -= update * (0.1 / largest).min(1.0);
            if largest < 1e-10 {
                return Some(x);
            }
        }
        None
    }
}

/// The node voltages the network comes to rest at when its rails rise from zero: backward Euler with a capacitance at
/// every node of the unreduced equations, its step growing until the capacitance no longer matters (C. T. Kelley and
/// D. E. Keyes, "Convergence analysis of pseudo-transient continuation", SIAM J. Numer. Anal. 35, 1998).
fn pseudo_transient(network: &Network) -> Option<Vec<f64>> {
    let equations = Equations::of(network);
    let mut x = DVector::zeros(equations.assembly.size());
    let (mut held, mut drive) = (1e-2, 0.0);
    for _ in 0..20_000 {
        let next = (drive + 0.01f64).min(1.0);
        match equations.step(&x, next, held) {
            Some(settled) => {
                let moved = (&settled - &x).amax();
                (x, drive) = (settled, next);
                if drive == 1.0 {
                    held *= 0.7;
                }
                if held < 1e-14 && moved < 1e-9 {
                    return Some(x.iter().copied().collect());
                }
            }
            None => held *= 4.0,
        }
    }
    None
}

#[test]
fn the_referee_finds_the_bias_of_every_open_stage() {
    for name in STAGES {
        let network = Network::of(&open(name));
        let point = OperatingPoint::of(&network).unwrap();
        let found =
            pseudo_transient(&network).unwrap_or_else(|| panic!("{name}: the referee found none"));
        for (node, place) in network.places.iter().enumerate() {
            if let Place::Unknown(number) = place {
                // the referee stops at corrections of 1e-10 V
                let error = (found[*number] - point.nodes[node]).abs();
                assert!(
                    error < 1e-8,
                    "{name}: {} off by {error:e} V",
                    network.nodes[node]
                );
            }
        }
    }
}

#[test]
fn the_referee_sees_a_driven_stage_settle() {
    let network = Network::of(&open("b_split_emitter"));
    let point = OperatingPoint::of(&network).unwrap();
    assert!(settles(&network, &point, 0.51));
}

/// Units `seeds` all answered but for few, and every refusal upheld.
fn check(seeds: std::ops::Range<u64>) {
    let count = seeds.end - seeds.start;
    let outcomes: Vec<(u64, Outcome)> = seeds
        .into_par_iter()
        .map(|seed| (seed, outcome(seed)))
        .collect();
    let (mut refused, mut oscillators, mut defects) = (Vec::new(), Vec::new(), Vec::new());
    let mut worst = (0.0f64, 0.0f64);
    for (seed, outcome) in &outcomes {
        let (name, _, level) = unit(*seed);
        let line = |what: &str| format!("seed {seed}, {name}, {level:.4} V: {what}");
        match outcome {
            Outcome::Answered { thd, error } => worst = (worst.0.max(*thd), worst.1.max(*error)),
            Outcome::Oscillates(why) => oscillators.push(line(why)),
            Outcome::Refused(why) => refused.push(line(why)),
            Outcome::Defect(why) => defects.push(line(why)),
        }
    }
    let answered = outcomes.len() - refused.len() - oscillators.len() - defects.len();
    println!(
        "{count} units: {answered} answered (THD up to {:.0} %, error estimates up to {:.1e}), {} oscillate, {} refused, {} defects",
        100.0 * worst.0,
        worst.1,
        oscillators.len(),
        refused.len(),
        defects.len()
    );
    println!(
        "{}",
        [
            oscillators.join("\n"),
            refused.join("\n"),
            defects.join("\n")
        ]
        .join("\n")
    );
    assert!(defects.is_empty(), "{}", defects.join("\n"));
    // an oscillator shown to be one has its answer, the limit is for stages the engine has none for; counted among the
    // refused, the 21 oscillators in the first 2,000 units would be 1.05 %
    assert!(
        refused.len() as f64 <= REFUSED * count as f64,
        "{}",
        refused.join("\n")
    );
}

#[test]
fn parts_off_by_up_to_ten_times_are_answered_or_refused_with_cause() {
    check(0..300);
}

#[test]
#[ignore = "two thousand units; a minute"]
fn slow_two_thousand_stages_off_by_up_to_ten_times_are_answered_or_refused_with_cause() {
    check(0..2000);
}
