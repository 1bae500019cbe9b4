//! What temperature and cycles do to the tension, from the loading branches of all cycles.
//!
//! Each cycle of each cord has a factor against the lot's loading law; a cord's factors are fitted by its own constant, by
//! log₁₀ of the cycle number and by the temperature, over all cords at once.

use super::branch::BranchFit;
use super::error::CordError;
use super::order::Cycle;
use crate::estimation::{Scatter, least_squares};
use crate::rig::{CordBranch, Given};

/// Least spread of temperatures that can tell a factor, K.
const LEAST_SPREAD_K: f64 = 3.0;

/// One cycle's tension against the lot's law: the data behind the factors.
#[derive(Debug, Clone, PartialEq)]
pub struct CycleFactor {
    pub serial: String,
    pub cycle: u32,
    pub temperature_c: f64,
    pub factor: f64,
}

#[derive(Debug, Clone, PartialEq, Default)]
pub struct Factors {
    pub data: Vec<CycleFactor>,
    /// Relative loss of tension for each tenfold of cycles; `None` where fewer than three different cycles were read.
    pub loss_per_tenfold_cycles: Option<Given>,
    /// Relative change for each kelvin; `None` where the temperatures lie within 3 K.
    pub per_kelvin: Option<Given>,
    /// The middle (by logarithm) of the cycles that the curves come from.
    pub card_cycle: f64,
}

pub(super) fn factors(
    cycles: &[Cycle<'_>],
    serials: &[String],
    loading: &BranchFit,
    temperature_c: f64,
    conditioning: u32,
) -> Result<Factors, CordError> {
    let data: Vec<CycleFactor> =
        cycles.iter().filter_map(|cycle| of_cycle(cycle, &serials[cycle.cord], loading, temperature_c)).collect();
    let of_card: Vec<f64> =
        cycles.iter().filter(|cycle| cycle.cycle > conditioning).map(|cycle| f64::from(cycle.cycle).log10()).collect();
    let card_cycle = 10.0_f64.powf(of_card.iter().sum::<f64>() / of_card.len().max(1) as f64);
    let mut numbers: Vec<u32> = data.iter().map(|one| one.cycle).collect();
    numbers.sort_unstable();
    numbers.dedup();
    let by_cycles = numbers.len() > 2;
    let temperatures = || data.iter().map(|one| one.temperature_c);
    let spread_k = temperatures().fold(f64::MIN, f64::max) - temperatures().fold(f64::MAX, f64::min);
    let by_kelvin = spread_k >= LEAST_SPREAD_K;
    let n_parameters = serials.len() + usize::from(by_cycles) + usize::from(by_kelvin);
    if !(by_cycles || by_kelvin) || data.len() <= n_parameters {
        return Ok(Factors { data, loss_per_tenfold_cycles: None, per_kelvin: None, card_cycle });
    }
    let row = |one: &CycleFactor| {
        let mut row: Vec<f64> = serials.iter().map(|serial| f64::from(u8::from(*serial == one.serial))).collect();
        if by_cycles {
            row.push((f64::from(one.cycle) / card_cycle).log10());
        }
        if by_kelvin {
            row.push(one.temperature_c - temperature_c);
        }
        row
    };
    let rows: Vec<Vec<f64>> = data.iter().map(row).collect();
    let all: Vec<f64> = data.iter().map(|one| one.factor).collect();
    let fit = least_squares(&rows, &all, Scatter::Unknown)?;
    let given = |place: usize, sign: f64| Given {
        value: sign * fit.parameters[place],
        standard_uncertainty: fit.standard_uncertainty(place),
    };
    let n = serials.len();
    Ok(Factors {
        loss_per_tenfold_cycles: by_cycles.then(|| given(n, -1.0)),
        per_kelvin: by_kelvin.then(|| given(n + usize::from(by_cycles), 1.0)),
        data,
        card_cycle,
    })
}

fn of_cycle(cycle: &Cycle<'_>, serial: &str, loading: &BranchFit, usual_c: f64) -> Option<CycleFactor> {
    let known = |elongation: f64| elongation <= loading.tested_to * 1.001;
    let (product, square) =
        cycle.of(CordBranch::Load).filter(|one| known(one.elongation)).fold((0.0, 0.0), |sum, one| {
            let law_n = loading.law.tension_n(one.elongation);
            (sum.0 + law_n * one.tension_n, sum.1 + law_n * law_n)
        });
    let temperatures: Vec<f64> = cycle.readings.iter().filter_map(|one| one.temperature_c).collect();
    let temperature_c =
        if temperatures.is_empty() { usual_c } else { temperatures.iter().sum::<f64>() / temperatures.len() as f64 };
    (square > 0.0).then(|| CycleFactor {
        serial: serial.to_owned(),
        cycle: cycle.cycle,
        temperature_c,
        factor: product / square,
    })
}
