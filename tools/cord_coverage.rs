//! How often a cord card's band holds the truth, over many lots of virtual cords with a hidden law and scatter.
//!
//!     cargo run --example cord-coverage -- 100 1      seeds 1 to 100
//!     cargo run --example cord-coverage -- 100 101    fresh seeds beside them
//!
//! Five cords each. Prints Markdown: at each elongation how many of the lots' 95 % intervals hold the truth, and their mean
//! half-width over the tension; of the lot's mean, and of a further cord that nobody tested. Exit code 1 where a share over all
//! elongations lies outside 90 to 99 % (of fifty lots and more), or a lot could not be made.

use std::process::ExitCode;

use tautrail::calibration::cord::{BandPoint, Characterised, characterise};
use tautrail::estimation::Random;
use tautrail::rig::CordSheet;

#[path = "../tests/support/virtual_lot.rs"]
mod virtual_lot;
use virtual_lot::{VirtualCord, sheet};

const N_CORDS: usize = 5;
const PLACES: usize = 10;
/// Of fewer a share says nothing.
const LEAST_LOTS: u64 = 50;
const NAMES: [&str; 4] =
    ["lot's mean, loading", "lot's mean, unloading", "a further cord, loading", "a further cord, unloading"];

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

    fn with(self, other: Self) -> Self {
        Self { hits: self.hits + other.hits, all: self.all + other.all, width: self.width + other.width }
    }

    fn percent(self) -> f64 {
        100.0 * f64::from(self.hits) / f64::from(self.all)
    }

    fn cell(self) -> String {
        format!("{} of {}, ± {:.2} %", self.hits, self.all, 100.0 * self.width / f64::from(self.all))
    }
}

type Tallies = [[Tally; NAMES.len()]; PLACES];

fn main() -> ExitCode {
    let mut numbers = std::env::args().skip(1).map(|text| text.parse::<u64>());
    let (Some(Ok(n)), Some(Ok(first))) = (numbers.next(), numbers.next()) else {
        eprintln!("usage: cord-coverage N FIRST_SEED");
        return ExitCode::from(2);
    };
    let mut tallies = Tallies::default();
    let mut inside = true;
    for seed in first..first + n {
        match lot(seed) {
            Ok(made) => tally(&mut tallies, &made, seed),
            Err(why) => {
                eprintln!("seed {seed}: {why}");
                inside = false;
            }
        }
    }
    println!("Seeds {first} to {}.\n", first + n - 1);
    println!("| elongation, share of the tested | {} |", NAMES.join(" | "));
    println!("| --- | --- | --- | --- | --- |");
    let mut whole = [Tally::default(); NAMES.len()];
    for (place, row) in tallies.iter().enumerate() {
        whole.iter_mut().zip(row).for_each(|(sum, one)| *sum = sum.with(*one));
        println!("| {} % | {} |", 100 * (place + 1) / PLACES, row.map(Tally::cell).join(" | "));
    }
    println!("| all | {} |", whole.map(Tally::cell).join(" | "));
    inside &= n < LEAST_LOTS || whole.iter().all(|one| (90.0..=99.0).contains(&one.percent()));
    if inside { ExitCode::SUCCESS } else { ExitCode::FAILURE }
}

fn lot(seed: u64) -> Result<Characterised, String> {
    let (toml, csv) = sheet(seed, N_CORDS);
    let (read, findings) = CordSheet::read(&toml, Some(&csv));
    let read = read.ok_or_else(|| format!("{findings:?}"))?;
    characterise(&read).map_err(|error| error.to_string())
}

fn tally(tallies: &mut Tallies, made: &Characterised, seed: u64) {
    let further = VirtualCord::drawn(&mut Random::new(seed, 77));
    let mean = |at: &BandPoint| at.mean.expanded(0.95);
    let one = |at: &BandPoint| at.one_cord.expanded(0.95);
    for (place, row) in tallies.iter_mut().enumerate() {
        let e = made.tested_to * (place + 1) as f64 / PLACES as f64;
        let (out, back) = (made.loading.band(e), made.unloading.band(e));
        row[0].add(out.tension_n, mean(&out), mean_n(e, VirtualCord::loading_n));
        row[1].add(back.tension_n, mean(&back), mean_n(e, VirtualCord::unloading_n));
        row[2].add(out.tension_n, one(&out), further.loading_n(e));
        row[3].add(back.tension_n, one(&back), further.unloading_n(e));
    }
}

/// The lot's mean tension, by many cords.
fn mean_n(elongation: f64, law: impl Fn(VirtualCord, f64) -> f64) -> f64 {
    let mut random = Random::new(987_654, 1);
    let n = 300;
    (0..n).map(|_| law(VirtualCord::drawn(&mut random), elongation)).sum::<f64>() / f64::from(n)
}
