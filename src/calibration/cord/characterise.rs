//! The whole of it: a sheet in, everything a card says out.

use super::branch::{BranchFit, BranchReading, Instruments};
use super::error::CordError;
use super::factors::{Factors, factors};
use super::hold::{self, Creep, Hold, Relaxation};
use super::order::{self, Cycle};
use super::turning::{TurningPoint, is_early, turning};
use crate::rig::{CordBranch, CordReading, CordSheet};

/// Standard deviation between cords of a lot where one was tested: common practice, no published source.
const USUAL_SCATTER: f64 = 0.05;
/// A hold counts as one at constant length (or load) where it varies by less than this share.
const CONSTANT: f64 = 0.003;

/// A reading that stands far off.
#[derive(Debug, Clone, PartialEq)]
pub struct Flag {
    pub line: usize,
    pub serial: String,
    pub branch: CordBranch,
    pub tension_n: f64,
    pub elongation: f64,
    /// In robust standard deviations of the residuals.
    pub times: f64,
}

/// All that the readings say about the cords of a lot.
#[derive(Debug, Clone, PartialEq)]
pub struct Characterised {
    pub serials: Vec<String>,
    pub loading: BranchFit,
    pub unloading: BranchFit,
    pub tested_to: f64,
    pub turning: TurningPoint,
    pub relaxation: Option<Relaxation>,
    pub creep: Vec<Creep>,
    pub factors: Factors,
    /// Lost in a cycle to the tested elongation, of one cord, J, and its standard uncertainty.
    pub hysteresis_j: (f64, f64),
    /// Relative scatter between cords; `None` where it was assumed.
    pub relative_scatter: Option<f64>,
    pub assumed_scatter: f64,
    /// Part of the tension that relaxation had left while each branch (loading, unloading) was read.
    pub left_while_read: [f64; 2],
    pub flags: Vec<Flag>,
    /// Sentences on what was not measured and what looks odd.
    pub cautions: Vec<String>,
}

/// Characterises the cords of a sheet.
///
/// # Errors
/// [`CordError`]: too few readings, all alike, out of order, or no law fits them.
pub fn characterise(sheet: &CordSheet) -> Result<Characterised, CordError> {
    let serials = order::serials(&sheet.readings);
    let cycles = order::cycles(&sheet.readings, &serials)?;
    let of_card: Vec<&Cycle<'_>> = cycles.iter().filter(|cycle| cycle.cycle > sheet.conditioning_cycles).collect();
    if of_card.is_empty() {
        let last = cycles.iter().map(|cycle| cycle.cycle).max().unwrap_or(0);
        return Err(CordError::OnlyConditioning { conditioning: sheet.conditioning_cycles, last });
    }
    let furthest_of =
        |cord: usize| of_card.iter().filter(|one| one.cord == cord).map(|one| one.furthest()).fold(0.0, f64::max);
    let furthest: Vec<f64> = (0..serials.len()).map(furthest_of).collect();
    let (early, full): (Vec<&Cycle<'_>>, Vec<&Cycle<'_>>) =
        of_card.into_iter().partition(|cycle| is_early(cycle, furthest[cycle.cord]));
    let assumed_scatter = sheet.assumed_scatter.unwrap_or(USUAL_SCATTER);
    let instruments = Instruments {
        force_relative: sheet.force_relative_uncertainty,
        force_n: sheet.force_uncertainty_n,
        elongation: sheet.length_uncertainty_m / sheet.free_length_m.value,
        free_length: sheet.free_length_m.standard_uncertainty / sheet.free_length_m.value,
        assumed_scatter,
    };
    let branch =
        |name, which| BranchFit::of(name, &readings_of(&full, which), (serials.len(), full.len()), instruments);
    let loading = branch("loading", CordBranch::Load)?;
    let unloading = branch("unloading", CordBranch::Unload)?;
    let tested_to = loading.tested_to.min(unloading.tested_to);
    let (holds, creep) = holds(&full, &serials);
    let relaxation = hold::relaxation(&holds, &sheet.cell_creep)?;
    let turning = turning(&early, tested_to, &loading, &unloading);
    let mut made = Characterised {
        flags: flags(sheet, &loading, &unloading),
        left_while_read: left_while_read(&full, relaxation.as_ref()),
        factors: factors(&cycles, &serials, &loading, sheet.temperature_c, sheet.conditioning_cycles)?,
        hysteresis_j: hysteresis_j(sheet, &loading, &unloading, tested_to),
        relative_scatter: loading.relative_scatter(),
        assumed_scatter,
        serials,
        loading,
        unloading,
        tested_to,
        turning,
        relaxation,
        creep,
        cautions: Vec::new(),
    };
    made.cautions = cautions(sheet, &made);
    Ok(made)
}

