//! Bench section `clock`: how far clock maps are off after 30 s at 100 ppm, and whether their stated uncertainty covers
//! it, over seeds 1 to N and, as a check that none was chosen, N+1 to 2N. N is 200, or the first argument.

#![allow(clippy::unwrap_used, reason = "a bench that cannot go on stops here")]

use tautrail::capture::{BlockTimes, ClockPiece, LiveClock, NominalClock, TimeExchange, fit_clock, piece_at};

#[path = "../../tests/support/clock_line.rs"]
mod line;

use line::{CRYSTAL, Link, errors_of, live, sealed};

const N: u64 = 200;

fn main() {
    let n = std::env::args().nth(1).map_or(N, |text| text.parse().unwrap());
    let silent = Link { requests_per_s: 0.0, ..CRYSTAL };
    let batched = |link: Link| Link { batch_s: 0.016, ..link };
    let resonator = |link: Link, offset_ppm: f64| Link { offset_ppm, tolerance_ppm: 10_000.0, ..link };
    let hidden = |link: Link, hidden_up_s: f64| Link { hidden_up_s, ..link };
    // Name, line, limit of the 95th percentile in us apart from the asymmetry (none where the line cannot give it).
    let cases = [
        ("requests", CRYSTAL, Some(100.0)),
        ("requests_unbatched", Link { batch_s: 0.0, ..CRYSTAL }, Some(100.0)),
        ("requests_16ms", batched(CRYSTAL), Some(100.0)),
        ("requests_hidden_1ms", hidden(CRYSTAL, 0.001), Some(100.0)),
        ("requests_hidden_2ms", hidden(CRYSTAL, 0.002), Some(100.0)),
        ("requests_hidden_down_2ms", Link { hidden_down_s: 0.002, ..CRYSTAL }, Some(100.0)),
        ("requests_resonator_slow", resonator(CRYSTAL, -10_000.0), Some(100.0)),
        ("requests_resonator_fast", resonator(CRYSTAL, 10_000.0), Some(100.0)),
        ("requests_wander", Link { wander_ppm: 2.0, ..CRYSTAL }, Some(100.0)),
        ("arrivals_1ms", silent, Some(500.0)),
        ("arrivals_1ms_resonator_slow", resonator(silent, -10_000.0), Some(500.0)),
        ("arrivals_1ms_resonator_fast", resonator(silent, 10_000.0), Some(500.0)),
        ("arrivals_16ms_swept", Link { block_every_s: 0.009_9, ..batched(silent) }, Some(500.0)),
        ("arrivals_16ms", batched(silent), None),
        ("arrivals_hidden_1ms", hidden(silent, 0.001), None),
        ("arrivals_hidden_2ms", hidden(silent, 0.002), None),
        ("arrivals_16ms_hidden_2ms", hidden(batched(silent), 0.002), None),
    ];
    for (half, seeds) in [("seeds_1_N", 1..=n), ("seeds_N1_2N", n + 1..=2 * n)] {
        for (name, link, limit_us) in cases {
            for (kind, map) in [("sealed", sealed as fn(&Link, u64) -> Vec<(u64, ClockPiece)>), ("live", live)] {
                let errors = errors_of(link, seeds.clone(), map);
                let name = format!("clock_{kind}_{name}_{half}");
                let target = limit_us.map_or("-".to_owned(), |limit_us: f64| format!("{limit_us}"));
                let (p95_us, u_us) = (errors.p95_ns * 1e-3, errors.mean_u_ns * 1e-3);
                println!(
                    "figure {name}_p95 value={p95_us:.1} unit=us reference={u_us:.1} ratio={:.2} target={target}",
                    p95_us / u_us
                );
                println!(
                    "figure {name}_covered value={:.3} unit=share reference=0.95 ratio=- target=0.95",
                    errors.covered
                );
            }
        }
    }
}
