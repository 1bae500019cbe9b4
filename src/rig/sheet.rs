//! Bench sheets: what a person writes down before calibrating a sensor. TOML; the readings stand in it or in a CSV beside it.
//!
//! A sheet names the sensor, the day, who did it, and what it was compared with: masses with their own uncertainty, a
//! reference transducer, marks along the rail, or gravity. Refused: a sheet that leaves one of these open.

use jiff::civil::Date;

use super::document::{Findings, Section};
use super::finding::Finding;
use super::record::RecordKind;
use super::surroundings::{local_gravity_mps2, standard_air_density_kg_per_m3};
use super::text_read::read_text;

/// A sheet, checked.
#[derive(Debug, Clone, PartialEq)]
pub struct Sheet {
    pub kind: RecordKind,
    pub channel: String,
    pub sensor: String,
    pub person: String,
    pub date: Date,
    pub valid_until: Date,
    pub invented: bool,
    pub place: Place,
    pub standard: Standard,
    /// Relative standard uncertainty of the scale a year later.
    pub drift_relative_per_year: f64,
    /// Power of the curve, where the person chose it: 1 to 3.
    pub degree: Option<usize>,
    /// Counts at which the reading saturates.
    pub counts_range: (f64, f64),
    /// Least step of a reading, counts: 1 of a converter, the last digit of a display.
    pub step_counts: f64,
    /// Reading with the shunt resistor switched in, unloaded.
    pub shunt_counts: Option<f64>,
    /// Readings are shares of the excitation, and are brought to this one, V.
    pub excitation_v: Option<f64>,
    pub readings: Vec<SheetReading>,
}

/// Where it was done.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Place {
    pub gravity_mps2: f64,
    /// Standard uncertainty.
    pub gravity_uncertainty_mps2: f64,
    pub air_density_kg_per_m3: f64,
    /// Standard uncertainty.
    pub air_density_uncertainty_kg_per_m3: f64,
}

/// A mass with its certificate.
#[derive(Debug, Clone, PartialEq)]
pub struct Mass {
    pub name: String,
    pub mass_kg: f64,
    /// Standard uncertainty.
    pub uncertainty_kg: f64,
    pub density_kg_per_m3: f64,
}

/// What the sensor is compared with.
#[derive(Debug, Clone, PartialEq)]
pub enum Standard {
    /// Loads are written as names joined by "+".
    Masses {
        masses: Vec<Mass>,
        /// Relative standard uncertainty that all masses share: their reference's.
        common_relative_uncertainty: f64,
    },
    /// Loads are written as forces.
    ReferenceTransducer { relative_uncertainty: f64 },
    /// Positions are written as lengths.
    Marks {
        /// Standard uncertainty of one mark's place.
        uncertainty_m: f64,
        /// Relative standard uncertainty of the tape they were laid out with.
        scale_relative_uncertainty: f64,
    },
    /// Turned in the field of gravity.
    Gravity {
        /// Standard uncertainty of the sensor's axis against the plumb line, rad.
        axis_uncertainty_rad: f64,
        /// Of the rail, for a reading at rest on it.
        incline_rad: Option<f64>,
    },
}

/// One line of a table, as it was written.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct SheetReading {
    /// Where it stands, for messages: "line 12".
    pub place: String,
    pub run: String,
    pub rotation_deg: Option<f64>,
    /// up, down, creep; for accelerometers the position.
    pub direction: String,
    /// Masses, force or mark.
    pub load: String,
    pub counts: f64,
    /// Standard deviation of the readings behind the mean.
    pub sd_counts: Option<f64>,
    pub n: Option<f64>,
    /// Since the load was put on.
    pub held_s: Option<f64>,
    pub excitation_v: Option<f64>,
}

impl Sheet {
    /// A sheet's text with every finding.
    pub fn read(text: &str) -> (Option<Self>, Vec<Finding>) {
        read_text(text, whole)
    }
}

