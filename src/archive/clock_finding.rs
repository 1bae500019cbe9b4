//! Whether a device's clock kept to what the device states of it, over a whole trial.

use crate::capture::{BlockTimes, NominalClock, TimeBase};

/// Arrivals are late by what ports and schedulers please, the earliest of a second by little.
const WINDOW_S: f64 = 1.0;
/// How much the earliest arrivals of two windows may differ in lateness (USB adapters hold bytes back for up to 16 ms:
/// field experience, no published source).
const LATENESS_S: f64 = 0.02;
/// Added to what a device states.
const MARGIN_PPM: f64 = 100.0;
/// Shorter stretches say too little.
const SPAN_S_MIN: f64 = 5.0;

/// A sentence where the clock broke its stated tolerance in any boot; `arrivals` are in order of arrival.
pub(super) fn broken_tolerance(device: &str, nominal: NominalClock, arrivals: &[BlockTimes]) -> Option<String> {
    if nominal.time_base != TimeBase::Ticks {
        return None;
    }
    let of_boots = arrivals.chunk_by(|a, b| a.boot_id == b.boot_id);
    let worst =
        of_boots.filter_map(|arrivals| fast_ppm(nominal, arrivals)).max_by(|a, b| a.abs().total_cmp(&b.abs()))?;
    Some(format!(
        "{device}: its clock ran {}, it states {} ppm: times of its samples are worse than stated, some may have none; \
         check the tick rate that it describes",
        fast(worst),
        nominal.tolerance_ppm
    ))
}

/// "10.00 % fast" or "312 ppm slow".
pub(super) fn fast(ppm: f64) -> String {
    let way = if ppm > 0.0 { "fast" } else { "slow" };
    if ppm.abs() >= 1e4 { format!("{:.2} % {way}", ppm.abs() * 1e-4) } else { format!("{:.0} ppm {way}", ppm.abs()) }
}

/// By how much the clock runs fast, where both halves of the stretch say that it breaks its tolerance. One half alone may
/// hold a host that was suspended.
fn fast_ppm(nominal: NominalClock, arrivals: &[BlockTimes]) -> Option<f64> {
    let (first, last) = (arrivals.first()?.sent_tick, arrivals.last()?.sent_tick);
    let span_s = last.checked_sub(first)? as f64 / nominal.tick_rate_hz;
    if span_s < SPAN_S_MIN {
        return None;
    }
    let window = (WINDOW_S * nominal.tick_rate_hz) as u64;
    let middle = first + (last - first) / 2;
    let at = |from: u64| least_lateness_s(nominal, arrivals, from..from.saturating_add(window));
    let (start, middle, end) = (at(first)?, at(middle)?, at(last.saturating_sub(window))?);
    let beyond = |from: (f64, f64), to: (f64, f64)| {
        let span_s = to.0 - from.0;
        let gained = (to.1 - from.1) / span_s; // by the host, a second of device time
        let ppm = (1.0 / (1.0 + gained) - 1.0) * 1e6;
        (ppm.abs() > nominal.tolerance_ppm + MARGIN_PPM + LATENESS_S / span_s * 1e6).then_some(ppm)
    };
    let halves = (beyond(start, middle)?, beyond(middle, end)?);
    (halves.0 * halves.1 > 0.0).then(|| beyond(start, end)).flatten()
}

/// Device time and lateness of the window's earliest arrival, by the nominal rate, both against the stretch's first.
fn least_lateness_s(nominal: NominalClock, arrivals: &[BlockTimes], ticks: std::ops::Range<u64>) -> Option<(f64, f64)> {
    let zero = arrivals.first()?;
    let within = arrivals.iter().filter(|arrival| ticks.contains(&arrival.sent_tick));
    let places = within.map(|arrival| {
        let device_s = arrival.sent_tick.saturating_sub(zero.sent_tick) as f64 / nominal.tick_rate_hz;
        let host_s = arrival.host_ns.saturating_sub(zero.host_ns) as f64 * 1e-9;
        (device_s, host_s - device_s)
    });
    places.min_by(|a, b| a.1.total_cmp(&b.1))
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Blocks every 16 ms, late by 0 to 16 ms; the host's clock stands still for `suspended_s` after 20 s.
    fn arrivals(true_rate: f64, n: u64, suspended_s: f64) -> Vec<BlockTimes> {
        let block = |k: u64| {
            let true_s = k as f64 * 0.016;
            let late_s = 0.016 * ((k * 7) % 13) as f64 / 13.0;
            let away_s = if true_s > 20.0 { suspended_s } else { 0.0 };
            let sent_tick = (true_s * true_rate) as u64;
            BlockTimes { boot_id: 1, sent_tick, host_ns: ((true_s + late_s - away_s) * 1e9) as i64 }
        };
        (0..n).map(block).collect()
    }

    fn said(true_rate: f64, seconds: u64, suspended_s: f64) -> Option<String> {
        let n = seconds * 1000 / 16;
        broken_tolerance("winch-node", NominalClock::ticking(1e6, 50.0), &arrivals(true_rate, n, suspended_s))
    }

    #[test]
    fn a_clock_that_breaks_its_tolerance_is_told_with_its_rate() {
        assert!(said(1.1e6, 30, 0.0).unwrap().contains("ran 10.0"), "{:?}", said(1.1e6, 30, 0.0));
        assert!(said(0.97e6, 30, 0.0).unwrap().contains("% slow"));
        assert!(said(1.003e6, 60, 0.0).unwrap().contains("ppm fast"), "{:?}", said(1.003e6, 60, 0.0));
    }

    #[test]
    fn late_blocks_and_a_suspended_host_are_no_broken_clock() {
        assert_eq!(said(1.000_04e6, 60, 0.0), None);
        assert_eq!(said(1.000_04e6, 30, 3.0), None);
        assert_eq!(said(1.1e6, 4, 0.0), None, "too short to tell");
    }
}
