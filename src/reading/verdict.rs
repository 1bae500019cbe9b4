//! What the plan and the limits of the rig file asked, and whether the trial met it.
//!
//! Decided with the result's own uncertainty: met or missed where the probability is 95 % or more, else not decidable
//! (JCGM 106:2012, section 7.2: conformance probability, normal distribution). For advice and record only.

use statrs::function::erf::erfc;

use crate::rig::Rig;

use super::result::{Decision, ResultRow, Verdict};
use super::rows::Book;

/// Probability from which a question counts as decided.
const DECIDED: f64 = 0.95;
/// Share of the planned draw within which it counts as kept, where the rig file states no uncertainty of it.
const DRAW_TOLERANCE: f64 = 0.01;

/// What is asked of one result.
struct Question {
    name: &'static str,
    result: &'static str,
    asked: String,
    min: f64,
    max: f64,
}

pub(super) fn verdicts(rig: &Rig, book: &Book) -> Vec<Verdict> {
    questions(rig).into_iter().map(|question| decide(question, book)).collect()
}

fn questions(rig: &Rig) -> Vec<Question> {
    let (min, max) = (rig.plan.launch_speed_min_mps, rig.plan.launch_speed_max_mps);
    let draw_m = rig.plan.draw_m;
    let tolerance_m = f64::max(DRAW_TOLERANCE * draw_m, 2.0 * rig.details.settings.draw_m);
    let mut questions = vec![
        Question {
            name: "launch_speed_window",
            result: "launch_speed",
            asked: format!("launch speed from {min:.2} to {max:.2} m/s"),
            min,
            max,
        },
        Question {
            name: "peak_g_limit",
            result: "peak_g_cfc60_specific",
            asked: format!("peak of the specific force, CFC 60, at most {:.2} g", rig.limits.peak_g),
            min: f64::NEG_INFINITY,
            max: rig.limits.peak_g,
        },
        Question {
            name: "tension_limit",
            result: "max_tension",
            asked: format!("tension of the whole launcher at most {:.0} N", rig.limits.tension_n),
            min: f64::NEG_INFINITY,
            max: rig.limits.tension_n,
        },
        Question {
            name: "planned_draw",
            result: "draw",
            asked: format!("draw of {draw_m:.3} m, within {tolerance_m:.3} m"),
            min: draw_m - tolerance_m,
            max: draw_m + tolerance_m,
        },
    ];
    questions.extend(rig.details.asymmetry_limit.map(|limit| Question {
        name: "asymmetry_limit",
        result: "anchor_asymmetry",
        asked: format!("left and right anchor differ by at most {:.1} % of their sum", 100.0 * limit),
        min: -limit,
        max: limit,
    }));
    questions
}

fn decide(question: Question, book: &Book) -> Verdict {
    let Question { name, result, asked, min, max } = question;
    let row = book.results.iter().find(|row| row.name == result);
    let probability = row.map(|row| probability_between(row, min, max));
    let decision = match probability {
        Some(p) if p >= DECIDED => Decision::Met,
        Some(p) if p <= 1.0 - DECIDED => Decision::Missed,
        _ => Decision::NotDecidable,
    };
    let why = match (row, probability) {
        (Some(row), Some(p)) => {
            format!("{result} {} with a probability of {:.1} %", compared(row, min, max), 100.0 * p)
        }
        _ => {
            let absent = book.absent.iter().find(|absent| absent.name == result);
            format!("{result} is absent: {}", absent.map_or("it was not derived", |absent| absent.reason.as_str()))
        }
    };
    Verdict { name: name.to_owned(), asked, decision, probability, why }
}

fn compared(row: &ResultRow, min: f64, max: f64) -> String {
    let (value, unit) = (crate::units::significant(row.value, 4), row.unit.as_str());
    let unit = if unit == "1" { "" } else { unit };
    let word = if row.value < min {
        "is below it"
    } else if row.value > max {
        "is above it"
    } else {
        "keeps it"
    };
    format!("({value} {unit}) {word}; it is kept").replace(" )", ")")
}

/// Probability that a normal variable lies between two bounds; a result without uncertainty is there or not.
fn probability_between(row: &ResultRow, min: f64, max: f64) -> f64 {
    let u = row.standard_uncertainty;
    if u <= 0.0 {
        return if (min..=max).contains(&row.value) { 1.0 } else { 0.0 };
    }
    let below = |bound: f64| 0.5 * erfc((row.value - bound) / (u * std::f64::consts::SQRT_2));
    (below(max) - below(min)).clamp(0.0, 1.0)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::reading::rows::Budget;
    use crate::reading::synthetic;

    fn decided(value: f64, u: f64) -> Verdict {
        let mut book = Book::default();
        book.result("launch_speed", value, "m/s", Budget::default().with("noise", u), "test");
        verdicts(&synthetic::rig(), &book).swap_remove(0)
    }

    // Standard normal table: Φ(1) = 0.841345, Φ(2) = 0.977250 (any handbook of statistics).
    #[test]
    fn a_window_of_15_to_18_is_met_missed_or_not_decidable_by_its_probability() {
        for (value, u, decision, probability) in [
            (16.0, 0.1, Decision::Met, 1.0),
            (18.0, 0.1, Decision::NotDecidable, 0.5),
            (17.8, 0.2, Decision::NotDecidable, 0.841_345),
            (17.6, 0.2, Decision::Met, 0.977_250),
            (18.4, 0.2, Decision::Missed, 0.022_750),
            (14.0, 0.0, Decision::Missed, 0.0),
        ] {
            let found = decided(value, u);
            assert_eq!(found.decision, decision, "{found:?}");
            assert!((found.probability.unwrap() - probability).abs() < 1e-5, "{found:?}");
        }
    }

    #[test]
    fn what_is_absent_decides_nothing_and_says_why() {
        let mut book = Book::default();
        book.absent("max_tension", "no channel with role release_line_tension");
        let found = verdicts(&synthetic::rig(), &book);
        let tension = found.iter().find(|verdict| verdict.name == "tension_limit").unwrap();
        assert_eq!((tension.decision, tension.probability), (Decision::NotDecidable, None));
        assert!(tension.why.contains("no channel with role"), "{tension:?}");
    }
}