fn whole(mut root: Section<'_, '_>, findings: &mut Findings<'_>) -> Option<Sheet> {
    let word = root.text(findings, "kind");
    let kind = RecordKind::ALL.into_iter().find(|kind| kind.word() == word);
    if kind.is_none() && !word.is_empty() {
        findings.error("kind", format!("{word:?} is not known: cell, encoder or accelerometer"));
    }
    let [channel, sensor, person] = ["channel", "sensor", "person"].map(|key| root.text(findings, key));
    let [date, valid_until] = ["date", "valid_until"].map(|key| root.date(findings, key));
    let invented = root.optional_flag(findings, "invented");
    let place = place(root.section(findings, "place"), findings);
    let standard = kind.map(|kind| standard(kind, &mut root, findings));
    let drift = root.quantity(findings, "drift_per_year", "%", 0.0..=50.0);
    let degree = root.optional_number(findings, "degree", 1.0..=3.0).map(|degree| degree as usize);
    let counts_range = (
        root.optional_number(findings, "counts_min", -2_147_483_648.0..=0.0).unwrap_or(-8_388_608.0),
        root.optional_number(findings, "counts_max", 1.0..=2_147_483_647.0).unwrap_or(8_388_607.0),
    );
    let step_counts = root.optional_number(findings, "counts_step", 1e-9..=1e6).unwrap_or(1.0);
    let shunt_counts = root.optional_number(findings, "shunt_counts", -2_147_483_648.0..=2_147_483_647.0);
    let excitation_v = root.optional_number(findings, "excitation_v", 0.1..=100.0);
    let readings = readings(&mut root, findings);
    root.finish(findings);
    let (kind, date, valid_until) = (kind?, date?, valid_until?);
    if valid_until <= date {
        findings.error("valid_until", format!("{valid_until} is not after the calibration, {date}"));
    }
    Some(Sheet {
        kind,
        channel,
        sensor,
        person,
        date,
        valid_until,
        invented,
        place,
        standard: standard?,
        drift_relative_per_year: drift,
        degree,
        counts_range,
        step_counts,
        shunt_counts,
        excitation_v,
        readings,
    })
}

/// Gravity measured there, or from latitude and altitude (no anomaly known: 5e-5 of it, from memory of their usual size).
fn place(mut table: Section<'_, '_>, findings: &mut Findings<'_>) -> Place {
    const ANOMALY: f64 = 5e-5;
    let measured = table.optional_quantity(findings, "gravity", "m/s2", 9.7..=9.9);
    let measured_u = table.optional_quantity(findings, "gravity_uncertainty", "m/s2", 0.0..=0.1);
    let latitude = table.optional_quantity(findings, "latitude", "deg", -90.0..=90.0);
    let altitude = table.optional_quantity(findings, "altitude", "m", -450.0..=6000.0);
    let air = table.optional_quantity(findings, "air_density", "kg/m3", 0.5..=1.6);
    let air_u = table.optional_quantity(findings, "air_density_uncertainty", "kg/m3", 0.0..=0.5);
    table.finish(findings);
    let computed = latitude.zip(altitude).map(|(latitude, altitude)| local_gravity_mps2(latitude, altitude));
    let gravity = match (measured, computed) {
        (Some(measured), _) => measured,
        (None, Some(computed)) => computed,
        (None, None) => {
            findings.error("place", "needs gravity, or latitude and altitude to find it from");
            f64::NAN
        }
    };
    let air_density = match (air, altitude) {
        (Some(air), _) => air,
        (None, Some(altitude)) => {
            findings.caution("place", "has no air_density: that of the standard atmosphere is taken, to 5 %");
            standard_air_density_kg_per_m3(altitude).unwrap_or(f64::NAN)
        }
        (None, None) => {
            findings.error("place", "needs air_density, or the altitude to take the standard atmosphere's");
            f64::NAN
        }
    };
    let anomaly = if measured.is_some() { 1e-5 } else { ANOMALY };
    Place {
        gravity_mps2: gravity,
        gravity_uncertainty_mps2: measured_u.unwrap_or(anomaly * gravity),
        air_density_kg_per_m3: air_density,
        air_density_uncertainty_kg_per_m3: air_u.unwrap_or(if air.is_some() { 0.01 } else { 0.05 } * air_density),
    }
}

