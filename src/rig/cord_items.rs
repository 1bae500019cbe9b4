//! The cords on the rig, one by one: serial, lot, place, since when, what they had behind them, when they retire.
//!
//! What they do on this rig is not written here: it is counted from the archive's trials, each once.

use jiff::civil::Date;
use serde::{Deserialize, Serialize};

use super::document::{Findings, Section};

/// One cord.
#[derive(Debug, Clone, PartialEq)]
pub struct CordItem {
    pub serial: String,
    pub lot: String,
    /// Where on the rig.
    pub place: String,
    pub in_service_since: Option<Date>,
    /// Loadings and loaded time before this rig's archive begins.
    pub cycles_before: u32,
    pub hours_before: f64,
    /// To be taken off at the first of these.
    pub retire_cycles: Option<u32>,
    pub retire_hours: Option<f64>,
    pub retire_on: Option<Date>,
}

/// What a cord has served, archive included.
#[derive(Debug, Clone, Copy, PartialEq, Default, Serialize, Deserialize)]
pub struct Served {
    pub cycles: u32,
    pub hours: f64,
}

impl CordItem {
    /// What it had behind it, and what it did since.
    pub fn served(&self, since: Served) -> Served {
        Served { cycles: self.cycles_before + since.cycles, hours: self.hours_before + since.hours }
    }

    /// The reasons of [`Self::retired`] as one sentence with what to do; none while it may stay.
    pub fn worn(&self, served: Served, today: Option<Date>) -> Option<String> {
        let reasons = self.retired(served, today);
        let Self { serial, place, .. } = self;
        (!reasons.is_empty()).then(|| format!("cord {serial} ({place}) is to come off: {}", reasons.join("; ")))
    }

    /// Why the cord is to come off; empty while it may stay.
    pub fn retired(&self, served: Served, today: Option<Date>) -> Vec<String> {
        let mut reasons = Vec::new();
        if let Some(limit) = self.retire_cycles.filter(|limit| served.cycles >= *limit) {
            reasons.push(format!("{} cycles, retired at {limit}", served.cycles));
        }
        if let Some(limit) = self.retire_hours.filter(|limit| served.hours >= *limit) {
            reasons.push(format!("{:.2} h loaded, retired at {limit:.2} h", served.hours));
        }
        if let Some((limit, today)) = self.retire_on.zip(today).filter(|(limit, today)| today >= limit) {
            reasons.push(format!("{today} is past its last day, {limit}"));
        }
        reasons
    }
}

pub(super) fn cord_items(root: &mut Section<'_, '_>, findings: &mut Findings<'_>) -> Vec<CordItem> {
    let mut items: Vec<CordItem> = Vec::new();
    for mut entry in root.optional_sections(findings, "cord") {
        let item = one(&mut entry, findings);
        let key = entry.key("serial");
        entry.finish(findings);
        if items.iter().any(|known| known.serial == item.serial && !item.serial.is_empty()) {
            findings.error(&key, format!("{:?} is the serial of a cord before it", item.serial));
        }
        if item.retire_cycles.is_none() && item.retire_hours.is_none() && item.retire_on.is_none() {
            findings.caution(&key, "has no retire_cycles, retire_hours or retire_on: nobody will say when it is worn");
        }
        items.push(item);
    }
    items
}

fn one(entry: &mut Section<'_, '_>, findings: &mut Findings<'_>) -> CordItem {
    let hours = |seconds: f64| seconds / 3600.0;
    let retire_on = entry.optional(findings, "retire_on").is_some();
    CordItem {
        serial: entry.text(findings, "serial"),
        lot: entry.text(findings, "lot"),
        place: entry.text(findings, "place"),
        in_service_since: entry.date(findings, "in_service_since"),
        cycles_before: entry.optional_number(findings, "cycles_before", 0.0..=1e6).map_or(0, |n| n as u32),
        hours_before: entry.optional_quantity(findings, "hours_before", "h", 0.0..=1e5).map_or(0.0, hours),
        retire_cycles: entry.optional_number(findings, "retire_cycles", 1.0..=1e6).map(|n| n as u32),
        retire_hours: entry.optional_quantity(findings, "retire_hours", "h", 0.01..=1e5).map(hours),
        retire_on: retire_on.then(|| entry.date(findings, "retire_on")).flatten(),
    }
}
