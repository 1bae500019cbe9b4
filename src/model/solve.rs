//! Which setting meets the window under the limits: by trying a row of them, each with its first-order interval.

use super::cfc::CfcRatio;
use super::error::ModelError;
use super::inputs::{Inputs, Known};
use super::interval::Interval;
use super::propagation::first_order;
use super::quantities::{LAUNCH_SPEED, LINE_TENSION, PEAK_G, evaluate};
use super::setup::{FAST, LaunchSetup};
use crate::rig::Rig;

/// Settings tried between the ends of a range.
const N_TRIED: u32 = 80;

/// What a crew can change.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Setting {
    Draw,
    Cords,
    PayloadMass,
}

/// What one setting would give.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Expected {
    pub launch_speed_mps: Interval,
    /// Specific force along the rail at the payload, CFC 60.
    pub peak_g: Interval,
    pub line_tension_n: Interval,
}

#[derive(Debug, Clone, PartialEq)]
pub struct Candidate {
    /// m, count or kg.
    pub value: f64,
    pub expected: Result<Expected, ModelError>,
}

/// How well a candidate does.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord)]
pub enum Fit {
    Misses,
    /// Best values are in the window and under the limits, their 95 % intervals not wholly.
    AtBestValues,
    /// The 95 % intervals are too.
    Surely,
}

#[derive(Debug, Clone, PartialEq)]
pub struct Solution {
    pub setting: Setting,
    /// The one to take: surest, then nearest to the middle of the window.
    pub chosen: Option<(Candidate, Fit)>,
    /// Least and greatest tried value that fits as well as the chosen one.
    pub range: Option<(f64, f64)>,
    /// Why there is none, or why none is sure.
    pub why: Option<String>,
    pub tried: Vec<Candidate>,
}

impl Setting {
    pub const fn word(self) -> &'static str {
        match self {
            Self::Draw => "draw",
            Self::Cords => "cords",
            Self::PayloadMass => "mass",
        }
    }

    pub const fn unit(self) -> &'static str {
        match self {
            Self::Draw => "m",
            Self::Cords => "cords",
            Self::PayloadMass => "kg",
        }
    }

    /// Whether the crew can have this value: cords come whole.
    pub fn can_be(self, value: f64) -> bool {
        self != Self::Cords || value.fract() == 0.0
    }

    /// The rig with this setting at a value; cords at the nearest whole number of them.
    pub fn with(self, rig: &Rig, value: f64) -> Rig {
        let mut rig = rig.clone();
        match self {
            Self::Draw => rig.plan.draw_m = value,
            Self::Cords => rig.cords.count = value.round().max(1.0) as u32,
            Self::PayloadMass => rig.payload.mass_kg.value = value,
        }
        rig
    }

    /// Values worth trying: draws up to the rail's start or the end of the cord curve, up to three times the cords, a fifth to
    /// three times the payload.
    pub fn values(self, rig: &Rig) -> Vec<f64> {
        let even = |low: f64, high: f64| {
            (0..=N_TRIED).map(|i| low + (high - low) * f64::from(i) / f64::from(N_TRIED)).collect::<Vec<_>>()
        };
        match self {
            Self::Draw => {
                let known_m =
                    rig.cords.curve.last().map_or(f64::INFINITY, |last| {
                        last.elongation * rig.cords.free_length_m / rig.cords.travel_ratio
                    });
                let most_m = rig.rail.zero_mark_x_m.min(known_m);
                even(0.05 * most_m, most_m)
            }
            Self::Cords => (1..=3 * rig.cords.count.max(1)).map(f64::from).collect(),
            Self::PayloadMass => even(0.2 * rig.payload.mass_kg.value, 3.0 * rig.payload.mass_kg.value),
        }
    }
}

/// What each of some settings would give.
pub fn sweep(rig: &Rig, setting: Setting, values: &[f64]) -> Vec<Candidate> {
    values.iter().map(|value| Candidate { value: *value, expected: expected(&setting.with(rig, *value)) }).collect()
}

fn expected(rig: &Rig) -> Result<Expected, ModelError> {
    let setup = LaunchSetup::planned(rig)?;
    let inputs = Inputs::of(rig, Known::Plan)?;
    let ratio = CfcRatio::of(&setup, &inputs)?;
    let fast = LaunchSetup { relative_tolerance: FAST, ..setup };
    let all = first_order(&fast, &inputs, |moved, deviates| Ok(evaluate(moved, ratio.at(deviates))?.numbers))?;
    let of = |k: usize| all[k].interval;
    Ok(Expected { launch_speed_mps: of(LAUNCH_SPEED), peak_g: of(PEAK_G), line_tension_n: of(LINE_TENSION) })
}