fn readings_of(cycles: &[&Cycle<'_>], which: CordBranch) -> Vec<BranchReading> {
    let of = |cord: usize, one: &CordReading| BranchReading {
        cord,
        line: one.line,
        elongation: one.elongation,
        tension_n: one.tension_n,
    };
    let mut all = Vec::new();
    for cycle in cycles {
        if which == CordBranch::Unload && cycle.of(which).next().is_some() {
            // Coming in begins where the hold ended, or at the last load.
            let turned = cycle.of(CordBranch::Hold).last().or_else(|| cycle.of(CordBranch::Load).last());
            all.extend(turned.map(|one| of(cycle.cord, one)));
        }
        all.extend(cycle.of(which).map(|one| of(cycle.cord, one)));
    }
    all
}

/// Holds at constant length, and creep at constant load.
fn holds(cycles: &[&Cycle<'_>], serials: &[String]) -> (Vec<Hold>, Vec<Creep>) {
    let (mut holds, mut creeps) = (Vec::new(), Vec::new());
    for cycle in cycles {
        let timed: Vec<(f64, &CordReading)> =
            cycle.of(CordBranch::Hold).filter_map(|one| Some((one.time_s?, one))).collect();
        let last_load = cycle.of(CordBranch::Load).filter_map(|one| one.time_s).fold(f64::NEG_INFINITY, f64::max);
        let first_load = cycle.of(CordBranch::Load).filter_map(|one| one.time_s).fold(f64::INFINITY, f64::min);
        let Some(&(first_s, first)) = timed.first() else { continue };
        let start_s = if last_load.is_finite() { last_load } else { first_s };
        let varies = |value: fn(&CordReading) -> f64| {
            let values = || timed.iter().map(|(_, one)| value(one));
            let (low, high) = (values().fold(f64::INFINITY, f64::min), values().fold(f64::NEG_INFINITY, f64::max));
            (high - low) / high.abs().max(1e-9) > CONSTANT
        };
        if !varies(|one| one.elongation) {
            let readings = timed.iter().map(|(t, one)| (t - start_s, one.tension_n)).collect();
            holds.push(Hold { winch_s: (start_s - first_load).max(0.0), readings });
        } else if !varies(|one| one.tension_n) {
            let readings: Vec<(f64, f64)> = timed.iter().map(|(t, one)| (t - start_s, one.elongation)).collect();
            creeps.extend(hold::creep(&serials[cycle.cord], first.tension_n, &readings));
        }
    }
    (holds, creeps)
}

/// The loading branch was read in the middle of its ramp, on average; the unloading branch after ramp and hold.
fn left_while_read(cycles: &[&Cycle<'_>], relaxation: Option<&Relaxation>) -> [f64; 2] {
    let Some(relaxation) = relaxation else { return [1.0; 2] };
    let mut ramps = Vec::new();
    let mut holds = Vec::new();
    for cycle in cycles {
        let times = |branch| cycle.of(branch).filter_map(|one| one.time_s).collect::<Vec<f64>>();
        let (load, unload) = (times(CordBranch::Load), times(CordBranch::Unload));
        if let (Some(first), Some(last)) = (load.first(), load.last()) {
            ramps.push(last - first);
            if let (Some(begin), Some(end)) = (unload.first(), unload.last()) {
                holds.push(0.5 * (begin + end) - last);
            }
        }
    }
    let mean = |all: &[f64]| if all.is_empty() { 0.0 } else { all.iter().sum::<f64>() / all.len() as f64 };
    let (ramp_s, hold_s) = (mean(&ramps), mean(&holds));
    [hold::held_part(&relaxation.terms, ramp_s, 0.0), hold::held_part(&relaxation.terms, ramp_s, hold_s)]
}

/// Area between the branches times the free length. Its uncertainty: what both laws miss, of which half the steps count as
/// independent, and the scale of force and length.
fn hysteresis_j(sheet: &CordSheet, loading: &BranchFit, unloading: &BranchFit, to: f64) -> (f64, f64) {
    let length_m = sheet.free_length_m.value;
    let area_j = length_m * (loading.law.integral_n(to) - unloading.law.integral_n(to));
    let missed_n = |branch: &BranchFit| branch.left_out_rms_n / (0.5 * branch.n_steps as f64).sqrt();
    let missed_j = length_m * to * missed_n(loading).hypot(missed_n(unloading));
    let free_length = sheet.free_length_m.standard_uncertainty / length_m;
    let scale_j = area_j * sheet.force_relative_uncertainty.hypot(free_length);
    (area_j, missed_j.hypot(scale_j))
}

fn flags(sheet: &CordSheet, loading: &BranchFit, unloading: &BranchFit) -> Vec<Flag> {
    let far_off = loading.far_off.iter().chain(&unloading.far_off);
    let of = |(line, times): &(usize, f64)| {
        let reading = sheet.readings.iter().find(|reading| reading.line == *line)?;
        Some(Flag {
            line: *line,
            serial: reading.serial.clone(),
            branch: reading.branch,
            tension_n: reading.tension_n,
            elongation: reading.elongation,
            times: *times,
        })
    };
    far_off.filter_map(of).collect()
}

fn cautions(sheet: &CordSheet, made: &Characterised) -> Vec<String> {
    let mut all = Vec::new();
    if made.relative_scatter.is_none() {
        let percent = 100.0 * made.assumed_scatter;
        all.push(format!("one cord was tested: {percent:.1} % between cords is assumed, test at least three"));
    }
    if made.turning.turned_at.len() < 2 {
        all.push(
            "one turning point: how the tension comes down where a cord turns back earlier is a guess, and carried as an \
             uncertainty; unload once from a shorter draw"
                .into(),
        );
    }
    if made.relaxation.is_none() {
        all.push("no hold at constant length was timed: relaxation is not known and none is taken".into());
    } else if sheet.cell_creep.is_empty() {
        all.push("the cell's own creep is not given (cell_creep): it counts as the cords' relaxation".into());
    }
    if let Some(elongation) = made.crossing() {
        let percent = 100.0 * elongation;
        all.push(format!(
            "unloading lies above loading at {percent:.0} %: were branches exchanged, or lengths misread?"
        ));
    }
    for flag in &made.flags {
        all.push(format!(
            "line {}: cord {}, {} branch, {:.2} N at {:.1} % stands {:.0} deviations off: kept with little weight, look at it",
            flag.line,
            flag.serial,
            flag.branch.word(),
            flag.tension_n,
            100.0 * flag.elongation,
            flag.times
        ));
    }
    all
}

impl Characterised {
    /// Whether the unloading branch lies clearly above the loading branch somewhere.
    pub fn branches_cross(&self) -> bool {
        self.crossing().is_some()
    }

    fn crossing(&self) -> Option<f64> {
        let (out, back) = (&self.loading, &self.unloading);
        let above = |e: &f64| {
            back.law.tension_n(*e) > out.law.tension_n(*e) + 2.0 * back.left_out_rms_n.hypot(out.left_out_rms_n)
        };
        (1..50).map(|part| self.tested_to * f64::from(part) / 50.0).find(above)
    }
}
