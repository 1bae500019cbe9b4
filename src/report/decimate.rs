//! Long signals to what a picture can show: the least and greatest value of each pixel column, so that no spike is lost.

/// A run of samples without a gap, as points to join.
pub(super) type Run = Vec<(f64, f64)>;

/// Steps longer than this many nominal steps are gaps.
const GAP_STEPS: f64 = 3.0;

/// The samples within `range`, split at gaps and reduced to at most two points a column.
///
/// Samples that are no numbers are treated as missing. `x` must not fall.
pub(super) fn runs(x: &[f64], y: &[f64], step: f64, range: (f64, f64), n_columns: usize) -> Vec<Run> {
    let mut runs: Vec<Run> = Vec::new();
    let mut last_x = f64::NEG_INFINITY;
    for (&x, &y) in x.iter().zip(y) {
        if !(range.0..=range.1).contains(&x) || !y.is_finite() {
            continue;
        }
        match runs.last_mut() {
            Some(run) if x - last_x <= GAP_STEPS * step => run.push((x, y)),
            _ => runs.push(vec![(x, y)]),
        }
        last_x = x;
    }
    runs.into_iter().map(|run| columns(run, range, n_columns)).collect()
}

/// Keeps the least and greatest point of each column, in the order they came, and both ends of the run.
fn columns(run: Run, range: (f64, f64), n_columns: usize) -> Run {
    if run.len() <= 2 * n_columns {
        return run;
    }
    let column = |x: f64| ((x - range.0) / (range.1 - range.0) * n_columns as f64) as usize;
    let mut kept = Run::new();
    for points in run.chunk_by(|a, b| column(a.0) == column(b.0)) {
        let by_value = |a: &&(f64, f64), b: &&(f64, f64)| a.1.total_cmp(&b.1);
        let (Some(least), Some(greatest)) = (points.iter().min_by(by_value), points.iter().max_by(by_value)) else {
            continue;
        };
        let (first, second) = if least.0 <= greatest.0 { (least, greatest) } else { (greatest, least) };
        kept.push(*first);
        if first != second {
            kept.push(*second);
        }
    }
    let (first, last) = (run[0], run[run.len() - 1]);
    if kept.first() != Some(&first) {
        kept.insert(0, first);
    }
    if kept.last() != Some(&last) {
        kept.push(last);
    }
    kept
}

#[cfg(test)]
mod tests {
    use proptest::prelude::*;

    use super::*;

    fn ramp(n: usize) -> Vec<f64> {
        (0..n).map(|index| index as f64 * 1e-4).collect()
    }

    #[test]
    fn a_spike_of_one_sample_survives() {
        let time_s = ramp(250_000);
        let mut value = vec![1.0; time_s.len()];
        value[123_456] = 900.0;
        let runs = runs(&time_s, &value, 1e-4, (0.0, 25.0), 800);
        assert_eq!(runs.len(), 1);
        assert!(runs[0].len() <= 1602, "{} points", runs[0].len());
        assert!(runs[0].contains(&(time_s[123_456], 900.0)));
    }

    #[test]
    fn a_gap_breaks_the_line() {
        let mut time_s = ramp(100);
        time_s.drain(40..60);
        let runs = runs(&time_s, &vec![1.0; 80], 1e-4, (0.0, 1.0), 10);
        assert_eq!(runs.len(), 2);
        assert!(runs[0].iter().all(|point| point.0 < 41e-4) && runs[1].iter().all(|point| point.0 > 59e-4));
    }

    #[test]
    fn what_is_no_number_is_missing() {
        assert_eq!(runs(&[0.0, 1.0, 2.0], &[1.0, f64::NAN, 3.0], 1.0, (0.0, 9.0), 9), [vec![(0.0, 1.0), (2.0, 3.0)]]);
        assert_eq!(runs(&[], &[], 1.0, (0.0, 1.0), 9), Vec::<Run>::new());
    }

    proptest! {
        #[test]
        fn extremes_ends_and_order_are_kept(values in prop::collection::vec(-1e3..1e3f64, 1..3000), n in 1..50usize) {
            let time_s = ramp(values.len());
            let end = time_s[time_s.len() - 1].max(1e-4);
            let runs = runs(&time_s, &values, 1e-4, (0.0, end), n);
            let kept = &runs[0];
            let least = |points: &mut dyn Iterator<Item = f64>| points.fold(f64::INFINITY, f64::min);
            prop_assert_eq!(least(&mut kept.iter().map(|p| p.1)), least(&mut values.iter().copied()));
            prop_assert_eq!(least(&mut kept.iter().map(|p| -p.1)), least(&mut values.iter().map(|v| -v)));
            prop_assert!(kept.windows(2).all(|pair| pair[0].0 < pair[1].0));
            prop_assert_eq!(kept[kept.len() - 1].1, values[values.len() - 1]);
        }
    }
}
