//! `tautrail cord card SHEET`: a lot's card and page from its readings.

use std::fs;
use std::path::{Path, PathBuf};

use serde_json::{Value, json};
use tautrail::calibration::cord::{BranchFit, Characterised, card_text, characterise};
use tautrail::report::cord_page;
use tautrail::rig::{CordSheet, Finding, Severity};
use thiserror::Error;

use crate::cli::new_file::write_new;
use crate::cli::screen::{Screen, Tone};
use crate::cli::{CAUTION, Failure, Verdict};

/// Make a cord card from load and unload readings
#[derive(Debug, clap::Args)]
#[command(after_help = CARD_HELP)]
pub struct Args {
    /// The sheet (TOML); its readings stand in it or in the CSV that it names
    sheet: PathBuf,
    /// Where to write the card; without it the card is only shown
    #[arg(long)]
    out: Option<PathBuf>,
    /// Where to write a page with the branches, their points and their band
    #[arg(long)]
    page: Option<PathBuf>,
    /// Replace a card that is already there
    #[arg(long)]
    replace: bool,
}

const CARD_HELP: &str = "\
Examples:
  tautrail cord card lot-7-sheet.toml
  tautrail cord card --out cards/lot-7.toml --page lot-7.html lot-7-sheet.toml
  then, in the rig file under [cords]:  card = \"cards/lot-7.toml\"

A sheet (TOML) says:
  kind = \"cord sheet\"        lot = \"7\"          person = \"rig engineer\"   date = \"2031-05-04\"
  free_length = \"2.70 m\"     free_length_uncertainty = \"2 mm\"           marks = \"inner edges of the whippings\"
  mass = \"0.35 kg\"           conditioning_cycles = 3                    temperature = \"20 degC\"
  force_uncertainty = \"0.2 %\"  length_uncertainty = \"1 mm\"              readings = \"lot-7.csv\"
and where weights were hung, latitude and altitude (or gravity). Its CSV:
  serial, cycle, branch, time [s], weight [kg], length [m]
  7-01, 4, load, 0, 1, 2.912
Branches are load, hold and unload; `force [N]` takes the place of weight, `extension [mm]` or `elongation [%]` that of
length. Hold at constant length with times for the relaxation; unload once from a shorter draw for the turning point.

Exit code: 0 card made, 1 made but a reading stands far off or branches cross, 2 no card.

A card is for advice and record only. Tautrail is no safety device: interlocks, exclusion zones, local codes and licensed
practice decide.";

#[derive(Debug, Error)]
enum CardError {
    #[error("{path}: cannot be read: {source}")]
    Unreadable { path: String, source: std::io::Error },
    #[error("{path} can't be used:\n{list}")]
    Sheet { path: String, list: String },
}

pub fn run(args: &Args, screen: &Screen) -> Result<Verdict, Failure> {
    let sheet = read(&args.sheet, screen)?;
    let made = characterise(&sheet)?;
    let text = card_text(&sheet, &made);
    if let Some(path) = &args.out {
        write_new(path, &text, args.replace)?;
    }
    if let Some(path) = &args.page {
        write_new(path, &cord_page(&sheet, &made)?, true)?;
    }
    if screen.json {
        screen.value(&as_json(args, &made));
    } else {
        print(args, &sheet, &made, screen);
    }
    let odd = !made.flags.is_empty() || made.branches_cross();
    Ok(if odd { Verdict::CheckFailed } else { Verdict::Done })
}

fn read(path: &Path, screen: &Screen) -> Result<CordSheet, Failure> {
    let shown = || path.display().to_string();
    let text = fs::read_to_string(path).map_err(|source| CardError::Unreadable { path: shown(), source })?;
    let csv = match CordSheet::readings_file(&text) {
        Some(name) => {
            let csv_path = path.parent().unwrap_or(Path::new("")).join(name);
            let shown = csv_path.display().to_string();
            Some(fs::read_to_string(csv_path).map_err(|source| CardError::Unreadable { path: shown, source })?)
        }
        None => None,
    };
    let (sheet, findings) = CordSheet::read(&text, csv.as_deref());
    let list = |all: &mut dyn Iterator<Item = &Finding>| {
        all.map(|finding| format!("{}:{finding}", shown())).collect::<Vec<_>>().join("\n")
    };
    let Some(sheet) = sheet else {
        return Err(CardError::Sheet { path: shown(), list: list(&mut findings.iter()) }.into());
    };
    let cautions = list(&mut findings.iter().filter(|finding| finding.severity == Severity::Caution));
    if !cautions.is_empty() && !screen.json {
        screen.line(cautions);
    }
    Ok(sheet)
}

