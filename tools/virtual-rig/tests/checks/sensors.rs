//! Sensors inverted with the errors they were given return the truth; the filter for peaks against published values.

use crate::support::{assert_near, number, reference_rows};
use virtual_rig::cfc;
use virtual_rig::device::catalogue::{DeviceSpec, SHUTTLE_CHANNELS, SensorSet, WINCH_CHANNELS, devices};
use virtual_rig::device::drawn_errors;
use virtual_rig::draw::{Draw, Purpose};
use virtual_rig::launcher::{Launcher, STANDARD_GRAVITY_MPS2, north_pier};
use virtual_rig::physics::trajectory::Row;
use virtual_rig::sensor::{ChannelSpec, Errors, OVERSAMPLING, Quantity, Sensor};

const RATE_HZ: f64 = 1e4;
const NO_ERRORS: Errors = Errors { scale_relative: 0.0, zero: 0.0, zero_drift_per_s: 0.0, misalignment_rad: 0.0 };

fn noise() -> Draw {
    Draw::new(5, Purpose::Noise { device: 0, channel: 0 })
}

fn basic_devices() -> Vec<DeviceSpec> {
    devices(SensorSet::Basic, false)
}

/// Mean value that `n` samples of `rig_at` give, after the errors are taken out again.
fn inverted_mean(
    spec: &ChannelSpec,
    errors: &Errors,
    launcher: &Launcher,
    n: usize,
    rig_at: impl Fn(f64) -> Row,
) -> f64 {
    let mut sensor = Sensor::new(*spec, *errors, launcher, noise());
    sensor.restart(RATE_HZ);
    let mut sum = 0.0;
    for idx in 0..n {
        let at_s = idx as f64 / RATE_HZ;
        let rows =
            std::array::from_fn(|back| rig_at(at_s - (OVERSAMPLING - 1 - back) as f64 / RATE_HZ / OVERSAMPLING as f64));
        let indication = spec.scale * (f64::from(sensor.counts(&rows, 0.0)) - spec.zero_counts);
        sum += (indication - errors.zero) / (1.0 + errors.scale_relative);
    }
    sum / n as f64
}

/// What the mean of `n` samples can be off by: noise (5 standard errors) and half a count where noise does not smear the rounding.
fn noise_of_mean(spec: &ChannelSpec, n: usize) -> f64 {
    5.0 * (spec.noise_rms.powi(2) + spec.scale.powi(2) / 12.0).sqrt() / (n as f64).sqrt() + 0.5 * spec.scale
}

#[test]
fn a_still_rig_is_read_back_within_noise_once_the_drawn_errors_are_known() {
    let launcher = north_pier();
    let row = Row { x_m: 1.2345, line_n: 611.3, anchor_n: 607.7, shuttle_a_ground_mps2: 30.0, ..Row::default() };
    for seed in 1..=20 {
        for (idx, device) in basic_devices().iter().enumerate() {
            let errors = drawn_errors(device, idx as u8, seed, None);
            for (spec, errors) in device.channels.iter().zip(&errors) {
                let (sin, cos) = errors.misalignment_rad.sin_cos();
                let across_mps2 = launcher.gravity_mps2 * launcher.incline_rad.cos();
                let truth = match spec.quantity {
                    Quantity::LineTension => row.line_n,
                    Quantity::AnchorTension => row.anchor_n,
                    Quantity::Position => row.x_m,
                    _ => (30.0 + launcher.gravity_along_mps2()) * cos + across_mps2 * sin,
                };
                let found = inverted_mean(spec, errors, &launcher, 2000, |_| row);
                assert_near(&format!("seed {seed}, {}", spec.name), found, truth, noise_of_mean(spec, 2000));
            }
        }
    }
}

/// A ramp comes out late by the group delay that the device states.
#[test]
fn a_ramp_is_late_by_the_stated_group_delay() {
    let (launcher, spec) = (north_pier(), WINCH_CHANNELS[0]);
    let errors = NO_ERRORS;
    let slope_n_per_s = 1e5;
    let n = 100;
    let at = |t_s: f64| Row { line_n: slope_n_per_s * (t_s + 1.0), ..Row::default() };
    let mean_of_truth_n = slope_n_per_s * (1.0 + 0.5 * (n - 1) as f64 / RATE_HZ);
    // A filter that starts at rest has its transient in the first dozen samples: give it twenty before.
    let late = |t_s: f64| at(t_s.max(0.0));
    let found_n = inverted_mean(&ChannelSpec { counts_max: f64::MAX, ..spec }, &errors, &launcher, n, late);
    let delay_s = (mean_of_truth_n - found_n) / slope_n_per_s;
    assert_near("delay", delay_s, spec.group_delay_s(), 5e-6);
}

#[test]
fn seeds_draw_scale_and_zero_errors_of_the_stated_spread() {
    let spread = WINCH_CHANNELS[0].spread;
    let errors: Vec<Errors> = (1..=400).map(|seed| drawn_errors(&basic_devices()[0], 0, seed, None)[0]).collect();
    let rms = |value: fn(&Errors) -> f64| {
        (errors.iter().map(|errors| value(errors).powi(2)).sum::<f64>() / errors.len() as f64).sqrt()
    };
    assert_near("scale", rms(|errors| errors.scale_relative) / spread.scale_relative, 1.0, 0.15);
    assert_near("zero", rms(|errors| errors.zero) / spread.zero, 1.0, 0.15);
}

#[test]
fn an_accelerometer_clips_at_its_range() {
    let launcher = north_pier();
    let errors = NO_ERRORS;
    let spec = ChannelSpec { counts_max: 6.0 * 800.0, ..SHUTTLE_CHANNELS[1] };
    let hard = Row { shuttle_a_ground_mps2: 9.0 * STANDARD_GRAVITY_MPS2, ..Row::default() };
    let mut sensor = Sensor::new(spec, errors, &launcher, noise());
    assert_eq!(sensor.counts(&[hard; OVERSAMPLING], 0.0), 4800);
}

/// `tests/reference/cfc180_10khz_signal.csv`, column `y_hold` (SAE J211-1 / ISO 6487; equals SciPy's filtfilt).
#[test]
fn the_peak_filter_follows_the_published_algorithm_sample_by_sample() {
    let rows = reference_rows("cfc180_10khz_signal.csv");
    let values: Vec<f64> = rows.iter().map(|row| number(row, 1)).collect();
    let filtered = cfc::filtered(&values, 180.0, 1e4);
    for (row, found) in rows.iter().zip(filtered) {
        assert_near(&format!("at {} s", row[0]), found, number(row, 3), 1e-10);
    }
}
