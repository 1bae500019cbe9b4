//! Loss cards: dated TOML texts that say what a fit over trials found of a rig's losses, how well, from which trials, and for
//! which launches that holds.
//!
//! Only what a forecast needs is read; the `[[trial]]` tables and `[evidence]` are for people and stay as they are. What
//! [`LossCard::put_into`] puts into a rig is values, standard uncertainties and correlations like any that a rig file states.

use jiff::civil::Date;
use serde::Serialize;
use toml::de::DeTable;

use super::document::{Findings, Section, start_of};
use super::finding::{Finding, Severity};
use super::{Correlation, Given, Rig};

/// A card, as far as it is used.
#[derive(Debug, Clone, PartialEq)]
pub struct LossCard {
    /// Where the rig file found it, or the name of its file.
    pub name: String,
    /// The rig whose trials it is of.
    pub rig: String,
    pub date: Date,
    /// The program that wrote it, with its version.
    pub program: String,
    pub invented: bool,
    pub terms: Vec<FittedLoss>,
    /// Between terms, by their names.
    pub correlations: Vec<Correlation>,
    /// Relative standard deviation of the launch speed from trial to trial that no term explains.
    pub unexplained: f64,
    pub valid: ValidRange,
}

/// One loss that was fitted.
#[derive(Debug, Clone, PartialEq)]
pub struct FittedLoss {
    /// As in `losses.fit`.
    pub name: String,
    pub fitted: Given,
}

/// What the trials of a fit spanned, each from least to greatest.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct ValidRange {
    pub cord_count: (f64, f64),
    pub moving_mass_kg: (f64, f64),
    pub draw_m: (f64, f64),
    /// Of the whole launcher's cords at the hold.
    pub pull_n: (f64, f64),
    pub launch_speed_mps: (f64, f64),
}

/// Every loss that a fit can find: name, unit, and the name under which a forecast lists it as an input.
const FITTED: [(&str, &str, &str); 8] = [
    ("friction", "N", "losses.friction"),
    ("load_friction", "", "losses.load_friction"),
    ("pull_friction", "", "losses.pull_friction"),
    ("viscous", "N s/m", "losses.viscous"),
    ("shuttle_drag_area", "m2", "losses.shuttle_drag_area"),
    ("payload_drag_area", "m2", "payload.drag_area"),
    ("cord_lag", "%", "losses.cord_lag"),
    ("cord_viscous", "N s/m", "losses.cord_viscous"),
];

impl LossCard {
    /// A card's text with every finding. `name` is where it was found.
    pub fn read(name: &str, text: &str) -> (Option<Self>, Vec<Finding>) {
        let mut findings = Findings::of(text);
        let (document, syntax_errors) = DeTable::parse_recoverable(text);
        for error in &syntax_errors {
            findings.at(start_of(error.span()), Severity::Error, "", error.message().replace('\n', ", "));
        }
        if !syntax_errors.is_empty() {
            return (None, findings.in_order());
        }
        let card = whole(name, Section::root(&document), &mut findings);
        let findings = findings.in_order();
        let usable = findings.iter().all(|finding| finding.severity != Severity::Error);
        (card.filter(|_| usable), findings)
    }

    /// Puts what the card found in the place of what the rig file says; losses that it has not keep their values.
    pub fn put_into(&self, rig: &mut Rig) {
        let more = &mut rig.details.losses;
        for FittedLoss { name, fitted } in &self.terms {
            match name.as_str() {
                "friction" => rig.losses.friction_n = *fitted,
                "load_friction" => more.load_coefficient = Some(*fitted),
                "pull_friction" => more.pull_coefficient = Some(*fitted),
                "viscous" => more.viscous_n_per_mps = Some(*fitted),
                "shuttle_drag_area" => rig.losses.shuttle_drag_area_m2 = *fitted,
                "payload_drag_area" => rig.payload.drag_area_m2 = *fitted,
                "cord_lag" => more.cord_lag = Some(*fitted),
                "cord_viscous" => more.cord_viscous_n_per_mps = Some(*fitted),
                _ => {}
            }
        }
        more.fit.retain(|name| self.terms.iter().all(|term| term.name != *name));
        let ours: Vec<&str> = self.terms.iter().filter_map(|term| input_name(&term.name)).collect();
        let stands = |correlation: &Correlation| !correlation.between.iter().any(|name| ours.contains(&name.as_str()));
        rig.details.correlations.retain(stands);
        for Correlation { between: [a, b], coefficient } in &self.correlations {
            if let (Some(a), Some(b)) = (input_name(a), input_name(b)) {
                let between = [a.to_owned(), b.to_owned()];
                rig.details.correlations.push(Correlation { between, coefficient: *coefficient });
            }
        }
        more.card = Some(self.clone());
    }

    /// Whether it has the loss that bends the cords' curve.
    pub fn has_cord_lag(&self) -> bool {
        self.terms.iter().any(|term| term.name == "cord_lag")
    }

    /// What its trials spanned, for tables over settings that may lie beyond.
    pub fn spans(&self) -> String {
        let valid = &self.valid;
        format!(
            "losses from {}: its trials had {:.0} to {:.0} cords, {:.2} to {:.2} kg, draws of {:.2} to {:.2} m, {:.0} to {:.0} N; \
             settings beyond are EXTRAPOLATED",
            self.name,
            valid.cord_count.0,
            valid.cord_count.1,
            valid.moving_mass_kg.0,
            valid.moving_mass_kg.1,
            valid.draw_m.0,
            valid.draw_m.1,
            valid.pull_n.0,
            valid.pull_n.1
        )
    }

