//! `tautrail fit TRIAL…`: the losses that a rig's trials show, as a loss card.

mod words;

use std::collections::BTreeMap;
use std::path::{Path, PathBuf};
use std::str::FromStr;

use serde_json::{Value, json};
use tautrail::reading::read;
use tautrail::replay::fit::{CardHeading, FitOptions, FitTrial, LossFit, Refused, Term, card_text, fit, propose};
use thiserror::Error;

use super::measured::open;
use super::new_file::{refuse_existing, write_new};
use super::screen::{Screen, Tone, with_causes};
use super::{CAUTION, Failure, Verdict};

/// Find the losses that trials show, and write a loss card that forecasts use
///
/// All trials are fitted at once, each from its own measured hold; free pulls and coast-downs count as trials.
#[derive(Debug, clap::Args)]
#[command(after_help = FIT_HELP)]
pub struct Args {
    /// The trial files
    #[arg(required = true)]
    trials: Vec<PathBuf>,
    /// Losses to find, with commas between them, or auto: the smallest set that is adequate [default: what `losses.fit` of the
    /// rig file names, else auto]
    #[arg(long, value_name = "LOSS,…|auto")]
    terms: Option<Asked>,
    /// Where to write the loss card; without it the losses are only shown
    #[arg(long, value_name = "FILE")]
    out: Option<PathBuf>,
    /// Where to write everything that was found, as JSON
    #[arg(long, value_name = "FILE")]
    results: Option<PathBuf>,
    /// Replace a card or results that are already there
    #[arg(long)]
    replace: bool,
    /// Let residuals beyond this many standard uncertainties count less
    #[arg(long, value_name = "TIMES")]
    robust: Option<f64>,
    /// Use this rig file in place of the one each trial carries (calibrations stay as sealed)
    #[arg(long)]
    rig: Option<PathBuf>,
}