fn standard(kind: RecordKind, root: &mut Section<'_, '_>, findings: &mut Findings<'_>) -> Standard {
    match kind {
        RecordKind::Cell => {
            let reference = root.optional_quantity(findings, "reference_uncertainty", "%", 0.0..=10.0);
            let masses = masses(root, findings);
            let common = root.optional_quantity(findings, "masses_common_uncertainty", "%", 0.0..=10.0);
            match (reference, masses.is_empty()) {
                (Some(relative_uncertainty), true) => Standard::ReferenceTransducer { relative_uncertainty },
                (None, false) => Standard::Masses { masses, common_relative_uncertainty: common.unwrap_or(0.0) },
                _ => {
                    let message = "give either [[mass]] entries or reference_uncertainty (of a reference transducer)";
                    findings.error("mass", message);
                    Standard::ReferenceTransducer { relative_uncertainty: f64::NAN }
                }
            }
        }
        RecordKind::Encoder => Standard::Marks {
            uncertainty_m: root.quantity(findings, "mark_uncertainty", "mm", 0.0..=100.0),
            scale_relative_uncertainty: root.quantity(findings, "tape_uncertainty", "%", 0.0..=5.0),
        },
        RecordKind::Accelerometer => Standard::Gravity {
            axis_uncertainty_rad: root.quantity(findings, "axis_uncertainty", "deg", 0.0..=10.0),
            incline_rad: root.optional_quantity(findings, "incline", "deg", -10.0..=45.0),
        },
    }
}

fn masses(root: &mut Section<'_, '_>, findings: &mut Findings<'_>) -> Vec<Mass> {
    let mut masses: Vec<Mass> = Vec::new();
    for mut entry in root.optional_sections(findings, "mass") {
        let key = entry.key("name");
        let mass = Mass {
            name: entry.text(findings, "name"),
            mass_kg: entry.quantity(findings, "mass", "kg", 0.001..=2000.0),
            uncertainty_kg: entry.quantity(findings, "uncertainty", "kg", 0.0..=10.0),
            density_kg_per_m3: entry.quantity(findings, "density", "kg/m3", 500.0..=23_000.0),
        };
        entry.finish(findings);
        if masses.iter().any(|other| other.name == mass.name) {
            findings.error(&key, format!("{:?} is the name of a mass before it", mass.name));
        }
        if mass.name.contains(['+', ',']) || mass.name == "0" {
            findings.error(&key, format!("{:?} can't be a name: \"+\" joins names, \"0\" means no load", mass.name));
        }
        masses.push(mass);
    }
    masses
}

fn readings(root: &mut Section<'_, '_>, findings: &mut Findings<'_>) -> Vec<SheetReading> {
    let mut all = Vec::new();
    for (index, mut entry) in root.optional_sections(findings, "reading").into_iter().enumerate() {
        all.push(SheetReading {
            place: format!("reading[{index}]"),
            run: entry.optional_text(findings, "run").unwrap_or_default(),
            rotation_deg: entry.optional_number(findings, "rotation_deg", -720.0..=720.0),
            direction: entry.text(findings, "direction"),
            load: entry.optional_text(findings, "load").unwrap_or_default(),
            counts: entry.number(findings, "counts", -1e12..=1e12),
            sd_counts: entry.optional_number(findings, "sd", 0.0..=1e9),
            n: entry.optional_number(findings, "n", 1.0..=1e12),
            held_s: entry.optional_number(findings, "held_s", 0.0..=1e7),
            excitation_v: entry.optional_number(findings, "excitation_v", 0.1..=100.0),
        });
        entry.finish(findings);
    }
    all
}
