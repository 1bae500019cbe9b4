//! A fit in columns and sentences.

use tautrail::replay::fit::{LossFit, TrialMisfit};
use tautrail::units::rounded;

/// Correlations from here on are told.
const STRONG: f64 = 0.8;

pub fn heading(found: &LossFit) -> String {
    let invented = if found.invented { " (INVENTED DATA)" } else { "" };
    format!("losses of rig {}{invented} from {} trials", found.rig, found.trials.len())
}

/// Header first: a line for each trial.
pub fn trials(found: &LossFit) -> Vec<String> {
    let mut lines = vec![format!(
        "  {:<16} {:>5} {:>8} {:>7} {:>8} {:>9} {:>9} {:>9} {:>8} {:>17}",
        "trial", "cords", "mass kg", "draw m", "pull N", "speed m/s", "rms m/s", "end m/s", "pull z", "left out m/s"
    )];
    let line = |trial: &TrialMisfit| {
        let at = &trial.configuration;
        let speed = at.launch_speed_mps.map_or_else(|| "alone".to_owned(), |speed| format!("{speed:.3}"));
        let left_out = found.left_out.iter().find(|one| one.id == trial.id);
        let left_out =
            left_out.map_or_else(|| "-".to_owned(), |one| format!("{:+.3} ± {:.3}", one.error_mps(), one.u_mps));
        let own = trial.own.first().map_or(f64::NAN, |(_, z)| *z);
        format!(
            "  {:<16} {:>5} {:>8.3} {:>7.3} {:>8.1} {speed:>9} {:>9.4} {:>+9.4} {own:>+8.2} {left_out:>17}",
            trial.id, at.cord_count, at.moving_mass_kg, at.draw_m, at.pull_n, trial.rms_mps, trial.last_mps
        )
    };
    lines.extend(found.trials.iter().map(line));
    lines.push(
        "  residuals are measured minus modelled; left out: forecast by the other trials minus measured; pull z: what the \
         fit took the hold's pull to be, in its standard uncertainties"
            .to_owned(),
    );
    lines
}

pub fn outliers(found: &LossFit) -> Vec<(&str, &str)> {
    let of = |trial: &'_ TrialMisfit| trial.outlier.is_some();
    found
        .trials
        .iter()
        .filter(|trial| of(trial))
        .map(|trial| (trial.id.as_str(), trial.outlier.as_deref().unwrap_or("")))
        .collect()
}

/// Header first: a line for each loss.
pub fn losses(found: &LossFit) -> Vec<String> {
    let mut lines = vec![format!("  {:<18} {:>11} {:>11} {:<6} {}", "loss", "value", "u", "unit", "before the trials")];
    for one in &found.terms {
        let (value, u) = rounded(one.fitted.value, one.fitted.standard_uncertainty);
        let before = if one.prior_is_weak {
            format!("{} (the rig file has no uncertainty)", one.prior.value)
        } else {
            format!("{} (u {})", one.prior.value, one.prior.standard_uncertainty)
        };
        let zero = if one.at_zero { "; ended at zero" } else { "" };
        lines.push(format!("  {:<18} {value:>11} {u:>11} {:<6} {before}{zero}", one.term.name(), one.unit));
    }
    lines
}

/// Everything else, as sentences.
pub fn fit_sentences(found: &LossFit) -> Vec<String> {
    let mut sentences = vec![format!(
        "chi-square per degree of freedom {:.2} ({:.0} degrees), autocorrelation along the rail {:.2}: the speeds' variance is \
         widened by {:.1}; stopped: {}",
        found.chi_square_per_degree(),
        found.degrees_of_freedom,
        found.autocorrelation,
        found.inflation,
        found.stop
    )];
    if found.misfits() {
        sentences.push(
            "MISFIT: these losses do not explain the speeds within their uncertainty; the intervals are widened for it"
                .to_owned(),
        );
    }
    sentences.extend(strong_correlations(found));
    for one in &found.combinations {
        let known = if one.determined { "determined" } else { "LEFT OPEN" };
        sentences.push(format!(
            "{known}: {} (each in widths of what was known before) to {:.2} of that width",
            one.words(),
            1.0 / one.singular_value.max(1e-3)
        ));
    }
    for next in found.next_trials.iter().take(3) {
        sentences.push(format!(
            "a trial with {} would leave {:.0} % of the width of what is known least",
            next.what,
            100.0 * next.leaves
        ));
    }
    for one in &found.nested {
        sentences.push(format!(
            "without {}: Akaike's criterion {:+.1}, F {:.1} (p {:.1e})",
            one.without.name(),
            one.delta_aicc,
            one.f,
            one.p
        ));
    }
    sentences.push(format!("unexplained from trial to trial: {:.2} % of the launch speed", 100.0 * found.unexplained));
    sentences
}

fn strong_correlations(found: &LossFit) -> Vec<String> {
    let mut all = Vec::new();
    for (i, a) in found.terms.iter().enumerate() {
        for (j, b) in found.terms.iter().enumerate().take(i) {
            let correlation = found.correlations[i][j];
            if correlation.abs() >= STRONG {
                all.push(format!("{} and {} correlate by {correlation:.2}", b.term.name(), a.term.name()));
            }
        }
    }
    all
}