    /// Sentences on where a launch lies outside what the card's trials spanned. Not told: a hundredth of mass, three of
    /// draw, pull or speed, as much as trials of one configuration differ.
    pub fn outside(&self, asked: &Asked) -> Vec<String> {
        let valid = &self.valid;
        let rows = [
            ("cords", asked.cord_count, valid.cord_count, "", 0, 0.0),
            ("moving mass", Some(asked.moving_mass_kg), valid.moving_mass_kg, " kg", 2, 0.01),
            ("draw", Some(asked.draw_m), valid.draw_m, " m", 2, 0.03),
            ("cord pull", asked.pull_n, valid.pull_n, " N", 0, 0.03),
            ("launch speed", asked.launch_speed_mps, valid.launch_speed_mps, " m/s", 1, 0.03),
        ];
        let beyond = rows.into_iter().filter_map(|(what, asked, (low, high), unit, decimals, slack)| {
            let asked = asked.filter(|asked| *asked < (1.0 - slack) * low || *asked > (1.0 + slack) * high)?;
            Some(format!("{what} {asked:.decimals$}{unit}, the trials had {low:.decimals$} to {high:.decimals$}{unit}"))
        });
        let beyond: Vec<String> = beyond.collect();
        if beyond.is_empty() {
            return Vec::new();
        }
        vec![format!("OUTSIDE THE LOSS CARD'S RANGE ({}): {}", self.name, beyond.join("; "))]
    }
}

/// A launch, as far as a card's range looks at it.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub struct Asked {
    /// None where it is not cords alone that pull.
    pub cord_count: Option<f64>,
    pub moving_mass_kg: f64,
    pub draw_m: f64,
    pub pull_n: Option<f64>,
    pub launch_speed_mps: Option<f64>,
}

fn input_name(term: &str) -> Option<&'static str> {
    FITTED.iter().find(|(name, ..)| *name == term).map(|(_, _, input)| *input)
}

fn whole(name: &str, mut root: Section<'_, '_>, findings: &mut Findings<'_>) -> Option<LossCard> {
    let kind = root.text(findings, "kind");
    if !kind.is_empty() && kind != "loss card" {
        findings.error("kind", format!("{kind:?} is no loss card"));
    }
    let [rig, program] = ["rig", "program"].map(|key| root.text(findings, key));
    let date = root.date(findings, "date");
    let invented = root.optional_flag(findings, "invented");
    let unexplained = root.quantity(findings, "unexplained", "%", 0.0..=100.0);
    let terms = terms(&mut root, findings);
    let correlations = super::detail_sections::correlations(&mut root, findings);
    let known = |name: &String| terms.iter().any(|term| term.name == *name);
    for correlation in correlations.iter().filter(|correlation| !correlation.between.iter().all(known)) {
        findings.error("correlation", format!("{:?} names no term of this card", correlation.between));
    }
    let valid = valid(&mut root, findings);
    for key in ["trial", "evidence"] {
        root.optional(findings, key);
    }
    root.finish(findings);
    let name = name.to_owned();
    date.map(|date| LossCard { name, rig, date, program, invented, terms, correlations, unexplained, valid })
}

fn terms(root: &mut Section<'_, '_>, findings: &mut Findings<'_>) -> Vec<FittedLoss> {
    let mut terms: Vec<FittedLoss> = Vec::new();
    for mut entry in root.sections(findings, "term") {
        let name = entry.text(findings, "name");
        let Some((_, unit, _)) = FITTED.iter().find(|(known, ..)| *known == name) else {
            let known: Vec<&str> = FITTED.iter().map(|(known, ..)| *known).collect();
            findings.error(&entry.key("name"), format!("{name:?} is no loss, there are: {}", known.join(", ")));
            continue;
        };
        let fitted = if unit.is_empty() {
            let value = entry.number(findings, "value", 0.0..=5.0);
            Given { value, standard_uncertainty: entry.number(findings, "uncertainty", 0.0..=5.0) }
        } else {
            let value = entry.quantity(findings, "value", unit, 0.0..=200_000.0);
            Given { value, standard_uncertainty: entry.quantity(findings, "uncertainty", unit, 0.0..=200_000.0) }
        };
        if terms.iter().any(|term| term.name == name) {
            findings.error(&entry.key("name"), format!("{name:?} stands here twice"));
        }
        entry.finish(findings);
        terms.push(FittedLoss { name, fitted });
    }
    terms
}

fn valid(root: &mut Section<'_, '_>, findings: &mut Findings<'_>) -> ValidRange {
    let mut table = root.section(findings, "valid");
    let cord_count = (table.number(findings, "cords_from", 0.0..=1e4), table.number(findings, "cords_to", 0.0..=1e4));
    let mut range = |keys: [&'static str; 2], unit: &str, most: f64| {
        let [low, high] = keys.map(|key| table.quantity(findings, key, unit, 0.0..=most));
        (low, high)
    };
    let valid = ValidRange {
        cord_count,
        moving_mass_kg: range(["moving_mass_from", "moving_mass_to"], "kg", 1e4),
        draw_m: range(["draw_from", "draw_to"], "m", 1e3),
        pull_n: range(["cord_pull_from", "cord_pull_to"], "N", 1e6),
        launch_speed_mps: range(["launch_speed_from", "launch_speed_to"], "m/s", 1e3),
    };
    table.finish(findings);
    valid
}
