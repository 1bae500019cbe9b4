//! What a cord has lost before release: relaxation since the winch-back, temperature, cycles.

use crate::rig::{CordDetails, RelaxationTerm};

/// Part of the tension left at release after a steady winch-back and a hold, against a draw in no time at all.
///
/// Linear viscoelasticity with a Prony series (R. M. Christensen, *Theory of Viscoelasticity*, 1982, section 1.2): G(t) =
/// 1 − Σ gᵢ (1 − e^(−t/τᵢ)), and the convolution with a tension that grows evenly over the winch-back w, held for h:
/// 1 − Σ gᵢ [1 − (τᵢ/w)(e^(w/τᵢ) − 1) e^(−(w+h)/τᵢ)].
pub fn held_part(terms: &[RelaxationTerm], winch_s: f64, hold_s: f64) -> f64 {
    let lost = terms.iter().map(|term| {
        let (ramp, hold) = (winch_s / term.time_s, hold_s / term.time_s);
        let ramp_part = if ramp > 1e-9 { -(-ramp).exp_m1() / ramp } else { 1.0 };
        term.share * (1.0 - ramp_part * (-hold).exp())
    });
    1.0 - lost.sum::<f64>()
}

/// Factor on every tension for temperature and cycles: linear in kelvin, even in the logarithm of the cycles.
pub fn standing_factor(details: &CordDetails) -> f64 {
    let (warmer_k, tenfolds) = circumstances(details);
    (1.0 + details.tension_per_kelvin * warmer_k) * (1.0 - details.loss_per_tenfold_cycles * tenfolds)
}

/// Relative standard uncertainties of that factor from the card's own: of its temperature factor, of its loss by cycles.
pub fn standing_uncertainties(details: &CordDetails) -> (f64, f64) {
    let (warmer_k, tenfolds) = circumstances(details);
    details.card.as_ref().map_or((0.0, 0.0), |card| {
        let (by_kelvin, by_cycles) = (card.tension_per_kelvin_uncertainty, card.loss_per_tenfold_cycles_uncertainty);
        (by_kelvin * warmer_k.abs(), by_cycles * tenfolds)
    })
}

/// Kelvin above the card's temperature, tenfolds of cycles since the card's.
fn circumstances(details: &CordDetails) -> (f64, f64) {
    let warmer_k = details.temperature_c.zip(details.card_temperature_c).map_or(0.0, |(now, then)| now - then);
    (warmer_k, details.cycles.max(1.0).log10())
}

#[cfg(test)]
mod tests {
    use super::{held_part, standing_factor};
    use crate::rig::{CordDetails, RelaxationTerm};

    #[test]
    fn the_ramp_is_convolved_not_guessed() {
        // ∫₀ʷ G(w + h − s) ds / w by Simpson's rule with 2000 parts.
        let term = RelaxationTerm { share: 0.1, time_s: 7.0 };
        let (winch_s, hold_s) = (12.0, 5.0);
        let modulus = |t: f64| 1.0 - term.share * (1.0 - (-t / term.time_s).exp());
        let n = 2000;
        let at = |i: i32| modulus(winch_s + hold_s - winch_s * f64::from(i) / f64::from(n));
        let inner: f64 = (1..n).map(|i| at(i) * if i % 2 == 1 { 4.0 } else { 2.0 }).sum();
        let expected = (at(0) + inner + at(n)) / (3.0 * f64::from(n));
        assert!((held_part(&[term], winch_s, hold_s) - expected).abs() < 1e-12);
    }

    #[test]
    fn a_step_that_is_held_relaxes_by_its_own_exponential() {
        let term = RelaxationTerm { share: 0.2, time_s: 10.0 };
        assert!((held_part(&[term], 0.0, 10.0) - (0.8 + 0.2 * (-1.0_f64).exp())).abs() < 1e-12);
        assert!((held_part(&[], 12.0, 5.0) - 1.0).abs() < 1e-15);
    }

    #[test]
    fn warmth_and_cycles_act_where_the_rig_file_gives_both_temperatures() {
        let details = CordDetails {
            tension_per_kelvin: 0.004,
            temperature_c: Some(5.0),
            card_temperature_c: Some(20.0),
            loss_per_tenfold_cycles: 0.02,
            cycles: 1000.0,
            ..CordDetails::default()
        };
        assert!((standing_factor(&details) - 0.94 * 0.94).abs() < 1e-12);
        let unknown = CordDetails { card_temperature_c: None, ..details.clone() };
        assert!((standing_factor(&unknown) - 0.94).abs() < 1e-12);
        let new = CordDetails { cycles: 0.0, ..details };
        assert!((standing_factor(&new) - 0.94).abs() < 1e-12);
    }
}
