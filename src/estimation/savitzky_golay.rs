//! Weights of a quadratic laid by least squares through evenly spaced points.
//!
//! A. Savitzky, M. J. E. Golay, "Smoothing and Differentiation of Data by Simplified Least Squares Procedures", Analytical
//! Chemistry 36 (1964) 1627-1639.

/// Weights of `2·reach + 1` samples, left to right, that give the quadratic's value (`derivative` 0), slope per sample
/// (1) or second derivative per sample squared (2) at the middle one. A reach below 1 counts as 1; a higher derivative of
/// a quadratic is zero.
pub fn savitzky_golay(reach: usize, derivative: usize) -> Vec<f64> {
    let reach = reach.max(1) as i64;
    let places = -reach..=reach;
    let sum = |power: i32| places.clone().map(|j| (j as f64).powi(power)).sum::<f64>();
    let (s0, s2, s4) = (sum(0), sum(2), sum(4));
    let determinant = s0 * s4 - s2 * s2;
    let weight = |j: i64| {
        let j = j as f64;
        match derivative {
            0 => (s4 - s2 * j * j) / determinant,
            1 => j / s2,
            2 => 2.0 * (s0 * j * j - s2) / determinant,
            _ => 0.0,
        }
    };
    places.clone().map(weight).collect()
}

#[cfg(test)]
mod tests {
    use super::savitzky_golay;

    // Savitzky and Golay 1964; Madden, Analytical Chemistry 50 (1978) 1383; confirmed by scipy savgol_coeffs: see the file.
    #[test]
    fn weights_are_the_published_integers() {
        let text = include_str!("../../tests/reference/savitzky_golay.csv");
        let rows: Vec<Vec<&str>> =
            text.lines().filter(|line| !line.starts_with('#')).skip(1).map(|line| line.split(',').collect()).collect();
        assert_eq!(rows.len(), 9);
        for row in rows {
            let number = |i: usize| row[i].parse::<usize>().unwrap();
            let found = savitzky_golay((number(0) - 1) / 2, number(1));
            let wanted: Vec<f64> = row[3].split(' ').map(|n| n.parse::<f64>().unwrap() / number(2) as f64).collect();
            assert_eq!(found.len(), wanted.len());
            for (found, wanted) in found.iter().zip(&wanted) {
                assert!((found - wanted).abs() < 1e-14, "{found} for {wanted} in {row:?}");
            }
        }
    }
}
