//! THD and harmonics over levels and frequencies, from the periodic steady state.

use super::conditions_of;
use super::report::{DistortionPoint, DistortionReport};
use super::thd::{self, Distortion};
use crate::engine::periodic::PeriodicOptions;
use crate::engine::step::State;
use crate::engine::{EngineError, OperatingPoint, PeriodicSolution, PeriodicSolver};
use crate::network::Network;
use crate::stage::Stage;
use rayon::prelude::*;
use std::f64::consts::SQRT_2;

/// Points of a waveform kept for the plots.
const WAVEFORM_POINTS: usize = 512;
/// Bandwidth of the THD unless asked otherwise, Hz.
pub const DEFAULT_BANDWIDTH: f64 = 80e3;
/// Levels of the default sweep.
const DEFAULT_LEVELS: usize = 60;
/// THD the default sweep is placed by.
const PLACING_THD: f64 = 0.1;

/// What to measure.
#[derive(Clone, Debug)]
pub struct DistortionRequest {
    /// EMF levels, V rms; empty for the default sweep of each frequency.
    pub levels: Vec<f64>,
    /// Frequencies, Hz.
    pub frequencies: Vec<f64>,
    /// Bandwidth of the THD, Hz; `None` for no limit.
    pub bandwidth: Option<f64>,
}

/// Measure THD and harmonics of `stage`.
///
/// # Errors
/// Where the stage has no bias, or a level has no steady state.
pub fn distortion(
    stage: &Stage,
    request: &DistortionRequest,
) -> Result<DistortionReport, EngineError> {
    let network = Network::of(stage);
    let point = OperatingPoint::of(&network)?;
    let chains: Result<Vec<Vec<DistortionPoint>>, EngineError> = request
        .frequencies
        .par_iter()
        .map(|&frequency| chain(&network, &point, frequency, request))
        .collect();
    let points: Vec<DistortionPoint> = chains?.into_iter().flatten().collect();
    Ok(DistortionReport {
        title: stage.title.clone(),
        conditions: conditions_of(stage),
        cautions: cautions(&points),
        points,
    })
}

fn cautions(points: &[DistortionPoint]) -> Vec<String> {
    let mut cautions = Vec::new();
    if points.iter().any(|point| point.beyond_early_range) {
        cautions.push(
            "at some levels a transistor goes beyond the range of its Early voltages; figures there are an extrapolation"
                .to_string(),
        );
    }
    if points.iter().any(|point| point.error_estimate > 1e-6) {
        cautions.push(
            "some points carry an error above 1e-6 of H1; see error_estimate in --json".to_string(),
        );
    }
    cautions
}

/// All levels at one frequency, each started from the one below.
fn chain(
    network: &Network,
    point: &OperatingPoint,
    frequency: f64,
    request: &DistortionRequest,
) -> Result<Vec<DistortionPoint>, EngineError> {
    let levels = if request.levels.is_empty() {
        default_levels(network, point, frequency, request.bandwidth)?
    } else {
        request.levels.clone()
    };
    let mut order: Vec<usize> = (0..levels.len()).collect();
    order.sort_by(|a, b| levels[*a].total_cmp(&levels[*b]));
    let mut solver = PeriodicSolver::new(network, point, frequency, PeriodicOptions::default())?;
    let mut points: Vec<Option<DistortionPoint>> = vec![None; levels.len()];
    let mut before: Option<(f64, State<f64>)> = None;
    for k in order {
        let solution = solve_level(&mut solver, levels[k], before.as_ref())?;
        points[k] = Some(describe(&solution, levels[k], frequency, request.bandwidth));
        before = Some((levels[k], solution.start));
    }
    Ok(points.into_iter().flatten().collect())
}

/// The steady state at `level` V rms, started from a lower one scaled up where there is one.
pub fn solve_level(
    solver: &mut PeriodicSolver,
    level: f64,
    before: Option<&(f64, State<f64>)>,
) -> Result<PeriodicSolution, EngineError> {
    let guess = before
        .filter(|(known, _)| *known > 0.0 && level / known < 3.0)
        .map(|(known, state)| {
            let mut state = state.clone();
            state.iter_mut().for_each(|value| *value *= level / known);
            state
        });
    solver.sine(level * SQRT_2, guess.as_ref())
}

/// 60 levels from 60 dB below the 10 % point to 10 dB above it, or 1 mV to 10 V where 10 % is not reached below 100 V.
fn default_levels(
    network: &Network,
    point: &OperatingPoint,
    frequency: f64,
    bandwidth: Option<f64>,
) -> Result<Vec<f64>, EngineError> {
    let (low, high) = match level_of_thd(network, point, frequency, bandwidth, PLACING_THD)? {
        Some(level) => (level * 1e-3, level * 10f64.sqrt()),
        None => (1e-3, 10.0),
    };
    let last = (DEFAULT_LEVELS - 1) as f64;
    Ok((0..DEFAULT_LEVELS)
        .map(|k| low * (high / low).powf(k as f64 / last))
        .collect())
}

/// Roughly the level in V rms where THD first reaches `wanted`, to three digits; `None` below 100 V.
fn level_of_thd(
    network: &Network,
    point: &OperatingPoint,
    frequency: f64,
    bandwidth: Option<f64>,
    wanted: f64,
) -> Result<Option<f64>, EngineError> {
    let options = PeriodicOptions {
        tolerance: 1e-5,
        first_local_error: 3e-3,
        ..PeriodicOptions::default()
    };
    let mut solver = PeriodicSolver::new(network, point, frequency, options)?;
    let mut before: Option<(f64, State<f64>)> = None;
    let mut reaches =
        |level: f64, before: &mut Option<(f64, State<f64>)>| -> Result<bool, EngineError> {
            let solution = solve_level(&mut solver, level, before.as_ref())?;
            let reached = thd::distortion(&solution, frequency, bandwidth)
                .thd
                .is_ok_and(|thd| thd > wanted);
            if !reached {
                *before = Some((level, solution.start));
            }
            Ok(reached)
        };
    let mut level = 1e-4;
    while !reaches(level, &mut before)? {
        level *= 2.0;
        if level > 100.0 {
            return Ok(None);
        }
    }
    let (mut low, mut high) = (level / 2.0, level);
    while high / low > 1.002 {
        let middle = (low * high).sqrt();
        if reaches(middle, &mut before)? {
            high = middle
        } else {
            low = middle
        }
    }
    Ok(Some(three_digits(high)))
}

/// `value` rounded to three significant digits, so that a sweep's levels do not hang on the last bit.
fn three_digits(value: f64) -> f64 {
    let scale = 10f64.powi(2 - value.log10().floor() as i32);
    (value * scale).round() / scale
}

fn describe(
    solution: &PeriodicSolution,
    level: f64,
    frequency: f64,
    bandwidth: Option<f64>,
) -> DistortionPoint {
    let Distortion {
        fundamental,
        mean,
        harmonics,
        thd,
        of_total,
        highest,
    } = thd::distortion(solution, frequency, bandwidth);
    DistortionPoint {
        frequency,
        level,
        output: fundamental,
        gain_db: (level > 0.0 && fundamental > 0.0).then(|| 20.0 * (fundamental / level).log10()),
        thd_reason: thd.as_ref().err().cloned(),
        thd: thd.ok(),
        thd_of_total: of_total,
        bandwidth,
        harmonics_in_thd: highest,
        dc_shift: mean,
        harmonics,
        error_estimate: solution.error_estimate,
        samples: solution.phases.len(),
        beyond_early_range: solution.beyond_early_range,
        waveform: solution.even_grid(WAVEFORM_POINTS),
    }
}
