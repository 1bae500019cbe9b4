//! `tautrail amend TRIAL`: says something of a sealed trial, beside it.

use std::fs;
use std::path::PathBuf;

use jiff::Timestamp;
use serde_json::json;
use tautrail::archive::{Answer, ConditionSaid, Draft, NoteSaid, amend};
use tautrail::units::Unit;

use super::screen::Screen;
use super::{Failure, Verdict};

/// Add a note, an inspection answer, a condition or a corrected record to a sealed trial
///
/// The trial file is never written: the amendment is a numbered TOML file beside it, with the trial's raw digest and its
/// predecessor's. `show`, `read`, `report` and `trials` see the trial with its amendments; what was sealed stays visible.
#[derive(Debug, clap::Args)]
#[command(after_help = AMEND_HELP)]
pub struct Args {
    /// The trial file
    trial: PathBuf,
    /// Who amends
    #[arg(long, value_name = "NAME")]
    person: String,
    /// Why
    #[arg(long, value_name = "TEXT")]
    reason: String,
    /// A note (repeat for several)
    #[arg(long = "note", value_name = "TEXT")]
    notes: Vec<String>,
    /// An answer to an inspection item of the rig file's stages: "brake pads=worn, changed"
    #[arg(long = "answer", value_name = "ITEM=ANSWER")]
    answers: Vec<String>,
    /// A condition with its unit: "head_wind=2.5 m/s", "air_density=1.21 kg/m^3", "cord_temperature=12 degC"
    #[arg(long = "condition", value_name = "NAME=VALUE UNIT", allow_hyphen_values = true)]
    conditions: Vec<String>,
    /// A corrected text in place of one that the trial carries: rig.toml=corrected.toml, records/line.toml=line.toml
    #[arg(long = "record", value_name = "NAME=FILE")]
    records: Vec<String>,
}

const AMEND_HELP: &str = "\
Examples:
  tautrail amend trials/trial-000012-7f3a9c.h5 --person \"A. Recorder\" --reason \"seen after the trial\" --note \"left cord chafed\"
  tautrail amend TRIAL --person … --reason \"anemometer log\" --condition \"head_wind=2.5 m/s\"
  tautrail amend TRIAL --person … --reason \"asked later\" --answer \"brake pads=worn, changed\"
  tautrail amend TRIAL --person … --reason \"gauge factor misread\" --record records/line.toml=line-corrected.toml
  tautrail show --texts TRIAL                       which texts it carries

air_density and head_wind enter the results that are derived again; other conditions are kept and shown. A corrected record
has every signal derived again from the counts. An amendment can't be taken back; a later one holds against it.

Exit code: 0 written, 2 nothing was written.";

/// A record larger than this was not written by a person.
const RECORD_BYTES_MAX: u64 = 4 << 20;

pub fn run(args: &Args, screen: &Screen) -> Result<Verdict, Failure> {
    let path = amend(&args.trial, &draft(args)?, Timestamp::now())?;
    if screen.json {
        screen.value(&json!({ "trial": args.trial, "amendment": path }));
    } else {
        screen.line(format!("amended: {}", path.display()));
    }
    Ok(Verdict::Done)
}

fn draft(args: &Args) -> Result<Draft, Failure> {
    let mut draft = Draft { person: args.person.clone(), reason: args.reason.clone(), ..Draft::default() };
    draft.notes = args.notes.iter().map(|text| NoteSaid { text: text.clone() }).collect();
    for text in &args.answers {
        let (item, answer) = parted(text, "--answer", "ITEM=ANSWER")?;
        draft.answers.push(Answer { item, answer });
    }
    for text in &args.conditions {
        let (name, said) = parted(text, "--condition", "NAME=VALUE UNIT")?;
        draft.conditions.push(condition(name, &said)?);
    }
    for text in &args.records {
        let (name, file) = parted(text, "--record", "NAME=FILE")?;
        let about = fs::metadata(&file).map_err(|error| format!("{file} can't be read: {error}"))?;
        if about.len() > RECORD_BYTES_MAX {
            return Err(format!("{file} is larger than any record ({RECORD_BYTES_MAX} bytes)").into());
        }
        let text = fs::read_to_string(&file).map_err(|error| format!("{file} can't be read: {error}"))?;
        draft.records.push((name, text));
    }
    Ok(draft)
}

fn parted(text: &str, option: &str, form: &str) -> Result<(String, String), Failure> {
    match text.split_once('=').map(|(name, said)| (name.trim(), said.trim())) {
        Some((name, said)) if !name.is_empty() && !said.is_empty() => Ok((name.to_owned(), said.to_owned())),
        _ => Err(format!("{option} {text:?} is not of the form {form}").into()),
    }
}

/// The value in the SI unit (or °C) that conditions are stored in.
fn condition(name: String, said: &str) -> Result<ConditionSaid, Failure> {
    let (number, symbol) = said.split_once(char::is_whitespace).unwrap_or((said, "1"));
    let value: f64 =
        number.parse().map_err(|_| format!("condition {name}: {number:?} is no number; write \"2.5 m/s\""))?;
    let symbol = symbol.trim();
    if symbol == "1" {
        return Ok(ConditionSaid { name, value, unit: symbol.to_owned() });
    }
    let unit =
        Unit::named(symbol).ok_or_else(|| format!("condition {name}: {symbol:?} is no unit that is known here"))?;
    // Trial files write m/s^2, not m/s2 or m/s².
    let si = || unit.dimension.units().filter(|stored| stored.si_from(1.0) == 1.0).map(|stored| stored.symbol);
    let stored = si().find(|symbol| symbol.contains('^')).or_else(|| si().next()).unwrap_or("1");
    Ok(ConditionSaid { name, value: unit.si_from(value), unit: stored.to_owned() })
}
