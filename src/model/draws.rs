//! Drawn launches, a column for each number, so that a million of them fit: 8 bytes a number and draw.

use super::energy::EnergySplit;
use super::forecast::ForecastOptions;
use super::quantities::{N_QUANTITIES, Outcome};

const N_ENERGIES: usize = EnergySplit::N_TERMS;
const N_COLUMNS: usize = N_QUANTITIES + N_ENERGIES;

/// One drawn launch; none where the draw can't be launched.
#[derive(Debug, Clone, Copy)]
pub struct Draw {
    pub outcome: Option<Outcome>,
    pub energy: Option<EnergySplit>,
}

/// All drawn launches.
#[derive(Debug)]
pub struct Draws {
    /// Quantities, then energies in the order of [`EnergySplit::terms`]; NaN where a draw has none.
    columns: [Vec<f64>; N_COLUMNS],
    at_end_stop: Vec<bool>,
}

impl Draws {
    /// Makes every draw on all threads, each at its own place.
    pub fn made(options: ForecastOptions, make: impl Fn(u64) -> Draw + Sync) -> Self {
        let n = options.draws as usize;
        let mut draws = Self { columns: std::array::from_fn(|_| vec![f64::NAN; n]), at_end_stop: vec![false; n] };
        let part = n.div_ceil(options.threads.max(1)).max(1);
        let make = &make;
        std::thread::scope(|scope| {
            for (index, mut rows) in draws.parts(part).into_iter().enumerate() {
                scope.spawn(move || {
                    for row in 0..rows.at_end_stop.len() {
                        rows.put(row, &make((index * part + row) as u64));
                    }
                });
            }
        });
        draws
    }

    fn parts(&mut self, part: usize) -> Vec<Rows<'_>> {
        let mut chunks: Vec<_> = self.columns.iter_mut().map(|column| column.chunks_mut(part)).collect();
        let with_columns =
            |at_end_stop| Rows { columns: chunks.iter_mut().filter_map(Iterator::next).collect(), at_end_stop };
        self.at_end_stop.chunks_mut(part).map(with_columns).collect()
    }

    pub fn len(&self) -> usize {
        self.at_end_stop.len()
    }

    /// Quantity number `k` of a draw.
    pub fn number(&self, k: usize, draw: usize) -> f64 {
        self.columns[k][draw]
    }

    pub fn at_end_stop(&self, draw: usize) -> bool {
        self.at_end_stop[draw]
    }

    /// A column for each quantity, and one for each energy.
    pub fn into_columns(self) -> (Vec<Vec<f64>>, Vec<Vec<f64>>) {
        let mut columns = Vec::from(self.columns);
        let energies = columns.split_off(N_QUANTITIES);
        (columns, energies)
    }
}

/// What one thread fills.
struct Rows<'a> {
    columns: Vec<&'a mut [f64]>,
    at_end_stop: &'a mut [bool],
}

impl Rows<'_> {
    fn put(&mut self, row: usize, draw: &Draw) {
        if let Some(outcome) = draw.outcome {
            self.at_end_stop[row] = outcome.at_end_stop;
            for (column, number) in self.columns.iter_mut().zip(outcome.numbers) {
                column[row] = number;
            }
        }
        if let Some(energy) = draw.energy {
            for (column, (_, joules)) in self.columns.iter_mut().skip(N_QUANTITIES).zip(energy.terms()) {
                column[row] = joules;
            }
        }
    }
}
