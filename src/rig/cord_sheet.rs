//! Cord sheets: what a person writes down while loading and unloading the cords of a lot. TOML; the readings stand in it as
//! `[[reading]]` or in a CSV beside it that `readings` names.
//!
//! Refused: a force in kg, a column without unit, a branch nobody knows, a reading without load or length.

use jiff::civil::Date;
use toml::de::DeTable;

use super::cord_table;
use super::document::{Findings, Section};
use super::finding::Finding;
use super::surroundings::local_gravity_mps2;
use super::text_read::read_text;
use super::{Given, RelaxationTerm};

/// Usual densities where the sheet gives none, kg/m³: air at 20 °C, steel masses (conventional, OIML R 111-1:2004).
const AIR_KG_PER_M3: f64 = 1.2;
const MASSES_KG_PER_M3: f64 = 8000.0;

/// A sheet, checked.
#[derive(Debug, Clone, PartialEq)]
pub struct CordSheet {
    pub lot: String,
    pub person: String,
    pub date: Date,
    pub invented: bool,
    /// Between the marks, unloaded.
    pub free_length_m: Given,
    /// Which marks.
    pub marks: String,
    /// Of one cord.
    pub mass_kg: f64,
    /// Cycles at the start that are no part of the curves.
    pub conditioning_cycles: u32,
    pub temperature_c: f64,
    /// Relative standard uncertainty of cell or weights, the same for all readings.
    pub force_relative_uncertainty: f64,
    /// Standard uncertainty of the cell's zero or of what hangs with the weights, N.
    pub force_uncertainty_n: f64,
    /// Standard uncertainty of a length reading that all readings share, m.
    pub length_uncertainty_m: f64,
    /// Relative standard deviation between cords to be taken where only one was tested.
    pub assumed_scatter: Option<f64>,
    /// The cell's own creep, from its calibration.
    pub cell_creep: Vec<RelaxationTerm>,
    pub readings: Vec<CordReading>,
}

/// Which way the cord was going.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum CordBranch {
    Load,
    Hold,
    Unload,
}

impl CordBranch {
    pub const ALL: [Self; 3] = [Self::Load, Self::Hold, Self::Unload];

    pub const fn word(self) -> &'static str {
        match self {
            Self::Load => "load",
            Self::Hold => "hold",
            Self::Unload => "unload",
        }
    }
}

/// One reading of one cord.
#[derive(Debug, Clone, PartialEq)]
pub struct CordReading {
    /// Line of the CSV, or number of the `[[reading]]`, from 1.
    pub line: usize,
    pub serial: String,
    /// From 1, conditioning included.
    pub cycle: u32,
    pub branch: CordBranch,
    pub time_s: Option<f64>,
    pub tension_n: f64,
    pub elongation: f64,
    pub temperature_c: Option<f64>,
    pub note: String,
}

/// What turns a reading as written into tension and elongation.
#[derive(Debug, Clone, Copy)]
pub(super) struct Conversion {
    /// Newtons for each kilogram that hangs on the cord, buoyancy taken off; NaN without gravity.
    pub(super) newtons_per_kg: f64,
    pub(super) free_length_m: f64,
}

impl CordSheet {
    /// The CSV that a sheet's text names; `None` where the readings stand in the sheet or the text is no TOML.
    pub fn readings_file(text: &str) -> Option<String> {
        let (document, _) = DeTable::parse_recoverable(text);
        document.get_ref().get("readings")?.get_ref().as_str().map(str::to_owned)
    }

    /// A sheet's text with every finding; `csv` is the text of the file it names.
    pub fn read(text: &str, csv: Option<&str>) -> (Option<Self>, Vec<Finding>) {
        read_text(text, |root, findings| whole(root, csv, findings))
    }
}

fn whole(mut root: Section<'_, '_>, csv: Option<&str>, findings: &mut Findings<'_>) -> Option<CordSheet> {
    let kind = root.text(findings, "kind");
    if !kind.is_empty() && kind != "cord sheet" {
        findings.error("kind", format!("{kind:?} is not known here, a table of cord readings says \"cord sheet\""));
    }
    let free_length_m = root.given(findings, ["free_length", "free_length_uncertainty"], "m", 0.05..=100.0);
    let conversion =
        Conversion { newtons_per_kg: newtons_per_kg(&mut root, findings), free_length_m: free_length_m.value };
    let cycles = root.optional_number(findings, "conditioning_cycles", 0.0..=1000.0);
    if cycles.is_none() {
        findings.caution("conditioning_cycles", "is missing: every cycle is taken, a fresh cord's first ones too");
    }
    let [lot, person, marks] = ["lot", "person", "marks"].map(|key| root.text(findings, key));
    let date = root.date(findings, "date");
    let sheet = CordSheet {
        lot,
        person,
        date: date.unwrap_or_default(),
        invented: root.optional_flag(findings, "invented"),
        free_length_m,
        marks,
        mass_kg: root.quantity(findings, "mass", "kg", 0.001..=50.0),
        conditioning_cycles: cycles.unwrap_or(0.0) as u32,
        temperature_c: root.quantity(findings, "temperature", "degC", -40.0..=80.0),
        force_relative_uncertainty: root.quantity(findings, "force_uncertainty", "%", 0.0..=20.0),
        force_uncertainty_n: root
            .optional_quantity(findings, "force_zero_uncertainty", "N", 0.0..=1000.0)
            .unwrap_or(0.0),
        length_uncertainty_m: root.quantity(findings, "length_uncertainty", "mm", 0.0..=1000.0),
        assumed_scatter: root.optional_quantity(findings, "assumed_scatter", "%", 0.0..=50.0),
        cell_creep: cell_creep(&mut root, findings),
        readings: readings(&mut root, csv, conversion, findings),
    };
    root.finish(findings);
    date.map(|_| sheet)
}

