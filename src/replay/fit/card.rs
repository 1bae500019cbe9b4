//! A fit as a loss card: what a rig file reads (`rig::LossCard`), then the evidence for people.

use std::fmt::Write as _;

use super::outcome::{FittedTerm, LossFit, TrialMisfit};
use super::term::Term;
use crate::rig::Given;

/// What a card says of itself.
#[derive(Debug, Clone, PartialEq)]
pub struct CardHeading {
    pub date: jiff::civil::Date,
    /// With its version.
    pub program: String,
}

/// The card's text.
pub fn card_text(found: &LossFit, heading: &CardHeading) -> String {
    let mut text = String::from(
        "# Loss card, written by `tautrail fit`; the rig file points to it with card = \"…\" under [losses].\n\
         # Forecasts made from it advise only; interlocks, exclusion zones, local codes and licensed practice decide.\n\n",
    );
    let CardHeading { date, program } = heading;
    put(&mut text, format_args!("kind = \"loss card\"\nrig = {}\ndate = \"{date}\"", quoted(&found.rig)));
    put(&mut text, format_args!("program = {}", quoted(program)));
    if found.invented {
        put(&mut text, format_args!("invented = true"));
    }
    put(
        &mut text,
        format_args!("# Of the launch speed, from trial to trial, that these losses leave; one standard deviation."),
    );
    put(&mut text, format_args!("unexplained = \"{:.4} %\"", 100.0 * found.unexplained));
    found.terms.iter().for_each(|term| put_term(&mut text, term));
    put_correlations(&mut text, found);
    put_valid(&mut text, found);
    found.trials.iter().for_each(|trial| put_trial(&mut text, trial));
    put_evidence(&mut text, found);
    text
}

fn put(text: &mut String, line: std::fmt::Arguments<'_>) {
    // Writing into a String can't fail.
    let _ = text.write_fmt(line);
    text.push('\n');
}

fn quoted(text: &str) -> String {
    toml::Value::String(text.to_owned()).to_string()
}

/// With its unit, as a rig file writes it; all digits that a computer reads back.
fn quantity(term: Term, value: f64) -> String {
    match (term, term.unit()) {
        (Term::CordLag, _) => format!("\"{} %\"", 100.0 * value),
        (_, "") => format!("{value:?}"),
        (_, unit) => format!("\"{value} {unit}\""),
    }
}

fn put_term(text: &mut String, one: &FittedTerm) {
    let FittedTerm { term, fitted: Given { value, standard_uncertainty }, .. } = one;
    put(text, format_args!("\n[[term]]\n# {}\nname = \"{}\"", term.meaning(), term.name()));
    put(text, format_args!("value = {}", quantity(*term, *value)));
    put(text, format_args!("uncertainty = {}", quantity(*term, *standard_uncertainty)));
}

fn put_correlations(text: &mut String, found: &LossFit) {
    for (i, a) in found.terms.iter().enumerate() {
        for (j, b) in found.terms.iter().enumerate().take(i) {
            let between = format!("[\"{}\", \"{}\"]", b.term.name(), a.term.name());
            let coefficient = found.correlations[i][j];
            put(text, format_args!("\n[[correlation]]\nbetween = {between}\ncoefficient = {coefficient:.9}"));
        }
    }
}

fn put_valid(text: &mut String, found: &LossFit) {
    let valid = &found.valid;
    put(text, format_args!("\n# What the trials spanned; beyond it forecasts say so.\n[valid]"));
    put(text, format_args!("cords_from = {:?}\ncords_to = {:?}", valid.cord_count.0, valid.cord_count.1));
    let rows = [
        ("moving_mass", valid.moving_mass_kg, "kg"),
        ("draw", valid.draw_m, "m"),
        ("cord_pull", valid.pull_n, "N"),
        ("launch_speed", valid.launch_speed_mps, "m/s"),
    ];
    for (name, (low, high), unit) in rows {
        put(text, format_args!("{name}_from = \"{low:.4} {unit}\"\n{name}_to = \"{high:.4} {unit}\""));
    }
}

fn put_trial(text: &mut String, trial: &TrialMisfit) {
    let (TrialMisfit { id, raw_sha256, .. }, at) = (trial, &trial.configuration);
    put(text, format_args!("\n[[trial]]\nid = {}\nraw_sha256 = {}", quoted(id), quoted(raw_sha256)));
    put(text, format_args!("cords = {:?}\nmoving_mass = \"{:.4} kg\"", at.cord_count, at.moving_mass_kg));
    put(text, format_args!("draw = \"{:.4} m\"\ncord_pull = \"{:.2} N\"", at.draw_m, at.pull_n));
    put(text, format_args!("rms = \"{:.4} m/s\"", trial.rms_mps));
    if let Some(why) = &trial.outlier {
        put(text, format_args!("outlier = {}", quoted(why)));
    }
}

fn put_evidence(text: &mut String, found: &LossFit) {
    put(text, format_args!("\n[evidence]\nchi_square_per_degree = {:.3}", found.chi_square_per_degree()));
    put(text, format_args!("autocorrelation = {:.3}", found.autocorrelation));
    put(text, format_args!("# Factor by which misfit and correlation widened the variance of the speeds."));
    put(text, format_args!("widened = {:.3}\nstop = {}", found.inflation, quoted(&found.stop)));
    let shown: Vec<String> = found.combinations.iter().map(|one| quoted(&one.words())).collect();
    put(
        text,
        format_args!(
            "# Losses in widths of their priors, the best known combination first.\ncombinations = [{}]",
            shown.join(", ")
        ),
    );
}
