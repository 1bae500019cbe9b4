//! Local gravity and air density, from published formulas.

use thiserror::Error;

use crate::units::STANDARD_GRAVITY_MPS2;

#[derive(Debug, Clone, PartialEq, Error)]
#[non_exhaustive]
pub enum AirError {
    #[error("altitude {altitude_m} m is outside -2000 to 20000 m, where the standard atmosphere is used here")]
    Altitude { altitude_m: f64 },
    #[error(
        "air at {temperature_c} degC, {pressure_pa} Pa, relative humidity {relative_humidity}: the CIPM-2007 equation \
         holds for 15 to 27 degC, 600 to 1100 hPa and humidity from 0 to 1; give the density itself"
    )]
    OutsideCipm { temperature_c: f64, pressure_pa: f64, relative_humidity: f64 },
}

/// Gravity at a latitude and a height above the ellipsoid, m/s².
///
/// Somigliana's closed form with the constants of GRS80 (H. Moritz, *Geodetic Reference System 1980*, Journal of Geodesy
/// 74 (2000) 128-133), reduced to the height by its second-order free-air term (Heiskanen and Moritz, *Physical
/// Geodesy*, 1967, equation 2-124). Local anomalies are below 1e-4 of it.
pub fn local_gravity_mps2(latitude_rad: f64, height_m: f64) -> f64 {
    const EQUATOR: f64 = 9.780_326_771_5;
    const K: f64 = 0.001_931_851_353;
    const E2: f64 = 0.006_694_380_022_90;
    const A_M: f64 = 6_378_137.0;
    const FLATTENING: f64 = 1.0 / 298.257_222_101;
    const M: f64 = 0.003_449_786_003_08;
    let s2 = latitude_rad.sin().powi(2);
    let on_ellipsoid = EQUATOR * (1.0 + K * s2) / (1.0 - E2 * s2).sqrt();
    let h = height_m / A_M;
    on_ellipsoid * (1.0 - 2.0 * (1.0 + FLATTENING + M - 2.0 * FLATTENING * s2) * h + 3.0 * h * h)
}

/// Density of the standard atmosphere at a geopotential altitude, kg/m³ (ISO 2533:1975, sections 2.1 to 2.7).
///
/// # Errors
/// Altitudes outside −2000 to 20 000 m.
pub fn standard_air_density_kg_per_m3(altitude_m: f64) -> Result<f64, AirError> {
    const T0_K: f64 = 288.15;
    const P0_PA: f64 = 101_325.0;
    const LAPSE_K_PER_M: f64 = -0.0065;
    const R: f64 = 287.052_87;
    const TROPOPAUSE_M: f64 = 11_000.0;
    if !(-2000.0..=20_000.0).contains(&altitude_m) {
        return Err(AirError::Altitude { altitude_m });
    }
    let below_m = altitude_m.min(TROPOPAUSE_M);
    let temperature_k = T0_K + LAPSE_K_PER_M * below_m;
    let exponent = -STANDARD_GRAVITY_MPS2 / (LAPSE_K_PER_M * R);
    let pressure_pa = P0_PA * (temperature_k / T0_K).powf(exponent);
    let above_m = altitude_m - below_m;
    let thinning = (-STANDARD_GRAVITY_MPS2 * above_m / (R * temperature_k)).exp();
    Ok(pressure_pa * thinning / (R * temperature_k))
}

/// Density of moist air, kg/m³, from temperature, pressure and relative humidity (0 to 1), 400 ppm carbon dioxide.
///
/// A. Picard, R. S. Davis, M. Gläser, K. Fujii, *Revised formula for the density of moist air (CIPM-2007)*, Metrologia
/// 45 (2008) 149-155, equations 1 and A1.1 to A1.4. Formula's relative standard uncertainty 2.2e-5.
///
/// # Errors
/// Conditions for which the equation was not made (its range is widened here to −20 to 45 °C: field use, at an error far
/// below that of a drag area).
pub fn moist_air_density_kg_per_m3(
    temperature_c: f64,
    pressure_pa: f64,
    relative_humidity: f64,
) -> Result<f64, AirError> {
    let inside = (-20.0..=45.0).contains(&temperature_c)
        && (60_000.0..=110_000.0).contains(&pressure_pa)
        && (0.0..=1.0).contains(&relative_humidity);
    if !inside {
        return Err(AirError::OutsideCipm { temperature_c, pressure_pa, relative_humidity });
    }
    let (t, p) = (temperature_c, pressure_pa);
    let t_k = t + 273.15;
    let saturation_pa = (1.237_884_7e-5 * t_k * t_k - 1.912_131_6e-2 * t_k + 33.937_110_47 - 6.343_164_5e3 / t_k).exp();
    let enhancement = 1.000_62 + 3.14e-8 * p + 5.6e-7 * t * t;
    let vapour = relative_humidity * enhancement * saturation_pa / p;
    let first = 1.581_23e-6 - 2.933_1e-8 * t + 1.104_3e-10 * t * t;
    let second = (5.707e-6 - 2.051e-8 * t) * vapour + (1.989_8e-4 - 2.376e-6 * t) * vapour * vapour;
    let ratio = p / t_k;
    let compressibility = 1.0 - ratio * (first + second) + ratio * ratio * (1.83e-11 - 0.765e-8 * vapour * vapour);
    Ok(3.483_740e-3 * p / (compressibility * t_k) * (1.0 - 0.3780 * vapour))
}
