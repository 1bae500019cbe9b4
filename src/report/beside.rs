//! The replay beside the measurement: modelled motion, residuals, and what they amount to.

use super::page::{MotionCurve, ResidualTrace, TrialPage};
use crate::replay::{Replay, ReplayError, Residuals};

/// Adds a replay to a page, or the reason why there is none.
pub fn add_replay(page: &mut TrialPage, replay: &Result<Replay, ReplayError>) {
    match replay {
        Ok(replay) => {
            if let Some(motion) = &mut page.motion {
                motion.modelled = Some(modelled(replay));
            }
            page.residuals = replay.residuals.iter().map(trace).collect();
            page.residual_sentence = replay.sentence.clone();
        }
        Err(reason) => page.residual_sentence = in_full(reason),
    }
}

fn in_full(error: &ReplayError) -> String {
    let mut text = error.to_string();
    let mut cause = std::error::Error::source(error);
    while let Some(error) = cause {
        text.push_str(&format!(": {error}"));
        cause = error.source();
    }
    text
}

fn modelled(replay: &Replay) -> MotionCurve {
    let course = &replay.course;
    MotionCurve {
        x_m: course.x_m.clone(),
        v_mps: course.v_mps.clone(),
        a_mps2: course.a_mps2.clone(),
        u_v_mps: course.u_v_mps.clone(),
        u_a_mps2: course.u_a_mps2.clone(),
    }
}

fn trace(residuals: &Residuals) -> ResidualTrace {
    let time_s = &residuals.time_s;
    let steps: Vec<f64> = time_s.windows(2).map(|pair| pair[1] - pair[0]).collect();
    ResidualTrace {
        quantity: residuals.quantity.clone(),
        unit: residuals.unit.clone(),
        time_s: time_s.clone(),
        residual: residuals.residual.clone(),
        uncertainty: residuals.u.clone(),
        step_s: median(steps),
        bias: residuals.bias,
        rms: residuals.rms,
        largest: residuals.max,
        largest_at_s: residuals.max_at_s,
        largest_at_x_m: Some(residuals.max_at_x_m),
    }
}

fn median(mut steps: Vec<f64>) -> f64 {
    steps.sort_by(f64::total_cmp);
    steps.get(steps.len() / 2).copied().unwrap_or(f64::INFINITY)
}
