//! Rows for labels above a picture, so that no label runs into another one or into another one's line.

/// A label stands to the right of its line, which comes up from below. Row 0 is the topmost.
///
/// `spans` are (left, right) edges in pixels, by rising left edge. A label takes the highest row for which that row and
/// all rows below it are free at its place: its own line then crosses no label either.
pub(super) fn rows(spans: &[(f64, f64)]) -> Vec<usize> {
    let mut ends: Vec<f64> = Vec::new();
    let mut rows = Vec::with_capacity(spans.len());
    for &(left, right) in spans {
        let row = ends.iter().rposition(|&end| end >= left).map_or(0, |taken| taken + 1);
        if row == ends.len() {
            ends.push(right);
        } else {
            ends[row] = right;
        }
        rows.push(row);
    }
    rows
}

/// How many rows these labels take.
pub(super) fn n_rows(rows: &[usize]) -> usize {
    rows.iter().max().map_or(0, |row| row + 1)
}

#[cfg(test)]
mod tests {
    use proptest::prelude::*;

    use super::*;

    #[test]
    fn labels_that_would_touch_step_down_and_come_up_again() {
        assert_eq!(rows(&[(0.0, 50.0), (20.0, 70.0), (40.0, 90.0), (100.0, 150.0)]), [0, 1, 2, 0]);
        assert_eq!(rows(&[]), Vec::<usize>::new());
    }

    proptest! {
        #[test]
        fn no_label_is_crossed(mut lefts in prop::collection::vec(0.0..900.0f64, 0..12), width in 10.0..300.0f64) {
            lefts.sort_by(f64::total_cmp);
            let spans: Vec<_> = lefts.iter().map(|left| (*left, left + width)).collect();
            let rows = rows(&spans);
            for (index, (left, right)) in spans.iter().enumerate() {
                for (other, (x, _)) in spans.iter().enumerate() {
                    let passes_by = other != index && rows[other] <= rows[index];
                    prop_assert!(!(passes_by && left < x && x < right), "line {other} crosses label {index}");
                }
            }
        }
    }
}