fn newtons_per_kg(root: &mut Section<'_, '_>, findings: &mut Findings<'_>) -> f64 {
    let measured = root.optional_quantity(findings, "gravity", "m/s2", 9.7..=9.9);
    let latitude = root.optional_quantity(findings, "latitude", "deg", -90.0..=90.0);
    let altitude = root.optional_quantity(findings, "altitude", "m", -450.0..=6000.0);
    let air = root.optional_quantity(findings, "air_density", "kg/m3", 0.5..=1.6).unwrap_or(AIR_KG_PER_M3);
    let masses = root.optional_quantity(findings, "weights_density", "kg/m3", 500.0..=23_000.0);
    let computed = latitude.zip(altitude).map(|(latitude, altitude)| local_gravity_mps2(latitude, altitude));
    let buoyancy = 1.0 - air / masses.unwrap_or(MASSES_KG_PER_M3);
    measured.or(computed).unwrap_or(f64::NAN) * buoyancy
}

fn cell_creep(root: &mut Section<'_, '_>, findings: &mut Findings<'_>) -> Vec<RelaxationTerm> {
    let mut terms = Vec::new();
    for mut entry in root.optional_sections(findings, "cell_creep") {
        terms.push(RelaxationTerm {
            share: entry.quantity(findings, "share", "%", -5.0..=5.0),
            time_s: entry.quantity(findings, "time", "s", 0.01..=1e7),
        });
        entry.finish(findings);
    }
    terms
}

fn readings(
    root: &mut Section<'_, '_>,
    csv: Option<&str>,
    conversion: Conversion,
    findings: &mut Findings<'_>,
) -> Vec<CordReading> {
    let file = root.optional(findings, "readings").is_some().then(|| root.text(findings, "readings"));
    let inline = root.optional(findings, "reading").is_some();
    match (file, csv, inline) {
        (Some(_), _, true) => {
            findings.error("reading", "stands beside readings: keep the readings in one place");
            Vec::new()
        }
        (Some(file), None, _) => {
            findings.error("readings", format!("{file} can't be read: is it beside the sheet?"));
            Vec::new()
        }
        (Some(file), Some(csv), _) => {
            let (rows, wrong) = cord_table::read(csv, conversion);
            for message in wrong {
                findings.error("readings", format!("{file}: {message}"));
            }
            rows
        }
        (None, _, true) => inline_readings(root, conversion, findings),
        (None, _, false) => {
            findings.error("readings", "is missing: name a CSV, or give [[reading]] entries");
            Vec::new()
        }
    }
}

fn inline_readings(
    root: &mut Section<'_, '_>,
    conversion: Conversion,
    findings: &mut Findings<'_>,
) -> Vec<CordReading> {
    let mut all = Vec::new();
    for (index, mut entry) in root.sections(findings, "reading").into_iter().enumerate() {
        let mut row = cord_table::Row { line: index + 1, ..cord_table::Row::default() };
        row.serial = entry.text(findings, "serial");
        row.branch = entry.text(findings, "branch");
        row.cycle = entry.optional_number(findings, "cycle", 1.0..=1e6).map_or(1, |cycle| cycle as u32);
        row.time_s = entry.optional_quantity(findings, "time", "s", 0.0..=1e8);
        row.force_n = entry.optional_quantity(findings, "force", "N", -100.0..=200_000.0);
        row.weight_kg = entry.optional_quantity(findings, "weight", "kg", 0.0..=20_000.0);
        row.length_m = entry.optional_quantity(findings, "length", "m", 0.0..=1000.0);
        row.extension_m = entry.optional_quantity(findings, "extension", "m", -1.0..=1000.0);
        row.elongation = entry.optional_quantity(findings, "elongation", "%", -10.0..=1500.0);
        row.temperature_c = entry.optional_quantity(findings, "temperature", "degC", -40.0..=80.0);
        let key = entry.key("serial");
        entry.finish(findings);
        match row.reading(conversion) {
            Ok(reading) => all.push(reading),
            Err(message) => findings.error(&key, message),
        }
    }
    all
}
