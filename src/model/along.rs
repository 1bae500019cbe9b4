//! What a step runs in: time, or a state component that it has to end at a given value of.

use super::integrate::Step;
use super::system::System;

/// What a step runs in.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Along {
    Time,
    /// State component; its place in the vector holds the time meanwhile.
    Component(usize),
}

#[inline]
pub fn rates_along<const N: usize>(system: &System, i: usize, s: f64, y: &[f64; N]) -> [f64; N] {
    let mut state = *y;
    state[i] = s;
    divided(system.rates(y[i], &state), i)
}

/// Rates against time to rates against component `i`, whose place then holds the time.
#[inline]
pub fn divided<const N: usize>(rates: [f64; N], i: usize) -> [f64; N] {
    let per = 1.0 / rates[i];
    let mut out = rates.map(|rate| rate * per);
    out[i] = per;
    out
}

pub fn time_slope<const N: usize>(slope: [f64; N], along: Along) -> [f64; N] {
    match along {
        Along::Time => slope,
        Along::Component(i) => divided(slope, i),
    }
}

pub fn state_at_end<const N: usize>(step: &Step<N>, along: Along) -> (f64, [f64; N]) {
    state_of(step.end(), step.to, along)
}

/// Time and state from what a step runs in and its vector there.
pub fn state_of<const N: usize>(s: f64, y: [f64; N], along: Along) -> (f64, [f64; N]) {
    match along {
        Along::Time => (s, y),
        Along::Component(i) => {
            let mut state = y;
            state[i] = s;
            (y[i], state)
        }
    }
}

/// Where in 0 to 1 a function that falls below zero at 1 does so (regula falsi, Illinois form: M. Dowell, P. Jarratt,
/// BIT 11 (1971) 168-174).
pub fn falling_root(f: impl Fn(f64) -> f64) -> f64 {
    let (mut a, mut fa, mut b, mut fb) = (0.0, f(0.0), 1.0, f(1.0));
    if fa <= 0.0 {
        return 0.0;
    }
    for _ in 0..60 {
        let c = b - fb * (b - a) / (fb - fa);
        let fc = f(c);
        if fc * fb < 0.0 {
            (a, fa) = (b, fb);
        } else {
            fa *= 0.5;
        }
        (b, fb) = (c, fc);
        if (b - a).abs() < 1e-14 || fb == 0.0 {
            break;
        }
    }
    b
}
