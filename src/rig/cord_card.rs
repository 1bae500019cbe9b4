//! Cord cards: dated TOML texts that say what a lot's cords do, how well it is known, and to which elongation.
//!
//! Only what is needed to use a card is read; its `[evidence]` is for people and stays as it is. Refused: a card without
//! date, free length, tested elongation or uncertainty.

use jiff::civil::Date;

use super::document::{Findings, Section};
use super::finding::Finding;
use super::text_read::read_text;
use super::{CordDetails, CordPoint, Cords, RelaxationTerm, detail_sections, sections};

/// A card, as far as it is used.
#[derive(Debug, Clone, PartialEq)]
pub struct CordCard {
    /// Where the rig file found it.
    pub name: String,
    pub lot: String,
    pub person: String,
    pub date: Date,
    pub invented: bool,
    /// Of the cords that were tested.
    pub serials: Vec<String>,
    pub free_length_m: f64,
    /// Of one cord.
    pub mass_kg: f64,
    pub tested_to: f64,
    /// Coming in, and going out, as read.
    pub curve: Vec<CordPoint>,
    pub loading_curve: Vec<CordPoint>,
    /// Part of the tension that relaxation had left while they were read: (curve, loading curve).
    pub relaxed_to: (f64, f64),
    pub gap_width: f64,
    pub relaxation: Vec<RelaxationTerm>,
    pub tension_per_kelvin: f64,
    /// Standard uncertainty.
    pub tension_per_kelvin_uncertainty: f64,
    pub temperature_c: Option<f64>,
    pub loss_per_tenfold_cycles: f64,
    /// Standard uncertainty.
    pub loss_per_tenfold_cycles_uncertainty: f64,
    /// Cycle number at which the curves were read.
    pub cycle: f64,
    /// Relative standard uncertainties: of the lot's mean, between its cords, of the turning-point rule.
    pub mean_uncertainty: f64,
    pub between_cords: f64,
    pub turning_uncertainty: f64,
}

impl CordCard {
    /// A card's text with every finding. `name` is where it was found.
    pub fn read(name: &str, text: &str) -> (Option<Self>, Vec<Finding>) {
        read_text(text, |root, findings| whole(name, root, findings))
    }

    /// Relative standard uncertainty of the pull of `count` cords of the lot.
    pub fn force_uncertainty(&self, count: u32) -> f64 {
        let scatter = self.between_cords / f64::from(count.max(1)).sqrt();
        self.mean_uncertainty.hypot(scatter).hypot(self.turning_uncertainty)
    }

    /// Puts what the card says into a cord set that has its own count, ratio, temperature and cycles.
    ///
    /// The model counts tenfolds of cycles from the first; the curves are of [`Self::cycle`], so the cycles are taken from there.
    pub(super) fn put_into(&self, cords: &mut Cords, details: &mut CordDetails) {
        let fresh = |points: &[CordPoint], left: f64| {
            points.iter().map(|point| CordPoint { tension_n: point.tension_n / left, ..*point }).collect()
        };
        cords.free_length_m = self.free_length_m;
        cords.mass_kg = self.mass_kg;
        cords.curve = fresh(&self.curve, self.relaxed_to.0);
        cords.force_relative_uncertainty = self.force_uncertainty(cords.count);
        details.loading_curve = fresh(&self.loading_curve, self.relaxed_to.1);
        details.gap_width = Some(self.gap_width);
        details.relaxation.clone_from(&self.relaxation);
        details.tension_per_kelvin = self.tension_per_kelvin;
        details.card_temperature_c = self.temperature_c;
        details.loss_per_tenfold_cycles = self.loss_per_tenfold_cycles;
        details.cycles /= self.cycle;
    }
}

fn whole(name: &str, mut root: Section<'_, '_>, findings: &mut Findings<'_>) -> Option<CordCard> {
    let kind = root.text(findings, "kind");
    if !kind.is_empty() && kind != "cord card" {
        findings.error("kind", format!("{kind:?} is no cord card"));
    }
    let [lot, person] = ["lot", "person"].map(|key| root.text(findings, key));
    let date = root.date(findings, "date");
    let mut part = |key| root.optional_quantity(findings, key, "%", 1.0..=100.0).unwrap_or(1.0);
    let relaxed_to = (part("curve_relaxed_to"), part("loading_curve_relaxed_to"));
    let mut card = CordCard {
        name: name.to_owned(),
        lot,
        person,
        date: date.unwrap_or_default(),
        invented: root.optional_flag(findings, "invented"),
        serials: root.texts(findings, "serials"),
        free_length_m: root.quantity(findings, "free_length", "m", 0.05..=100.0),
        mass_kg: root.quantity(findings, "mass", "kg", 0.001..=50.0),
        tested_to: root.quantity(findings, "tested_to", "%", 0.1..=1500.0),
        curve: sections::curve(&mut root, findings, "curve"),
        loading_curve: sections::curve(&mut root, findings, "loading_curve"),
        relaxed_to,
        gap_width: root.quantity(findings, "branch_gap_width", "%", 0.1..=100.0),
        relaxation: detail_sections::relaxation(&mut root, findings),
        tension_per_kelvin: root.optional_quantity(findings, "tension_per_kelvin", "%", -5.0..=5.0).unwrap_or(0.0),
        tension_per_kelvin_uncertainty: root
            .optional_quantity(findings, "tension_per_kelvin_uncertainty", "%", 0.0..=100.0)
            .unwrap_or(0.0),
        temperature_c: root.optional_quantity(findings, "curve_temperature", "degC", -40.0..=80.0),
        loss_per_tenfold_cycles: root
            .optional_quantity(findings, "tension_loss_per_tenfold_cycles", "%", 0.0..=30.0)
            .unwrap_or(0.0),
        loss_per_tenfold_cycles_uncertainty: root
            .optional_quantity(findings, "tension_loss_per_tenfold_cycles_uncertainty", "%", 0.0..=100.0)
            .unwrap_or(0.0),
        cycle: root.optional_number(findings, "curve_cycle", 1.0..=1e6).unwrap_or(1.0),
        mean_uncertainty: f64::NAN,
        between_cords: f64::NAN,
        turning_uncertainty: f64::NAN,
    };
    let mut uncertainty = root.section(findings, "uncertainty");
    let mut share = |key| uncertainty.quantity(findings, key, "%", 0.0..=100.0);
    (card.mean_uncertainty, card.between_cords, card.turning_uncertainty) =
        (share("mean"), share("between_cords"), share("turning_point"));
    uncertainty.finish(findings);
    // For people: what it was found from.
    for key in FOR_PEOPLE {
        root.optional(findings, key);
    }
    root.finish(findings);
    date.map(|_| card)
}

const FOR_PEOPLE: [&str; 6] = ["evidence", "marks", "law", "loading_law", "turned_at", "branch_gap_width_uncertainty"];