/// Finds the setting that meets the window under the limits.
pub fn solve(rig: &Rig, setting: Setting) -> Solution {
    let tried = sweep(rig, setting, &setting.values(rig));
    let middle_mps = 0.5 * (rig.plan.launch_speed_min_mps + rig.plan.launch_speed_max_mps);
    let fits: Vec<(usize, Fit)> = tried.iter().map(|candidate| fit(rig, candidate)).enumerate().collect();
    let off = |i: usize| match &tried[i].expected {
        Ok(expected) => (expected.launch_speed_mps.value - middle_mps).abs(),
        Err(_) => f64::INFINITY,
    };
    let best = fits.iter().filter(|(_, fit)| *fit > Fit::Misses).copied();
    let best = best.max_by(|(a, one), (b, other)| one.cmp(other).then(off(*b).total_cmp(&off(*a))));
    let range = best.map(|(_, fit)| {
        let as_good = || fits.iter().filter(|(_, other)| *other >= fit).map(|(i, _)| tried[*i].value);
        (as_good().fold(f64::INFINITY, f64::min), as_good().fold(f64::NEG_INFINITY, f64::max))
    });
    let why = match best {
        Some((_, Fit::Surely)) => None,
        Some((i, _)) => Some(unsure(rig, &tried[i])),
        None => Some(why_none(rig, setting, &tried)),
    };
    Solution { setting, chosen: best.map(|(i, fit)| (tried[i].clone(), fit)), range, why, tried }
}

fn fit(rig: &Rig, candidate: &Candidate) -> Fit {
    let Ok(Expected { launch_speed_mps: speed, peak_g, line_tension_n }) = &candidate.expected else {
        return Fit::Misses;
    };
    let (low, high) = (rig.plan.launch_speed_min_mps, rig.plan.launch_speed_max_mps);
    let best = (low..=high).contains(&speed.value)
        && peak_g.value <= rig.limits.peak_g
        && line_tension_n.value <= rig.limits.tension_n;
    let surely = speed.low >= low
        && speed.high <= high
        && peak_g.high <= rig.limits.peak_g
        && line_tension_n.high <= rig.limits.tension_n;
    if surely {
        Fit::Surely
    } else if best {
        Fit::AtBestValues
    } else {
        Fit::Misses
    }
}

fn unsure(rig: &Rig, candidate: &Candidate) -> String {
    let Ok(expected) = &candidate.expected else { return String::new() };
    let Expected { launch_speed_mps: speed, peak_g, line_tension_n } = expected;
    let mut reasons = Vec::new();
    if speed.low < rig.plan.launch_speed_min_mps || speed.high > rig.plan.launch_speed_max_mps {
        reasons.push(format!("launch speed may be {:.2} to {:.2} m/s", speed.low, speed.high));
    }
    if peak_g.high > rig.limits.peak_g {
        reasons.push(format!("peak g may reach {:.2} g of {:.2}", peak_g.high, rig.limits.peak_g));
    }
    if line_tension_n.high > rig.limits.tension_n {
        reasons.push(format!("the release line may reach {:.0} N of {:.0}", line_tension_n.high, rig.limits.tension_n));
    }
    format!("no tried setting meets it with 95 %; at the chosen one {}", reasons.join(", "))
}

/// The reason that most settings fail for, with numbers.
fn why_none(rig: &Rig, setting: Setting, tried: &[Candidate]) -> String {
    let good: Vec<(f64, &Expected)> =
        tried.iter().filter_map(|c| c.expected.as_ref().ok().map(|expected| (c.value, expected))).collect();
    let Some(first) = good.first() else {
        let error = tried.iter().find_map(|candidate| candidate.expected.as_ref().err());
        return format!("no tried setting launches at all: {}", error.map_or_else(String::new, ToString::to_string));
    };
    let (word, unit) = (setting.word(), setting.unit());
    let (low, high) = (rig.plan.launch_speed_min_mps, rig.plan.launch_speed_max_mps);
    let speed = |entry: &(f64, &Expected)| entry.1.launch_speed_mps.value;
    let fastest = good.iter().max_by(|a, b| speed(a).total_cmp(&speed(b))).unwrap_or(first);
    let slowest = good.iter().min_by(|a, b| speed(a).total_cmp(&speed(b))).unwrap_or(first);
    if speed(fastest) < low {
        return format!(
            "the fastest tried setting, {word} {:.2} {unit}, gives {:.2} m/s, the window begins at {low:.2}",
            fastest.0,
            speed(fastest)
        );
    }
    if speed(slowest) > high {
        return format!(
            "the slowest tried setting, {word} {:.2} {unit}, gives {:.2} m/s, the window ends at {high:.2}",
            slowest.0,
            speed(slowest)
        );
    }
    let inside: Vec<_> = good.iter().filter(|entry| (low..=high).contains(&speed(entry))).collect();
    let Some(gentlest) = inside.iter().min_by(|a, b| a.1.peak_g.value.total_cmp(&b.1.peak_g.value)) else {
        return format!("the launch speed steps over the window between two settings of {word}");
    };
    format!(
        "where the launch speed meets the window, the gentlest setting, {word} {:.2} {unit}, gives {:.2} g (limit {:.2}) and \
         {:.0} N in the release line (limit {:.0})",
        gentlest.0, gentlest.1.peak_g.value, rig.limits.peak_g, gentlest.1.line_tension_n.value, rig.limits.tension_n
    )
}
