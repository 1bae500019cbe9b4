//! Gravity at the site.

/// Gravity at a latitude and a height above the ellipsoid, m/s².
///
/// Somigliana's closed form with the constants of GRS80 (Moritz, "Geodetic Reference System 1980", Journal of Geodesy 74,
/// 2000), less the free-air gradient 3.086e-6 1/s² (Heiskanen and Moritz, "Physical Geodesy", 1967, section 2-14).
pub(super) fn local_gravity_mps2(latitude_rad: f64, height_m: f64) -> f64 {
    const EQUATOR_MPS2: f64 = 9.780_326_771_5;
    const K: f64 = 0.001_931_851_353;
    const E2: f64 = 0.006_694_380_022_90;
    let s2 = latitude_rad.sin().powi(2);
    EQUATOR_MPS2 * (1.0 + K * s2) / (1.0 - E2 * s2).sqrt() - 3.086e-6 * height_m
}

#[cfg(test)]
mod tests {
    // Moritz, GRS80; the file says how its columns were obtained.
    #[test]
    fn gravity_on_the_ellipsoid_is_the_published_formula_s() {
        let text = include_str!("../../tests/reference/normal_gravity.csv");
        for line in text.lines().filter(|line| !line.starts_with('#')).skip(1) {
            let row: Vec<f64> = line.split(',').map(|cell| cell.parse().unwrap()).collect();
            let found = super::local_gravity_mps2(row[0].to_radians(), 0.0);
            assert!((found - row[1]).abs() < 1e-9, "{found} at {} degrees", row[0]);
        }
    }
}
