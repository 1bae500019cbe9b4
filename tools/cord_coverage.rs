//! How often a cord card's band holds the truth, over many lots of virtual cords with a hidden law and scatter.
//!
//! `cargo run --example cord-coverage [N]`: seeds 1 to N (100) and N+1 to 2N, five cords each. Prints a Markdown table: share of
//! (lot, elongation) pairs within the 95 % interval, and its mean half-width over the tension. Exit code 1 where a share lies
//! outside 90 to 99 %.

use std::process::ExitCode;

use tautrail::calibration::cord::{BandPoint, Characterised, characterise};
use tautrail::estimation::Random;
use tautrail::rig::CordSheet;

#[path = "../tests/support/virtual_lot.rs"]
mod virtual_lot;
use virtual_lot::{VirtualCord, sheet};

const N_CORDS: usize = 5;
const PLACES: u32 = 10;

/// Hits, trials and sum of relative half-widths.
#[derive(Default, Clone, Copy)]
struct Tally {
    hits: u32,
    all: u32,
    width: f64,
}

impl Tally {
    fn add(&mut self, found_n: f64, half_n: f64, truth_n: f64) {
        self.hits += u32::from((found_n - truth_n).abs() <= half_n);
        self.all += 1;
        self.width += half_n / truth_n;
    }

    fn percent(self) -> f64 {
        100.0 * f64::from(self.hits) / f64::from(self.all)
    }

    fn row(self, name: &str, seeds: &str) -> String {
        let width = 100.0 * self.width / f64::from(self.all);
        format!("| {name} | {seeds} | {:.1} % | ± {width:.2} % |", self.percent())
    }
}

fn main() -> ExitCode {
    let n: u64 = std::env::args().nth(1).and_then(|n| n.parse().ok()).unwrap_or(100);
    println!("| what | seeds | within the 95 % interval | mean half-width |\n| --- | --- | --- | --- |");
    let mut inside = true;
    for (from, to) in [(1, n), (n + 1, 2 * n)] {
        let mut tallies = [Tally::default(); 4];
        for seed in from..=to {
            match lot(seed) {
                Ok(made) => tally(&mut tallies, &made, seed),
                Err(why) => {
                    eprintln!("seed {seed}: {why}");
                    inside = false;
                }
            }
        }
        let names =
            ["lot's mean, loading", "lot's mean, unloading", "a further cord, loading", "a further cord, unloading"];
        for (tally, name) in tallies.iter().zip(names) {
            println!("{}", tally.row(name, &format!("{from}-{to}")));
            inside &= (90.0..=99.0).contains(&tally.percent());
        }
    }
    if inside { ExitCode::SUCCESS } else { ExitCode::FAILURE }
}

fn lot(seed: u64) -> Result<Characterised, String> {
    let (toml, csv) = sheet(seed, N_CORDS);
    let (read, findings) = CordSheet::read(&toml, Some(&csv));
    let read = read.ok_or_else(|| format!("{findings:?}"))?;
    characterise(&read).map_err(|error| error.to_string())
}

fn tally(tallies: &mut [Tally; 4], made: &Characterised, seed: u64) {
    let further = VirtualCord::drawn(&mut Random::new(seed, 77));
    let mean = |at: &BandPoint| at.mean.expanded(0.95);
    let one = |at: &BandPoint| at.one_cord.expanded(0.95);
    for place in 1..=PLACES {
        let e = made.tested_to * f64::from(place) / f64::from(PLACES);
        let (out, back) = (made.loading.band(e), made.unloading.band(e));
        tallies[0].add(out.tension_n, mean(&out), mean_n(e, VirtualCord::loading_n));
        tallies[1].add(back.tension_n, mean(&back), mean_n(e, VirtualCord::unloading_n));
        tallies[2].add(out.tension_n, one(&out), further.loading_n(e));
        tallies[3].add(back.tension_n, one(&back), further.unloading_n(e));
    }
}

/// The lot's mean tension, by many cords.
fn mean_n(elongation: f64, law: impl Fn(VirtualCord, f64) -> f64) -> f64 {
    let mut random = Random::new(987_654, 1);
    let n = 300;
    (0..n).map(|_| law(VirtualCord::drawn(&mut random), elongation)).sum::<f64>() / f64::from(n)
}
