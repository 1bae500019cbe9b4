//! `--solve` and `--sweep`: what other settings would do.

use std::str::FromStr;

use serde_json::{Value, json};
use tautrail::model::{self, Candidate, Fit, Interval, Setting, Solution};
use tautrail::rig::{LossCard, Rig};
use thiserror::Error;

use super::finite;
use super::words::{across, cautions};
use crate::cli::screen::{Screen, Tone};
use crate::cli::{Failure, Verdict};

const WIDTHS: [usize; 4] = [13, 23, 22, 20];

/// A row of settings to try.
#[derive(Debug, Clone, PartialEq)]
pub struct Sweep {
    setting: Setting,
    values: Vec<f64>,
}

#[derive(Debug, Clone, PartialEq, Error)]
pub enum NoSweep {
    #[error("{text:?} is no sweep: write it as draw=2:4:9, cords=3:7:5 or mass=4:8:9 (from, to, rows; m, count, kg)")]
    Unreadable { text: String },
    #[error(
        "{text:?} would have a row at {value:.3} cords, and cords come whole: choose rows that fall on whole numbers, such as {advice}"
    )]
    NotWhole { text: String, value: f64, advice: String },
}

impl FromStr for Sweep {
    type Err = NoSweep;

    fn from_str(text: &str) -> Result<Self, NoSweep> {
        let none = || NoSweep::Unreadable { text: text.to_owned() };
        let (word, range) = text.split_once('=').ok_or_else(none)?;
        let parts: Vec<f64> = range.split(':').map(str::parse).collect::<Result<_, _>>().map_err(|_| none())?;
        let ([from, to, rows], Some(setting)) = (parts.as_slice(), named(word)) else { return Err(none()) };
        if !(from.is_finite() && to.is_finite() && *from > 0.0 && to > from && (2.0..=1000.0).contains(rows)) {
            return Err(none());
        }
        let n = *rows as u32 - 1;
        let values: Vec<f64> = (0..=n).map(|i| from + (to - from) * f64::from(i) / f64::from(n)).collect();
        if let Some(value) = values.iter().copied().find(|value| !setting.can_be(*value)) {
            let (from, to) = (from.floor().max(1.0), to.ceil());
            let advice = format!("{word}={from}:{to}:{}", to - from + 1.0);
            return Err(NoSweep::NotWhole { text: text.to_owned(), value, advice });
        }
        Ok(Self { setting, values })
    }
}

fn named(word: &str) -> Option<Setting> {
    [Setting::Draw, Setting::Cords, Setting::PayloadMass].into_iter().find(|setting| setting.word() == word)
}

pub fn sweep(rig: &Rig, sweep: &Sweep, screen: &Screen) -> Result<Verdict, Failure> {
    let candidates = model::sweep(rig, sweep.setting, &sweep.values);
    if screen.json {
        let rows: Vec<Value> = candidates.iter().map(as_json).collect();
        screen.value(&json!({ "setting": sweep.setting.word(), "rows": rows, "not_fitted_yet": model::unfitted(rig), "loss_card": rig.details.losses.card.as_ref().map(LossCard::spans), "cautions": cautions(rig) }));
        return Ok(Verdict::Done);
    }
    print_rows(sweep.setting, &candidates, screen);
    print_cautions(rig, screen);
    Ok(Verdict::Done)
}

pub fn solve(rig: &Rig, word: &str, screen: &Screen) -> Result<Verdict, Failure> {
    let setting = named(word).ok_or_else(|| NoSweep::Unreadable { text: word.to_owned() })?;
    let solution = model::solve(rig, setting);
    if screen.json {
        screen.value(&solution_json(rig, &solution));
    } else {
        print_solution(&solution, screen);
        print_cautions(rig, screen);
    }
    Ok(if solution.chosen.is_some() { Verdict::Done } else { Verdict::CheckFailed })
}

const fn decimals(setting: Setting) -> usize {
    match setting {
        Setting::Cords => 0,
        Setting::Draw | Setting::PayloadMass => 3,
    }
}

fn print_solution(solution: &Solution, screen: &Screen) {
    let (word, unit) = (solution.setting.word(), solution.setting.unit());
    let decimals = decimals(solution.setting);
    match &solution.chosen {
        Some((candidate, fit)) => {
            let surely = if *fit == Fit::Surely { "with 95 %" } else { "at best values only" };
            let value = candidate.value;
            let what = match solution.setting {
                Setting::Cords => format!("{value:.decimals$} {unit} meet"),
                Setting::Draw | Setting::PayloadMass => format!("{word} {value:.decimals$} {unit} meets"),
            };
            let sentence = format!("{what} the window under the limits, {surely}");
            screen.line(screen.toned(&sentence, if *fit == Fit::Surely { Tone::Good } else { Tone::Caution }));
            if let Some((low, high)) = solution.range {
                screen.line(format!("as good: {word} from {low:.decimals$} to {high:.decimals$} {unit}, as tried"));
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
    let header = [setting.word(), "launch speed, m/s", "peak g, CFC 60", "release line, N"].map(str::to_owned);
    screen.line(across(&header, &WIDTHS));
    let shown = |interval: &Interval, decimals: usize| {
        format!("{:.decimals$} ({:.decimals$} to {:.decimals$})", interval.value, interval.low, interval.high)
    };
    let decimals = decimals(setting);
    for candidate in candidates {
        let value = format!("{:.decimals$} {}", candidate.value, setting.unit());
        match &candidate.expected {
            Ok(expected) => screen.line(across(
                &[
                    value,
                    shown(&expected.launch_speed_mps, 2),
                    shown(&expected.peak_g, 2),
                    shown(&expected.line_tension_n, 0),
                ],
                &WIDTHS,
            )),
            Err(error) => screen.line(format!("{value:<13}{error}")),
        }
    }
}

fn print_cautions(rig: &Rig, screen: &Screen) {
    if let Some(card) = &rig.details.losses.card {
        screen.line(screen.toned(&card.spans(), Tone::Caution));
    }
    screen.line("intervals: 95 %, first order; peak g: specific force along the rail at the payload");
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
        "why": solution.why, "not_fitted_yet": model::unfitted(rig), "loss_card": rig.details.losses.card.as_ref().map(LossCard::spans), "cautions": cautions(rig),
    })
}