fn print(args: &Args, sheet: &CordSheet, made: &Characterised, screen: &Screen) {
    let heading = format!("lot {}, {} cords, tested to {:.1} %", sheet.lot, made.serials.len(), 100.0 * made.tested_to);
    screen.line(screen.toned(&heading, Tone::Heading));
    for (name, branch) in [("loading", &made.loading), ("unloading", &made.unloading)] {
        print_branch(name, branch, screen);
    }
    let (lost_j, u_j) = made.hysteresis_j;
    screen.line(format!("lost in a cycle to {:.0} %: {lost_j:.2} J (u {u_j:.2} J) a cord", 100.0 * made.tested_to));
    match &made.relaxation {
        Some(found) => {
            for (term, u) in found.terms.iter().zip(&found.share_uncertainties) {
                let (share, u) = (100.0 * term.share, 100.0 * u);
                screen.line(format!("relaxation: {share:.2} % (u {u:.2} %) in {:.1} s", term.time_s));
            }
        }
        None => screen.line("relaxation: not measured"),
    }
    let [mean, between, turning] =
        [made.mean_uncertainty(), made.between_cords(), made.turning_uncertainty()].map(|share| 100.0 * share);
    let assumed = if made.relative_scatter.is_none() { " (assumed)" } else { "" };
    screen.line(format!(
        "standard uncertainty: mean {mean:.2} %, between cords {between:.2} %{assumed}, turning point {turning:.2} %"
    ));
    for caution in &made.cautions {
        screen.line(format!("{}: {caution}", screen.toned("caution", Tone::Caution)));
    }
    for (what, path) in [("card", &args.out), ("page", &args.page)] {
        if let Some(path) = path {
            screen.line(format!("{what} written to {}", path.display()));
        }
    }
    screen.line(CAUTION);
}

fn print_branch(name: &str, branch: &BranchFit, screen: &Screen) {
    screen.line(format!("{name}: {}, {:.3} N at steps left out", branch.law.kind.words(), branch.left_out_rms_n));
    for one in &branch.comparisons {
        let error = match &one.left_out_rms_n {
            Ok(rms_n) => format!("{rms_n:8.3} N left out, {:8.3} N residual{}", one.residual_rms_n, falls(one.falls)),
            Err(why) => format!("can't be fitted: {why}"),
        };
        screen.line(format!("  {:<28}{error}", one.law));
    }
}

const fn falls(falls: bool) -> &'static str {
    if falls { ", falls somewhere: not taken" } else { "" }
}

fn as_json(args: &Args, made: &Characterised) -> Value {
    let branch = |branch: &BranchFit| {
        let laws: Vec<Value> = branch
            .comparisons
            .iter()
            .map(
                |one| json!({ "law": one.law, "left_out_rms_n": one.left_out_rms_n.as_ref().ok(), "falls": one.falls }),
            )
            .collect();
        json!({ "law": branch.law.kind.words(), "left_out_rms_n": branch.left_out_rms_n, "laws": laws })
    };
    json!({
        "serials": made.serials, "tested_to": made.tested_to, "loading": branch(&made.loading),
        "unloading": branch(&made.unloading), "hysteresis_j": made.hysteresis_j.0,
        "hysteresis_uncertainty_j": made.hysteresis_j.1, "mean_relative_uncertainty": made.mean_uncertainty(),
        "between_cords_relative": made.between_cords(), "turning_relative_uncertainty": made.turning_uncertainty(),
        "flagged_lines": made.flags.iter().map(|flag| flag.line).collect::<Vec<_>>(), "cautions": made.cautions,
        "card": args.out, "page": args.page, "caution": CAUTION,
    })
}
