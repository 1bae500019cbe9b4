//! How often a cell's calibration covers the truth, over seeds of the virtual bench, in virtual time.
//!
//!     cargo run --example cell-coverage -- 100 1      seeds 1 to 100
//!     cargo run --example cell-coverage -- 100 101    fresh seeds beside them
//!
//! Every seed has its own hidden errors of masses, gravity, air and cell. The calibration is made as the guided one is: each
//! reading is waited for until it settles. Then the cell is mounted anew, tared, and loaded with true forces it never saw.
//! Prints Markdown: coverage with widths, mean errors of either way, and what the budget is made of.

use std::process::ExitCode;

use tautrail::calibration::cell::{CellCalibration, Share, calibrate};
use tautrail::calibration::{Settled, Settling, SettlingRule, Told, cell_record, to_value};
use tautrail::rig::{CalibrationRecord, Sheet, SheetReading};
use virtual_rig::weights::{self, WeightBench};

const SHARES: [f64; 4] = [0.1, 0.25, 0.5, 0.95];
const RANGE_N: f64 = 785.0;

fn sheet_text() -> String {
    use weights::*;
    let mut text = format!(
        "kind = \"cell\"\nchannel = \"line\"\nsensor = \"invented cell\"\nperson = \"rig engineer\"\ndate = \"2031-05-04\"\n\
         valid_until = \"2032-05-04\"\ninvented = true\ndrift_per_year = \"0.05 %\"\nmasses_common_uncertainty = \"{} %\"\n\
         [place]\ngravity = \"{GRAVITY_MPS2} m/s2\"\ngravity_uncertainty = \"{GRAVITY_UNCERTAINTY_MPS2} m/s2\"\n\
         air_density = \"{AIR_KG_PER_M3} kg/m3\"\nair_density_uncertainty = \"{AIR_UNCERTAINTY_KG_PER_M3} kg/m3\"\n",
        100.0 * COMMON_RELATIVE
    );
    for index in 0..N_MASSES {
        text.push_str(&format!(
            "[[mass]]\nname = \"M{index}\"\nmass = \"{NOMINAL_KG} kg\"\nuncertainty = \"{MASS_UNCERTAINTY_KG} kg\"\n\
             density = \"{DENSITY_KG_PER_M3} kg/m3\"\n"
        ));
    }
    text
}

fn settle(bench: &mut WeightBench) -> Result<Settled, String> {
    let mut settling = Settling::new(SettlingRule { span_s: 3.0, still_counts: 34.0 });
    for _ in 0..3600 {
        let telling = bench.tell();
        let told = Told {
            host_ns: (telling.time_s * 1e9) as i64,
            n: weights::SAMPLES_PER_TELLING,
            mean: telling.mean_counts,
            sd: Some(telling.sd_counts),
        };
        if let Some(settled) = settling.take(told) {
            return Ok(settled);
        }
    }
    Err("a reading did not settle".to_owned())
}

fn stack(n: usize) -> String {
    if n == 0 { "0".to_owned() } else { (0..n).map(|index| format!("M{index}")).collect::<Vec<_>>().join("+") }
}

/// Four runs up and down (two without turning, two turned), then the greatest load held for five minutes.
fn readings(bench: &mut WeightBench) -> Result<Vec<SheetReading>, String> {
    let mut all = Vec::new();
    let mut read = |bench: &mut WeightBench, run: usize, direction: &str, n: usize, held_s: Option<f64>| {
        let settled = settle(bench)?;
        all.push(SheetReading {
            place: format!("reading {}", all.len()),
            run: run.to_string(),
            rotation_deg: Some([0.0, 0.0, 120.0, 240.0, 240.0][run]),
            direction: direction.to_owned(),
            load: stack(n),
            counts: settled.counts,
            sd_counts: Some(settled.sd_counts),
            n: Some(settled.n as f64),
            held_s,
            excitation_v: None,
        });
        Ok::<(), String>(())
    };
    let hang = |bench: &mut WeightBench, n: usize| {
        let force_n = bench.weight_n(&(0..n).collect::<Vec<_>>());
        bench.hang_n(force_n);
    };
    for run in 0..4 {
        bench.mount();
        let ways = (0..=weights::N_MASSES).map(|n| ("up", n)).chain((0..weights::N_MASSES).rev().map(|n| ("down", n)));
        for (direction, n) in ways {
            hang(bench, n);
            read(bench, run, direction, n, None)?;
        }
    }
    bench.mount();
    read(bench, 4, "up", 0, None)?;
    hang(bench, weights::N_MASSES);
    read(bench, 4, "up", weights::N_MASSES, None)?;
    bench.pass(30.0);
    read(bench, 4, "creep", weights::N_MASSES, Some(30.0))?;
    bench.pass(270.0);
    read(bench, 4, "creep", weights::N_MASSES, Some(300.0))?;
    Ok(all)
}

