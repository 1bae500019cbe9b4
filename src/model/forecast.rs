//! What a configuration would do, as a distribution: Monte Carlo (JCGM 101:2008) beside first-order propagation (JCGM
//! 100:2008), probabilities of window and limits, what each input contributes.
//!
//! Every draw has its own stream of random numbers from the seed, so the result does not depend on the number of threads.

use super::bands::{Bands, bands};
use super::cfc::CfcRatio;
use super::draws::{Draw, Draws};
use super::energy_draws::{ForecastedEnergy, forecasted_energy};
use super::error::ModelError;
use super::inputs::{Inputs, Known, Moved};
use super::interval::Interval;
use super::loss_terms::{beyond_loss_card, unfitted};
use super::propagation::{Propagated, first_order};
use super::quantities::{LAUNCH_SPEED, LINE_TENSION, PEAK_G, QUANTITIES, Quantity, evaluate};
use super::run::{LaunchRun, energy_at_separation, simulate};
use super::setup::{FAST, LaunchSetup};
use crate::estimation::{Distribution, Random};
use crate::rig::Rig;

/// How to make a forecast.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct ForecastOptions {
    pub known: Known,
    pub draws: u32,
    pub seed: u64,
    pub threads: usize,
}

/// One quantity, both ways.
#[derive(Debug, Clone, PartialEq)]
pub struct Forecasted {
    pub quantity: Quantity,
    /// With every input at its best value; NaN where the launch has no such number.
    pub best: f64,
    pub monte_carlo: Distribution,
    pub first_order: Interval,
    /// Change for one standard uncertainty of each input.
    pub shares: Vec<f64>,
}

/// Shares of the draws; each a probability.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Probabilities {
    pub speed_below_window: f64,
    pub speed_in_window: f64,
    pub speed_above_window: f64,
    pub peak_g_over_limit: f64,
    pub tension_over_limit: f64,
    /// In the window and under both limits.
    pub all_met: f64,
    /// The payload does not leave: the pull does not move the shuttle, or it stays on.
    pub no_launch: f64,
    /// The shuttle reaches the end stop.
    pub end_stop: f64,
}

#[derive(Debug, Clone)]
pub struct Forecast {
    pub quantities: Vec<Forecasted>,
    pub probabilities: Probabilities,
    pub inputs: Inputs,
    /// With every input at its best value.
    pub run: LaunchRun,
    /// At separation: every source and use that is there.
    pub energy: Vec<ForecastedEnergy>,
    pub bands: Bands,
    /// Sentences on what was never measured.
    pub extrapolations: Vec<String>,
    /// Sentences on losses that a fit is still to find.
    pub unfitted: Vec<String>,
    pub options: ForecastOptions,
}

/// Makes the forecast of a rig.
///
/// # Errors
/// A rig that can't be computed; correlations that contradict each other.
pub fn forecast(rig: &Rig, options: ForecastOptions) -> Result<Forecast, ModelError> {
    let setup = match options.known {
        Known::Plan => LaunchSetup::planned(rig)?,
        Known::HoldTension { tension_n, x_m } => LaunchSetup::drawn(rig, tension_n, x_m)?,
    };
    let inputs = Inputs::of(rig, options.known)?;
    let run = simulate(&setup)?;
    let ratio = CfcRatio::of(&setup, &inputs)?;
    let fast = LaunchSetup { relative_tolerance: FAST, ..setup.clone() };
    let numbers = |moved: &Moved, deviates: &[f64]| Ok(evaluate(moved, ratio.at(deviates))?.numbers);
    let propagated = first_order(&fast, &inputs, numbers)?;
    let best = numbers(&inputs.moved(&setup, &[]), &[])?;
    let draws = Draws::made(options, |stream| one_draw(&fast, &inputs, options.seed, stream, &ratio));
    let probabilities = probabilities(rig, &draws);
    let (columns, energy_columns) = draws.into_columns();
    let quantities = QUANTITIES.iter().zip(propagated).zip(columns).enumerate().map(
        |(k, ((quantity, Propagated { interval, shares }), column))| Forecasted {
            quantity: *quantity,
            best: best[k],
            monte_carlo: Distribution::of(column),
            first_order: Interval::normal(best[k], interval.standard_uncertainty),
            shares,
        },
    );
    Ok(Forecast {
        quantities: quantities.collect(),
        probabilities,
        energy: forecasted_energy(&run.energy_at_separation, energy_columns),
        bands: bands(&fast, &inputs, &run, options.seed),
        extrapolations: setup.extrapolations().into_iter().chain(beyond_loss_card(rig, &setup, &run)).collect(),
        unfitted: unfitted(rig),
        inputs,
        run,
        options,
    })
}

fn one_draw(setup: &LaunchSetup, inputs: &Inputs, seed: u64, stream: u64, ratio: &CfcRatio) -> Draw {
    let mut random = Random::new(seed, stream);
    let independent: Vec<f64> = inputs.all.iter().map(|_| random.normal()).collect();
    let deviates = inputs.correlate(&independent);
    let moved = inputs.moved(setup, &deviates);
    Draw { outcome: evaluate(&moved, ratio.at(&deviates)).ok(), energy: energy_at_separation(&moved.setup).ok() }
}

fn probabilities(rig: &Rig, draws: &Draws) -> Probabilities {
    let n = draws.len();
    let part = |holds: &dyn Fn(usize) -> bool| (0..n).filter(|draw| holds(*draw)).count() as f64 / n as f64;
    let (low, high) = (rig.plan.launch_speed_min_mps, rig.plan.launch_speed_max_mps);
    let speed = |draw: usize| draws.number(LAUNCH_SPEED, draw);
    let over_g = |draw: usize| draws.number(PEAK_G, draw) > rig.limits.peak_g;
    let over_tension = |draw: usize| draws.number(LINE_TENSION, draw) > rig.limits.tension_n;
    let inside = |draw: usize| (low..=high).contains(&speed(draw));
    Probabilities {
        speed_below_window: part(&|draw| speed(draw) < low),
        speed_in_window: part(&inside),
        speed_above_window: part(&|draw| speed(draw) > high),
        peak_g_over_limit: part(&over_g),
        tension_over_limit: part(&over_tension),
        all_met: part(&|draw| inside(draw) && !over_g(draw) && !over_tension(draw)),
        no_launch: part(&|draw| speed(draw).is_nan()),
        end_stop: part(&|draw| draws.at_end_stop(draw)),
    }
}

impl Forecast {
    /// Sentences on what the launch speed hangs on most, the greatest first.
    pub fn sensitivities(&self) -> Vec<String> {
        let (speed, peak) = (&self.quantities[LAUNCH_SPEED], &self.quantities[PEAK_G]);
        let mut order: Vec<usize> = (0..self.inputs.all.len()).collect();
        let weight = |i: usize| (speed.shares[i] / speed.best).abs().max((peak.shares[i] / peak.best).abs());
        order.sort_by(|a, b| weight(*b).total_cmp(&weight(*a)));
        let sentence = |i: usize| {
            let input = &self.inputs.all[i];
            let (change, unit) = match input.unit {
                "relative" => (100.0 * input.standard_uncertainty, "%"),
                unit => (input.standard_uncertainty, unit),
            };
            format!(
                "{} more by one standard uncertainty ({change:.3} {unit}) changes launch speed by {:+.3} m/s, peak g by {:+.3}",
                input.meaning, speed.shares[i], peak.shares[i]
            )
        };
        order.into_iter().filter(|i| weight(*i) > 1e-5).map(sentence).collect()
    }
}
