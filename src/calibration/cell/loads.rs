//! From a sheet's loads to forces, with what each mass contributes.

use crate::rig::{Mass, Place, Sheet, SheetReading, Standard};
use crate::units::{self, Dimension};

use super::error::CellError;

/// Force of a mass hung in air, N: `m g (1 − ρ_air/ρ_mass)` (ISO 376:2011 and EURAMET cg-4 use it; remembered).
pub fn dead_weight_n(mass_kg: f64, gravity_mps2: f64, air_density_kg_per_m3: f64, density_kg_per_m3: f64) -> f64 {
    mass_kg * gravity_mps2 * (1.0 - air_density_kg_per_m3 / density_kg_per_m3)
}

#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Direction {
    Up,
    Down,
    /// Held: shows creep, is not fitted.
    Creep,
}

/// One reading with its force.
#[derive(Debug, Clone, PartialEq)]
pub struct Load {
    pub place: String,
    pub run: String,
    pub rotation_deg: f64,
    pub direction: Direction,
    pub force_n: f64,
    /// Which of the sheet's masses hung there.
    pub masses: Vec<usize>,
    /// Brought to the nominal excitation where readings are ratiometric.
    pub counts: f64,
    pub sd_counts: Option<f64>,
    pub n: Option<f64>,
    pub held_s: Option<f64>,
}

/// All readings as loads, in their order.
pub(super) fn loads(sheet: &Sheet) -> Result<Vec<Load>, CellError> {
    sheet.readings.iter().map(|reading| load(sheet, reading)).collect()
}

fn load(sheet: &Sheet, reading: &SheetReading) -> Result<Load, CellError> {
    let place = || reading.place.clone();
    let direction = match reading.direction.as_str() {
        "up" => Direction::Up,
        "down" => Direction::Down,
        "creep" => Direction::Creep,
        other => return Err(CellError::Direction { place: place(), found: other.to_owned() }),
    };
    if !reading.counts.is_finite() {
        return Err(CellError::NotANumber { place: place() });
    }
    let (low, high) = sheet.counts_range;
    if reading.counts <= low || reading.counts >= high {
        return Err(CellError::Saturated { place: place(), counts: reading.counts, low, high });
    }
    let (force_n, masses) = force(sheet, reading)?;
    Ok(Load {
        place: place(),
        run: reading.run.clone(),
        rotation_deg: reading.rotation_deg.unwrap_or(0.0),
        direction,
        force_n,
        masses,
        counts: reading.counts * excitation_factor(sheet, reading)?,
        sd_counts: reading.sd_counts,
        n: reading.n,
        held_s: reading.held_s,
    })
}

fn excitation_factor(sheet: &Sheet, reading: &SheetReading) -> Result<f64, CellError> {
    match (sheet.excitation_v, reading.excitation_v) {
        (Some(nominal_v), Some(v)) => Ok(nominal_v / v),
        (None, None) => Ok(1.0),
        (Some(_), None) => Err(CellError::NoExcitation { place: reading.place.clone() }),
        (None, Some(_)) => Err(CellError::ExcitationUnasked { place: reading.place.clone() }),
    }
}

fn force(sheet: &Sheet, reading: &SheetReading) -> Result<(f64, Vec<usize>), CellError> {
    let load = reading.load.trim();
    if load == "0" {
        return Ok((0.0, Vec::new()));
    }
    match &sheet.standard {
        Standard::Masses { masses, .. } => {
            let hung: Vec<usize> = load
                .split('+')
                .map(|name| {
                    let name = name.trim();
                    masses.iter().position(|mass| mass.name == name).ok_or_else(|| CellError::UnknownMass {
                        place: reading.place.clone(),
                        name: name.to_owned(),
                        known: masses.iter().map(|mass| mass.name.as_str()).collect::<Vec<_>>().join(", "),
                    })
                })
                .collect::<Result<_, _>>()?;
            if let Some(twice) = hung.iter().enumerate().find(|(at, index)| hung[..*at].contains(index)) {
                return Err(CellError::HungTwice { place: reading.place.clone(), name: masses[*twice.1].name.clone() });
            }
            Ok((hung.iter().map(|index| weight_n(&masses[*index], &sheet.place)).sum(), hung))
        }
        _ => units::parse(load, Dimension::Force)
            .map(|force_n| (force_n, Vec::new()))
            .map_err(|source| CellError::Load { place: reading.place.clone(), source }),
    }
}

pub(super) fn weight_n(mass: &Mass, place: &Place) -> f64 {
    dead_weight_n(mass.mass_kg, place.gravity_mps2, place.air_density_kg_per_m3, mass.density_kg_per_m3)
}