#[derive(Default)]
struct Tally {
    errors_n: Vec<f64>,
    by_budget: usize,
    by_record: usize,
    budget_widths_n: Vec<f64>,
    record_widths_n: Vec<f64>,
    /// Found minus true, rising and falling.
    signed_n: [Vec<f64>; 2],
    /// Standard uncertainties of each share, summed over the seeds.
    shares_n: Vec<(&'static str, f64)>,
}

impl Tally {
    fn add_shares(&mut self, shares: &[Share]) {
        if self.shares_n.is_empty() {
            self.shares_n = shares.iter().map(|share| (share.source, 0.0)).collect();
        }
        for (sum, share) in self.shares_n.iter_mut().zip(shares) {
            sum.1 += share.component.standard_uncertainty;
        }
    }
}

/// Uses the calibrated cell: mounted anew, tared, loaded on either way for some time.
fn use_it(
    bench: &mut WeightBench,
    calibration: &CellCalibration,
    record: &CalibrationRecord,
    tallies: &mut [Tally],
) -> Result<(), String> {
    for (share, tally) in SHARES.iter().zip(tallies) {
        bench.mount();
        let mut coefficients = record.coefficients.clone();
        coefficients.zero_counts = settle(bench)?.counts;
        let falling = bench.even(0.0, 1.0) < 0.5;
        if falling {
            bench.hang_n(RANGE_N);
            bench.pass(10.0);
        }
        let force_n = share * RANGE_N;
        bench.hang_n(force_n);
        let held_s = bench.even(5.0, 60.0);
        bench.pass(held_s);
        let counts = settle(bench)?.counts;
        let found_n = to_value(&coefficients, counts);
        let error_n = (found_n - force_n).abs();
        let untared_n = (to_value(&record.coefficients, counts) - force_n).abs();
        let of_budget = calibration.budget.at(counts - coefficients.zero_counts, found_n);
        let budget_n = of_budget.expanded_n;
        tally.add_shares(&of_budget.shares);
        tally.signed_n[usize::from(falling)].push(found_n - force_n);
        let record_n = 1.96 * tautrail::calibration::value_uncertainty(&coefficients, found_n);
        tally.errors_n.push(error_n);
        tally.by_budget += usize::from(error_n <= budget_n);
        tally.by_record += usize::from(untared_n <= record_n);
        tally.budget_widths_n.push(budget_n);
        tally.record_widths_n.push(record_n);
    }
    Ok(())
}

fn one(seed: u64, tallies: &mut [Tally]) -> Result<(), String> {
    let mut bench = WeightBench::new(seed);
    let text = sheet_text();
    let (sheet, findings) = Sheet::read(&text);
    let mut sheet = sheet.ok_or_else(|| format!("{findings:?}"))?;
    sheet.readings = readings(&mut bench)?;
    let calibration = calibrate(&sheet).map_err(|error| error.to_string())?;
    let written = cell_record(&sheet, &calibration, &text);
    let (record, findings) = CalibrationRecord::read("line.toml", &written);
    let record = record.ok_or_else(|| format!("{findings:?}"))?;
    use_it(&mut bench, &calibration, &record, tallies)
}

/// Mean error of either way, and the budget's mean shares.
fn made_of(tallies: &[Tally; SHARES.len()], n: u64) {
    let sources: Vec<&str> = tallies[0].shares_n.iter().map(|share| share.0).collect();
    println!("\nMean errors, and mean standard uncertainties of the budget's shares, N.\n");
    println!("| force, N | error rising | error falling | {} |", sources.join(" | "));
    println!("| --- | --- | --- |{}", " --- |".repeat(sources.len()));
    for (share, tally) in SHARES.iter().zip(tallies) {
        let mean = |values: &[f64]| values.iter().sum::<f64>() / values.len() as f64;
        let [rising, falling] = [&tally.signed_n[0], &tally.signed_n[1]].map(|values| mean(values));
        let shares: Vec<String> = tally.shares_n.iter().map(|(_, sum)| format!("{:.3}", sum / n as f64)).collect();
        println!("| {:.0} | {rising:+.3} | {falling:+.3} | {} |", share * RANGE_N, shares.join(" | "));
    }
}

fn main() -> ExitCode {
    let mut numbers = std::env::args().skip(1).map(|text| text.parse::<u64>());
    let (Some(Ok(n)), Some(Ok(first))) = (numbers.next(), numbers.next()) else {
        eprintln!("usage: cell-coverage N FIRST_SEED");
        return ExitCode::from(2);
    };
    let mut tallies: [Tally; SHARES.len()] = Default::default();
    for seed in first..first + n {
        if let Err(why) = one(seed, &mut tallies) {
            eprintln!("seed {seed}: {why}");
            return ExitCode::FAILURE;
        }
    }
    println!("Seeds {first} to {}.\n", first + n - 1);
    println!(
        "| force, N | tared, covered by the budget | not tared, by the record | 95 % of errors below, N | mean half-width of the budget, N | of the record, N |"
    );
    println!("| --- | --- | --- | --- | --- | --- |");
    let all = SHARES.len() as u64 * n;
    let (budget, record) = tallies.iter().fold((0, 0), |sum, t| (sum.0 + t.by_budget, sum.1 + t.by_record));
    for (share, tally) in SHARES.iter().zip(&mut tallies) {
        tally.errors_n.sort_by(f64::total_cmp);
        let at_95 = tally.errors_n[(tally.errors_n.len() * 95).div_ceil(100).saturating_sub(1)];
        let mean = |values: &[f64]| values.iter().sum::<f64>() / values.len() as f64;
        println!(
            "| {:.0} | {} of {n} | {} of {n} | {at_95:.3} | {:.3} | {:.3} |",
            share * RANGE_N,
            tally.by_budget,
            tally.by_record,
            mean(&tally.budget_widths_n),
            mean(&tally.record_widths_n)
        );
    }
    println!("| all | {budget} of {all} | {record} of {all} | | | |");
    made_of(&tallies, n);
    ExitCode::SUCCESS
}
