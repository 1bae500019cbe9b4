//! Readings sorted by cord and cycle, and the order they must have been taken in.

use super::error::CordError;
use crate::rig::{CordBranch, CordReading};

/// One cycle of one cord, in the order of the table.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Cycle<'a> {
    pub(super) cord: usize,
    pub(super) cycle: u32,
    pub(super) readings: Vec<&'a CordReading>,
}

impl Cycle<'_> {
    pub(super) fn of(&self, branch: CordBranch) -> impl Iterator<Item = &CordReading> {
        self.readings.iter().copied().filter(move |reading| reading.branch == branch)
    }

    pub(super) fn furthest(&self) -> f64 {
        self.of(CordBranch::Load).map(|reading| reading.elongation).fold(0.0, f64::max)
    }
}

/// Serials in the order they first appear.
pub(super) fn serials(readings: &[CordReading]) -> Vec<String> {
    let mut serials: Vec<String> = Vec::new();
    for reading in readings {
        if !serials.contains(&reading.serial) {
            serials.push(reading.serial.clone());
        }
    }
    serials
}

/// Cycles of all cords, checked for their order.
pub(super) fn cycles<'a>(readings: &'a [CordReading], serials: &[String]) -> Result<Vec<Cycle<'a>>, CordError> {
    let mut cycles: Vec<Cycle<'a>> = Vec::new();
    for reading in readings {
        for (what, value) in [("force", reading.tension_n), ("elongation", reading.elongation)] {
            if !value.is_finite() {
                return Err(CordError::NotFinite { line: reading.line, what });
            }
        }
        let Some(cord) = serials.iter().position(|serial| *serial == reading.serial) else { continue };
        match cycles.iter_mut().find(|known| known.cord == cord && known.cycle == reading.cycle) {
            Some(known) => known.readings.push(reading),
            None => cycles.push(Cycle { cord, cycle: reading.cycle, readings: vec![reading] }),
        }
    }
    cycles.iter().try_for_each(in_order)?;
    Ok(cycles)
}

/// Time goes on, branches follow each other, and a load step goes up in force or length. A reading of which only one goes the
/// wrong way is a slip of the pen, to be flagged later; where both do, rows were swapped.
fn in_order(cycle: &Cycle<'_>) -> Result<(), CordError> {
    for pair in cycle.readings.windows(2) {
        let (before, this) = (pair[0], pair[1]);
        let wrong = |what: String| {
            Err(CordError::Order { line: this.line, serial: this.serial.clone(), cycle: this.cycle, what })
        };
        if let (Some(earlier), Some(later)) = (before.time_s, this.time_s)
            && later < earlier
        {
            return wrong(format!("its time, {later:.1} s, is before that of the reading above, {earlier:.1} s"));
        }
        let rank = |branch: CordBranch| match branch {
            CordBranch::Load => 0,
            CordBranch::Hold => 1,
            CordBranch::Unload => 2,
        };
        // Holds may stand between load steps; nothing is loaded again once it was unloaded.
        if before.branch == CordBranch::Unload && rank(this.branch) < 2 {
            return wrong(format!("{:?} follows \"unload\" within one cycle", this.branch.word()));
        }
        if before.branch == this.branch && this.branch != CordBranch::Hold {
            let sign = if this.branch == CordBranch::Load { 1.0 } else { -1.0 };
            let step_n = sign * (this.tension_n - before.tension_n);
            let step = sign * (this.elongation - before.elongation);
            if step_n < 0.0 && step < 0.0 {
                let way = if sign > 0.0 { "falls" } else { "rises" };
                return wrong(format!(
                    "on the {} branch it {way} from {:.2} N at {:.1} % to {:.2} N at {:.1} %",
                    this.branch.word(),
                    before.tension_n,
                    100.0 * before.elongation,
                    this.tension_n,
                    100.0 * this.elongation
                ));
            }
        }
    }
    Ok(())
}
