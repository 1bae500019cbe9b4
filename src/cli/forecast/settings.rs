//! `--solve` and `--sweep`: what other settings would do.

use std::str::FromStr;

use serde_json::{Value, json};
use tautrail::model::{self, Candidate, Fit, Interval, Setting, Solution};
use tautrail::rig::Rig;
use thiserror::Error;

use super::finite;
use super::words::{across, cautions};
use crate::cli::screen::{Screen, Tone};
use crate::cli::{Failure, Verdict};

const WIDTHS: [usize; 5] = [14, 26, 26, 26, 10];

/// A row of settings to try.
#[derive(Debug, Clone, PartialEq)]
pub struct Sweep {
    setting: Setting,
    values: Vec<f64>,
}

#[derive(Debug, Clone, PartialEq, Eq, Error)]
#[error("{text:?} is no sweep: write it as draw=2:4:9, cords=3:7:5 or mass=4:8:9 (from, to, rows; m, count, kg)")]
pub struct NoSweep {
    text: String,
}

impl FromStr for Sweep {
    type Err = NoSweep;

    fn from_str(text: &str) -> Result<Self, NoSweep> {
        let none = || NoSweep { text: text.to_owned() };
        let (word, range) = text.split_once('=').ok_or_else(none)?;
        let parts: Vec<f64> = range.split(':').map(str::parse).collect::<Result<_, _>>().map_err(|_| none())?;
        let ([from, to, rows], Some(setting)) = (parts.as_slice(), named(word)) else { return Err(none()) };
        if !(from.is_finite() && to.is_finite() && *from > 0.0 && to > from && (2.0..=1000.0).contains(rows)) {
            return Err(none());
        }
        let n = *rows as u32 - 1;
        let values = (0..=n).map(|i| from + (to - from) * f64::from(i) / f64::from(n));
        Ok(Self { setting, values: values.collect() })
    }
}

fn named(word: &str) -> Option<Setting> {
    [Setting::Draw, Setting::Cords, Setting::PayloadMass].into_iter().find(|setting| setting.word() == word)
}

pub fn sweep(rig: &Rig, sweep: &Sweep, screen: &Screen) -> Result<Verdict, Failure> {
    let candidates = model::sweep(rig, sweep.setting, &sweep.values);
    if screen.json {
        let rows: Vec<Value> = candidates.iter().map(as_json).collect();
        screen.value(&json!({ "setting": sweep.setting.word(), "rows": rows, "not_fitted_yet": model::unfitted(rig), "cautions": cautions(rig) }));
        return Ok(Verdict::Done);
    }
    print_rows(sweep.setting, &candidates, screen);
    print_cautions(rig, screen);
    Ok(Verdict::Done)
}

pub fn solve(rig: &Rig, word: &str, screen: &Screen) -> Result<Verdict, Failure> {
    let setting = named(word).ok_or_else(|| NoSweep { text: word.to_owned() })?;
    let solution = model::solve(rig, setting);
    if screen.json {
        screen.value(&solution_json(rig, &solution));
    } else {
        print_solution(&solution, screen);
        print_cautions(rig, screen);
    }
    Ok(if solution.chosen.is_some() { Verdict::Done } else { Verdict::CheckFailed })
}

fn print_solution(solution: &Solution, screen: &Screen) {
    let (word, unit) = (solution.setting.word(), solution.setting.unit());
    match &solution.chosen {
        Some((candidate, fit)) => {
            let surely = if *fit == Fit::Surely { "with 95 %" } else { "at best values only" };
            let sentence = format!("{word} {:.3} {unit} meets the window under the limits, {surely}", candidate.value);
            screen.line(screen.toned(&sentence, if *fit == Fit::Surely { Tone::Good } else { Tone::Caution }));
            if let Some((low, high)) = solution.range {
                screen.line(format!("as good: {word} from {low:.3} to {high:.3} {unit}, as tried"));
            }
            print_rows(solution.setting, std::slice::from_ref(candidate), screen);
        }
        None => screen.line(screen.toned(&format!("no {word} meets the window under the limits"), Tone::Bad)),
    }
    if let Some(why) = &solution.why {
        screen.line(why);
    }
}

fn print_rows(setting: Setting, candidates: &[Candidate], screen: &Screen) {
    let header =
        [setting.word(), "launch speed, m/s", "peak g (specific, CFC 60)", "release line, N", ""].map(str::to_owned);
    screen.line(across(&header, &WIDTHS));
    let shown = |interval: &Interval, decimals: usize| {
        format!("{:.decimals$} ({:.decimals$} to {:.decimals$})", interval.value, interval.low, interval.high)
    };
    for candidate in candidates {
        let value = format!("{:.3} {}", candidate.value, setting.unit());
        match &candidate.expected {
            Ok(expected) => screen.line(across(
                &[
                    value,
                    shown(&expected.launch_speed_mps, 2),
                    shown(&expected.peak_g, 2),
                    shown(&expected.line_tension_n, 0),
                    String::new(),
                ],
                &WIDTHS,
            )),
            Err(error) => screen.line(format!("{value:<14}{error}")),
        }
    }
}

fn print_cautions(rig: &Rig, screen: &Screen) {
    screen.line("intervals: 95 %, first order");
    for sentence in model::unfitted(rig) {
        screen.line(screen.toned(&sentence, Tone::Bad));
    }
    for caution in cautions(rig) {
        screen.line(caution);
    }
}

fn as_json(candidate: &Candidate) -> Value {
    let interval = |interval: &Interval| {
        json!({
            "value": finite(interval.value), "standard_uncertainty": finite(interval.standard_uncertainty),
            "low": finite(interval.low), "high": finite(interval.high),
        })
    };
    match &candidate.expected {
        Ok(expected) => json!({
            "value": candidate.value,
            "launch_speed_mps": interval(&expected.launch_speed_mps),
            "peak_g_cfc60_specific": interval(&expected.peak_g),
            "line_tension_n": interval(&expected.line_tension_n),
        }),
        Err(error) => json!({ "value": candidate.value, "error": error.to_string() }),
    }
}

fn solution_json(rig: &Rig, solution: &Solution) -> Value {
    json!({
        "setting": solution.setting.word(), "unit": solution.setting.unit(),
        "chosen": solution.chosen.as_ref().map(|(candidate, _)| as_json(candidate)),
        "surely": solution.chosen.as_ref().map(|(_, fit)| *fit == Fit::Surely),
        "as_good_from": solution.range.map(|range| range.0), "as_good_to": solution.range.map(|range| range.1),
        "why": solution.why, "not_fitted_yet": model::unfitted(rig), "cautions": cautions(rig),
    })
}
