//! `tautrail compare TRIAL TRIAL…`: several trials side by side.

use std::path::PathBuf;

use serde_json::{Value, json};
use tautrail::reading::{ComparedRow, Reading, SIGNIFICANT, compare};
use tautrail::rig::Rig;
use tautrail::units::{rounded, shown_unit};

use super::measured::{BesideArgs, Measured, open};
use super::results_text::shown_time;
use super::screen::{Screen, Tone};
use super::{CAUTION, Failure, Verdict};

/// Compare trials: rig, cords, conditions and results, and which differences are more than chance
///
/// The first trial is what the others are held against. Everything is derived again from each file.
#[derive(Debug, clap::Args)]
#[command(after_help = COMPARE_HELP)]
pub struct Args {
    /// The trial files, the one to hold against first
    #[arg(required = true, num_args = 2..)]
    trials: Vec<PathBuf>,
    /// Show only what differs by more than chance
    #[arg(long)]
    differences: bool,
}

const COMPARE_HELP: &str = "\
Examples:
  tautrail compare trials/trial-000011-0c41aa.h5 trials/trial-000012-7f3a9c.h5
  tautrail compare --differences trials/*.h5

A difference is marked with * where the chance of one as large between equal trials is under 5 %. With many results one in
twenty is marked by chance alone. Exit code: 0 compared, 2 a trial can't be read.

Tautrail is no safety device: it advises and records; interlocks, exclusion zones, local codes and licensed practice
decide.";

pub fn run(args: &Args, screen: &Screen) -> Result<Verdict, Failure> {
    let mut trials = Vec::new();
    for path in &args.trials {
        let measured = open(path, None)?;
        let beside = BesideArgs::default().beside(measured.edges.clone())?;
        let reading = measured.reading(&beside);
        // Samples of many trials at once would fill the memory; the reading is what is compared.
        trials.push((Measured { signals: Vec::new(), ..measured }, Reading { motion: None, ..reading }));
    }
    let readings: Vec<Reading> = trials.iter().map(|(_, reading)| reading.clone()).collect();
    let rows = compare(&readings);
    let settings = settings(&trials);
    if screen.json {
        screen.value(&as_json(&trials, &settings, &rows));
    } else {
        print(args, &trials, &settings, &rows, screen);
    }
    Ok(Verdict::Done)
}

/// A line of the rig file over all trials.
struct Setting {
    name: &'static str,
    values: Vec<String>,
}

impl Setting {
    fn differs(&self) -> bool {
        self.values.iter().any(|value| *value != self.values[0])
    }
}

fn settings(trials: &[(Measured, Reading)]) -> Vec<Setting> {
    let of = |name: &'static str, value: &dyn Fn(&Rig) -> String| Setting {
        name,
        values: trials.iter().map(|(measured, _)| value(&measured.rig)).collect(),
    };
    let mut settings = vec![
        of("rig", &|rig| rig.name.clone()),
        of("incline", &|rig| format!("{:.2} deg", rig.incline_deg())),
        of("planned draw", &|rig| format!("{:.3} m", rig.plan.draw_m)),
        of("shuttle mass", &|rig| format!("{:.3} kg", rig.shuttle.mass_kg.value)),
        of("payload", &|rig| format!("{}, {:.3} kg", rig.payload.name, rig.payload.mass_kg.value)),
        of("cords", &|rig| format!("{} of {:.3} m", rig.cords.count, rig.cords.free_length_m)),
        of("cord curve", &|rig| curve_words(rig)),
        of("cord cycles", &|rig| format!("{:.0}", rig.details.cords.cycles)),
        of("cord temperature", &|rig| {
            rig.details.cords.temperature_c.map_or_else(|| "not stated".to_owned(), |t| format!("{t:.1} degC"))
        }),
        of("friction", &|rig| format!("{:.1} N", rig.losses.friction_n.value)),
        of("air density", &|rig| format!("{:.4} kg/m³", rig.site.air_density_kg_per_m3)),
        of("head wind", &|rig| format!("{:.1} m/s", rig.site.head_wind_mps)),
    ];
    settings.push(Setting {
        name: "calibrations",
        values: trials.iter().map(|(measured, _)| calibration_words(&measured.rig)).collect(),
    });
    settings
}

/// The card's points, short enough to tell two cards apart.
fn curve_words(rig: &Rig) -> String {
    let points = rig.cords.curve.len();
    let area: f64 = rig
        .cords
        .curve
        .windows(2)
        .map(|pair| 0.5 * (pair[0].tension_n + pair[1].tension_n) * (pair[1].elongation - pair[0].elongation))
        .sum();
    format!("{points} points, {:.2} J a cord", area * rig.cords.free_length_m)
}

fn calibration_words(rig: &Rig) -> String {
    let channel = |channel: &tautrail::rig::Channel| {
        let slope = channel.calibration.coefficients.get(1).copied().unwrap_or(0.0);
        format!("{} {slope:.5e} zero {:.0}", channel.name, channel.calibration.zero_counts)
    };
    rig.channels.iter().map(channel).collect::<Vec<_>>().join("; ")
}

fn print(args: &Args, trials: &[(Measured, Reading)], settings: &[Setting], rows: &[ComparedRow], screen: &Screen) {
    screen.line(screen.toned("trials", Tone::Heading));
    for (idx, (measured, reading)) in trials.iter().enumerate() {
        let started = shown_time(&measured.header.started);
        screen.line(format!(
            "  {}: trial {}, {started}, {}",
            idx + 1,
            measured.header.trial_id,
            reading.outcome.word()
        ));
    }
    screen.line(screen.toned("rig, cards and conditions", Tone::Heading));
    let (differing, same): (Vec<&Setting>, Vec<&Setting>) = settings.iter().partition(|setting| setting.differs());
    for setting in &differing {
        screen.line(format!("  {}", setting.name));
        for (idx, value) in setting.values.iter().enumerate() {
            screen.line(format!("      {}: {value}", idx + 1));
        }
    }
    if !same.is_empty() {
        let names: Vec<&str> = same.iter().map(|setting| setting.name).collect();
        screen.line(format!("  the same in all: {}", names.join(", ")));
    }
    screen.line(
        screen.toned("results (u standard uncertainty, * differs from trial 1 by more than chance)", Tone::Heading),
    );
    for row in rows {
        print_row(args, row, screen);
    }
    screen.line(CAUTION);
}

fn print_row(args: &Args, row: &ComparedRow, screen: &Screen) {
    let differs = |p: f64| p < SIGNIFICANT;
    let any = row.trials.iter().flatten().filter_map(|compared| compared.difference).any(|d| differs(d.p));
    if args.differences && !any {
        return;
    }
    screen.line(format!("  {}", row.name));
    for (idx, compared) in row.trials.iter().enumerate() {
        let Some(compared) = compared else {
            screen.line(format!("      {}: absent", idx + 1));
            continue;
        };
        let (value, u) = rounded(compared.value, compared.standard_uncertainty);
        let against = compared.difference.map_or_else(String::new, |d| {
            let (difference, u) = rounded(d.difference, d.standard_uncertainty);
            let sign = if d.difference >= 0.0 { "+" } else { "" };
            let mark = if differs(d.p) { " *" } else { "" };
            format!("   {sign}{difference} (u {u}), chance {}{mark}", percent(d.p))
        });
        screen.line(format!("      {}: {value} (u {u}) {}{against}", idx + 1, shown_unit(&row.unit)));
    }
}

fn percent(p: f64) -> String {
    if p < 1e-3 { "under 0.1 %".to_owned() } else { format!("{:.1} %", 100.0 * p) }
}

fn as_json(trials: &[(Measured, Reading)], settings: &[Setting], rows: &[ComparedRow]) -> Value {
    let trial = |(measured, reading): &(Measured, Reading)| json!({ "trial_id": measured.header.trial_id, "started": measured.header.started, "outcome": reading.outcome.word() });
    let setting =
        |setting: &Setting| json!({ "name": setting.name, "values": setting.values, "differs": setting.differs() });
    let row = |row: &ComparedRow| {
        let compared = |compared: &Option<tautrail::reading::Compared>| {
            compared.as_ref().map(|c| {
                let difference = c.difference.map(|d| json!({ "difference": d.difference, "standard_uncertainty": d.standard_uncertainty, "p": d.p, "significant": d.p < SIGNIFICANT }));
                json!({ "value": c.value, "standard_uncertainty": c.standard_uncertainty, "against_first": difference })
            })
        };
        json!({ "name": row.name, "unit": row.unit, "trials": row.trials.iter().map(compared).collect::<Vec<_>>() })
    };
    json!({
        "trials": trials.iter().map(trial).collect::<Vec<_>>(),
        "settings": settings.iter().map(setting).collect::<Vec<_>>(),
        "results": rows.iter().map(row).collect::<Vec<_>>(),
        "caution": CAUTION,
    })
}
