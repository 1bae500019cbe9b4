//! Named scenarios: which launcher, what the crew does with it, what goes wrong.

use crate::launcher::{Launcher, north_pier};
use crate::physics::winch::Ripple;

/// A rig and what is done with it. Times are at pace 1.
#[derive(Debug, Clone)]
pub struct Scenario {
    pub name: &'static str,
    pub about: &'static str,
    pub launcher: Launcher,
    pub slack_s: f64,
    pub draw_speed_mps: f64,
    pub draw_m: f64,
    pub hold_s: f64,
    pub rest_s: f64,
    pub ripple: Ripple,
}

fn nominal() -> Scenario {
    Scenario {
        name: "nominal",
        about: "six cords, survey-8, drawn 4.0 m, held, released",
        launcher: north_pier(),
        slack_s: 3.0,
        draw_speed_mps: 0.35,
        draw_m: 4.0,
        hold_s: 5.0,
        rest_s: 6.0,
        ripple: Ripple { relative: 0.01, frequency_hz: 3.0 },
    }
}

/// Every scenario, in the order of the document.
pub fn all() -> Vec<Scenario> {
    vec![nominal()]
}

pub fn by_name(name: &str) -> Option<Scenario> {
    all().into_iter().find(|scenario| scenario.name == name)
}
