//! What is followed while the cords are drawn: the forecast of a release now, the misrigging watch, the hold.

use crate::model::planned_peak_ratio;
use crate::rig::Rig;

use super::cord_fit::{CordFit, Misrigged};
use super::forecast;
use super::hold_watch::HoldWatch;
use super::plan::Plan;
use super::state::{CordsFit, HoldNow, Phase, ReleasedNow, ToGo};

/// Ten forecasts a second.
const FORECAST_EVERY_NS: i64 = 100_000_000;
/// How the launch speed goes with the tension is asked once a second.
const SLOPE_EVERY_NS: i64 = 1_000_000_000;

/// The line's level and the shuttle's place at one instant.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Pull {
    pub line_n: f64,
    pub x_m: f64,
}

#[derive(Debug)]
pub struct Drawn {
    /// Peak in CFC 60, the limit's class, over the unfiltered one that the fast model gives: of the planned launch.
    peak_ratio: f64,
    cord_fit: CordFit,
    hold: HoldWatch,
    pub released_now: Option<ReleasedNow>,
    forecast_ns: i64,
    slope_ns: i64,
    /// Launch speed gained for each newton.
    mps_per_n: Option<f64>,
}

impl Drawn {
    pub fn new(rig: &Rig) -> Self {
        Self {
            // Without a plan there is no forecast either.
            peak_ratio: planned_peak_ratio(rig).unwrap_or(1.0),
            cord_fit: CordFit::default(),
            hold: HoldWatch::default(),
            released_now: None,
            forecast_ns: 0,
            slope_ns: 0,
            mps_per_n: None,
        }
    }

    /// A phase began; `from` is the one before.
    pub fn entered(&mut self, from: Phase, to: Phase, host_ns: i64) {
        if to == Phase::WinchBack && matches!(from, Phase::Slack | Phase::Rest | Phase::Unknown) {
            self.cord_fit = CordFit::default();
        }
        if to == Phase::Hold {
            self.hold.begin(host_ns)
        } else {
            self.hold.end()
        }
        if !matches!(to, Phase::WinchBack | Phase::Hold | Phase::LetDown) {
            self.released_now = None;
            self.mps_per_n = None;
        }
    }

    /// Takes what the sensors show; asks the model when it is time.
    pub fn follow(&mut self, rig: &Rig, plan: Option<&Plan>, phase: Phase, pull: Option<Pull>, host_ns: i64) {
        let drawn = matches!(phase, Phase::WinchBack | Phase::Hold | Phase::LetDown);
        if let (Phase::WinchBack, Some(plan), Some(pull)) = (phase, plan, pull) {
            self.cord_fit.take(rig, plan, pull.line_n, rig.draw_m(pull.x_m));
        }
        if let Some(pull) = pull {
            self.hold.take(host_ns, pull.line_n);
        }
        if host_ns - self.forecast_ns < FORECAST_EVERY_NS {
            return;
        }
        self.forecast_ns = host_ns;
        let pull = pull.filter(|_| drawn);
        self.released_now = pull.and_then(|pull| forecast::released_now(rig, pull.line_n, pull.x_m, self.peak_ratio));
        if phase == Phase::Hold && host_ns - self.slope_ns >= SLOPE_EVERY_NS {
            self.slope_ns = host_ns;
            self.mps_per_n = pull.and_then(|pull| forecast::speed_per_newton(rig, pull.line_n, pull.x_m));
        }
    }

    pub fn cords_fit(&self, rig: &Rig) -> Option<CordsFit> {
        self.cord_fit.fit(rig)
    }

    pub fn misrigged(&self, rig: &Rig) -> Option<Misrigged> {
        self.cord_fit.misrigged(rig)
    }

    pub fn hold_now(&self, rig: &Rig) -> Option<HoldNow> {
        let spare_mps = self.released_now.map(|now| now.launch_speed_mps - rig.plan.launch_speed_min_mps);
        let to_lose_n = spare_mps.zip(self.mps_per_n).map(|(spare_mps, mps_per_n)| spare_mps / mps_per_n);
        self.hold.now(to_lose_n)
    }

    /// What is left to draw; none once the plan's draw is reached.
    pub fn to_go(&self, rig: &Rig, plan: Option<&Plan>, phase: Phase, pull: Option<Pull>) -> Option<ToGo> {
        let pull = pull.filter(|_| matches!(phase, Phase::WinchBack | Phase::Hold))?;
        let draw_m = rig.plan.draw_m - rig.draw_m(pull.x_m);
        let tension_n = plan.map(|plan| plan.expected(rig.plan.draw_m).planned_n - pull.line_n);
        (draw_m > 0.0).then_some(ToGo { draw_m, tension_n })
    }
}