const FIT_HELP: &str = "\
Examples:
  tautrail fit trials/*.h5                                            what losses do these trials show
  tautrail fit --terms friction,cord_lag --out losses.toml trials/*.h5
  then, in the rig file under [losses]:  card = \"losses.toml\"
  tautrail fit --json trials/*.h5 | jq '.fit.terms'

Losses: friction, load_friction, pull_friction, viscous, shuttle_drag_area, payload_drag_area of rail and payload;
pull_friction, cord_lag, cord_viscous of each cord. What the rig file knows of a loss with its uncertainty counts as a
measurement of it. A misfit that the losses leave widens every uncertainty and is told.

Exit code: 0 losses found, 1 found but a trial was left aside or does not belong to the others, 2 no fit.

A loss card is for advice and record only. Tautrail is no safety device: interlocks, exclusion zones, local codes and
licensed practice decide.";

/// What `--terms` says.
#[derive(Debug, Clone, PartialEq)]
enum Asked {
    Auto,
    Terms(Vec<Term>),
}

#[derive(Debug, Clone, PartialEq, Eq, Error)]
#[error("{name:?} is no loss, there are: auto, or {}", Term::ALL.map(Term::name).join(", "))]
struct NoLoss {
    name: String,
}

impl FromStr for Asked {
    type Err = NoLoss;

    fn from_str(text: &str) -> Result<Self, NoLoss> {
        if text.trim() == "auto" {
            return Ok(Self::Auto);
        }
        let mut terms = Vec::new();
        for name in text.split(',').map(str::trim) {
            let term = Term::named(name).ok_or_else(|| NoLoss { name: name.to_owned() })?;
            if !terms.contains(&term) {
                terms.push(term);
            }
        }
        Ok(Self::Terms(terms))
    }
}

/// A trial that is not in the fit, and why.
#[derive(Debug)]
struct Aside {
    path: PathBuf,
    why: String,
}

pub fn run(args: &Args, screen: &Screen) -> Result<Verdict, Failure> {
    if let Some(times) = args.robust.filter(|times| !(0.5..=100.0).contains(times)) {
        return Err(format!("--robust {times} is outside 0.5 to 100 standard uncertainties").into());
    }
    for path in args.out.iter().chain(&args.results) {
        refuse_existing(path, args.replace)?;
    }
    let (trials, aside) = gathered(args);
    if trials.is_empty() {
        let why: Vec<String> = aside.iter().map(|one| format!("{}: {}", one.path.display(), one.why)).collect();
        return Err(format!("no trial can be fitted:\n{}", why.join("\n")).into());
    }
    let mut options = FitOptions {
        robust: args.robust,
        threads: std::thread::available_parallelism().map_or(1, usize::from),
        ..FitOptions::of(Vec::new())
    };
    let steps = choose(args, &trials, &mut options)?;
    let found = fit(&trials, &options)?;
    let value = as_json(args, &found, &aside, &steps);
    if let Some(path) = &args.out {
        write_new(path, &card_text(&found, &heading()), args.replace)?;
    }
    if let Some(path) = &args.results {
        write_new(path, &format!("{value:#}\n"), args.replace)?;
    }
    if screen.json {
        screen.value(&value);
    } else {
        print(args, &found, &aside, &steps, screen);
    }
    let whole = aside.is_empty() && found.trials.iter().all(|trial| trial.outlier.is_none());
    Ok(if whole { Verdict::Done } else { Verdict::CheckFailed })
}

/// Puts the losses to find into the options; says how they were come to.
fn choose(args: &Args, trials: &[FitTrial], options: &mut FitOptions) -> Result<Vec<String>, Failure> {
    let in_file = || -> Vec<Term> {
        let names = trials.first().map(|trial| trial.rig.details.losses.fit.clone()).unwrap_or_default();
        names.iter().filter_map(|name| Term::named(name)).collect()
    };
    match &args.terms {
        Some(Asked::Terms(terms)) => options.terms.clone_from(terms),
        None if !in_file().is_empty() => options.terms = in_file(),
        Some(Asked::Auto) | None => {
            let proposal = propose(trials, &Term::ALL, options)?;
            options.terms = proposal.terms;
            return Ok(proposal.steps);
        }
    }
    Ok(Vec::new())
}

/// The trials that can be fitted, each once, and those left aside.
fn gathered(args: &Args) -> (Vec<FitTrial>, Vec<Aside>) {
    let (mut trials, mut aside) = (Vec::new(), Vec::new());
    let mut seen: BTreeMap<String, String> = BTreeMap::new();
    for path in &args.trials {
        match of_file(path, args.rig.as_ref()) {
            Ok(trial) => match seen.insert(trial.raw_sha256.clone(), trial.id.clone()) {
                Some(first) => {
                    seen.insert(trial.raw_sha256, first.clone());
                    aside.push(Aside { path: path.clone(), why: Refused::Twice { first }.to_string() });
                }
                None => trials.push(trial),
            },
            Err(failure) => aside.push(Aside { path: path.clone(), why: with_causes(failure.as_ref()) }),
        }
    }
    (trials, aside)
}

fn of_file(path: &Path, rig: Option<&PathBuf>) -> Result<FitTrial, Failure> {
    let measured = open(path, rig)?;
    let reading = read(&measured.signals, &measured.rig);
    let id = &measured.header.trial_id;
    Ok(FitTrial::of(id, &measured.raw_sha256, &measured.signals, &reading, &measured.rig)?)
}

fn heading() -> CardHeading {
    CardHeading {
        date: jiff::tz::TimeZone::UTC.to_datetime(jiff::Timestamp::now()).date(),
        program: concat!("tautrail ", env!("CARGO_PKG_VERSION")).to_owned(),
    }
}

fn print(args: &Args, found: &LossFit, aside: &[Aside], steps: &[String], screen: &Screen) {
    screen.line(screen.toned(&words::heading(found), Tone::Heading));
    for one in aside {
        screen.line(format!("{} {}: {}", screen.toned("left aside:", Tone::Caution), one.path.display(), one.why));
    }
    words::trials(found).iter().for_each(|line| screen.line(line));
    for (id, why) in words::outliers(found) {
        screen.line(format!("{} {id}: {why}", screen.toned("does not belong:", Tone::Bad)));
    }
    screen.line("");
    steps.iter().for_each(|step| screen.line(format!("chosen: {step}")));
    words::losses(found).iter().for_each(|line| screen.line(line));
    for sentence in words::fit_sentences(found) {
        screen.line(sentence);
    }
    for (what, path) in [("card", &args.out), ("results", &args.results)] {
        if let Some(path) = path {
            screen.line(format!("{what} written to {}", path.display()));
        }
    }
    screen.line(CAUTION);
}

fn as_json(args: &Args, found: &LossFit, aside: &[Aside], steps: &[String]) -> Value {
    let aside: Vec<Value> = aside.iter().map(|one| json!({ "path": one.path, "why": one.why })).collect();
    json!({
        "fit": found, "chosen_by": steps, "left_aside": aside, "robust": args.robust,
        "sentences": words::fit_sentences(found), "card": args.out, "program": heading().program, "caution": CAUTION,
    })
}
