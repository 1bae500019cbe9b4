//! Quantities as people write them ("900 N", "12 deg") and as the program keeps them: SI, the unit in the name.
//!
//! Every quantity needs a unit that fits its dimension. Refused, with advice: a bare number, a force in "kg" (a mass),
//! "kn" (reads like kN, is often meant as knots), "g" for a mass (here g is 9.80665 m/s²), a decimal comma.
//! Symbols are case-sensitive, as SI has them. Pure; any text is accepted, none panics.

use std::fmt;

use thiserror::Error;

/// Standard acceleration of gravity, m/s², exact (3rd CGPM, 1901; NIST SP 811 (2008), Appendix B.8).
pub const STANDARD_GRAVITY_MPS2: f64 = 9.80665;

/// What kind of quantity a text must state.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash)]
#[non_exhaustive]
pub enum Dimension {
    Length,
    Area,
    Mass,
    Density,
    Duration,
    Speed,
    Acceleration,
    Force,
    Angle,
    /// A plain share, written as "8 %".
    Ratio,
    /// Absolute or gauge is said beside it, never by the unit.
    Pressure,
    Volume,
    /// Force per length.
    Stiffness,
    /// Force per speed.
    Damping,
    /// Kept in degrees Celsius, names end in `_c`.
    Temperature,
}

impl Dimension {
    /// With its article, for messages: "a force".
    pub const fn described(self) -> &'static str {
        match self {
            Self::Length => "a length",
            Self::Area => "an area",
            Self::Mass => "a mass",
            Self::Density => "a density",
            Self::Duration => "a duration",
            Self::Speed => "a speed",
            Self::Acceleration => "an acceleration",
            Self::Force => "a force",
            Self::Angle => "an angle",
            Self::Ratio => "a ratio",
            Self::Pressure => "a pressure",
            Self::Volume => "a volume",
            Self::Stiffness => "a stiffness",
            Self::Damping => "a damping constant",
            Self::Temperature => "a temperature",
        }
    }

    /// The units a person may write, the preferred one first.
    pub fn units(self) -> impl Iterator<Item = &'static Unit> {
        UNITS.iter().filter(move |unit| unit.dimension == self)
    }

    /// The symbols of [`Self::units`] as a list for messages: "N, kN, kgf, lbf".
    pub fn symbols(self) -> String {
        self.units().map(|unit| unit.symbol).collect::<Vec<_>>().join(", ")
    }
}

/// A unit with its exact factor to SI: `si = value · to_si`.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Unit {
    pub symbol: &'static str,
    pub dimension: Dimension,
    to_si: f64,
}

impl Unit {
    /// The unit with exactly this symbol.
    pub fn named(symbol: &str) -> Option<&'static Self> {
        UNITS.iter().find(|unit| unit.symbol == symbol)
    }

    /// From this unit to SI.
    pub fn si_from(&self, value: f64) -> f64 {
        value * self.to_si
    }

    /// From SI to this unit.
    pub fn value_from_si(&self, si: f64) -> f64 {
        si / self.to_si
    }

    /// The SI value written in this unit: `Unit::named("kN")` shows 912.4 with 2 decimals as "0.91 kN".
    pub fn show(&self, si: f64, decimals: usize) -> Shown {
        Shown { value: self.value_from_si(si), decimals, symbol: self.symbol }
    }
}

/// A value ready to print with its unit; made by [`Unit::show`].
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Shown {
    value: f64,
    decimals: usize,
    symbol: &'static str,
}

impl fmt::Display for Shown {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "{:.*} {}", self.decimals, self.value, self.symbol)
    }
}

/// Factors are exact definitions: NIST SP 811 (2008), Appendix B.8 (pound, foot, inch, pound-force, kilogram-force,
/// knot, mile per hour); the others are SI prefixes, hour, minute and degree as the SI Brochure (9th ed., table 8) has them.
const UNITS: &[Unit] = &[
    unit("m", Dimension::Length, 1.0),
    unit("mm", Dimension::Length, 1e-3),
    unit("cm", Dimension::Length, 1e-2),
    unit("km", Dimension::Length, 1e3),
    unit("in", Dimension::Length, 0.0254),
    unit("ft", Dimension::Length, 0.3048),
    unit("m2", Dimension::Area, 1.0),
    unit("m^2", Dimension::Area, 1.0),
    unit("m²", Dimension::Area, 1.0),
    unit("cm2", Dimension::Area, 1e-4),
    unit("cm^2", Dimension::Area, 1e-4),
    unit("cm²", Dimension::Area, 1e-4),
    unit("kg", Dimension::Mass, 1.0),
    unit("lb", Dimension::Mass, 0.453_592_37),
    unit("kg/m3", Dimension::Density, 1.0),
    unit("kg/m^3", Dimension::Density, 1.0),
    unit("kg/m³", Dimension::Density, 1.0),
    unit("s", Dimension::Duration, 1.0),
    unit("ms", Dimension::Duration, 1e-3),
    unit("us", Dimension::Duration, 1e-6),
    unit("µs", Dimension::Duration, 1e-6),
    unit("min", Dimension::Duration, 60.0),
    unit("h", Dimension::Duration, 3600.0),
    unit("m/s", Dimension::Speed, 1.0),
    unit("km/h", Dimension::Speed, 1.0 / 3.6),
    unit("kt", Dimension::Speed, 1852.0 / 3600.0),
    unit("mph", Dimension::Speed, 0.44704),
    unit("ft/s", Dimension::Speed, 0.3048),
    unit("m/s2", Dimension::Acceleration, 1.0),
    unit("m/s^2", Dimension::Acceleration, 1.0),
    unit("m/s²", Dimension::Acceleration, 1.0),
    unit("g", Dimension::Acceleration, STANDARD_GRAVITY_MPS2),
    unit("N", Dimension::Force, 1.0),
    unit("kN", Dimension::Force, 1e3),
    unit("kgf", Dimension::Force, STANDARD_GRAVITY_MPS2),
    unit("lbf", Dimension::Force, 4.448_221_615_260_5),
    unit("deg", Dimension::Angle, std::f64::consts::PI / 180.0),
    unit("°", Dimension::Angle, std::f64::consts::PI / 180.0),
    unit("rad", Dimension::Angle, 1.0),
    unit("mrad", Dimension::Angle, 1e-3),
    unit("%", Dimension::Ratio, 1e-2),
    unit("Pa", Dimension::Pressure, 1.0),
    unit("hPa", Dimension::Pressure, 1e2),
    unit("kPa", Dimension::Pressure, 1e3),
    unit("MPa", Dimension::Pressure, 1e6),
    unit("bar", Dimension::Pressure, 1e5),
    unit("psi", Dimension::Pressure, 4.448_221_615_260_5 / (0.0254 * 0.0254)),
    unit("m3", Dimension::Volume, 1.0),
    unit("m^3", Dimension::Volume, 1.0),
    unit("m³", Dimension::Volume, 1.0),
    unit("L", Dimension::Volume, 1e-3),
    unit("cm3", Dimension::Volume, 1e-6),
    unit("N/m", Dimension::Stiffness, 1.0),
    unit("N/mm", Dimension::Stiffness, 1e3),
    unit("N s/m", Dimension::Damping, 1.0),
    unit("degC", Dimension::Temperature, 1.0),
    unit("°C", Dimension::Temperature, 1.0),
];

const fn unit(symbol: &'static str, dimension: Dimension, to_si: f64) -> Unit {
    Unit { symbol, dimension, to_si }
}

/// Why a text is not the quantity that was asked for.
#[derive(Debug, Clone, PartialEq, Eq, Error)]
#[non_exhaustive]
pub enum QuantityError {
    #[error("no number in {text:?}, write {} as a number and a unit ({})", dimension.described(), dimension.symbols())]
    NoNumber { text: String, dimension: Dimension },
    #[error("{text:?} has a decimal comma, write a point")]
    DecimalComma { text: String },
    #[error("{text:?} has no unit, write {} in one of: {}", dimension.described(), dimension.symbols())]
    NoUnit { text: String, dimension: Dimension },
    #[error("{text:?} is too large to be kept")]
    NotFinite { text: String },
    #[error("\"kg\" is a mass, not a force; write \"kgf\" if the reading is in kilograms-force")]
    KilogramForForce,
    #[error("\"lb\" is a mass, not a force; write \"lbf\" if the reading is in pounds-force")]
    PoundForForce,
    #[error("\"kn\" is not accepted: write \"kt\" for knots or \"kN\" for kilonewtons")]
    AmbiguousKn,
    #[error("\"g\" means 9.80665 m/s² here, never grams; write the mass in kg")]
    GramForMass,
    #[error("{symbol:?} is {}, not {}; write it in one of: {}", found.described(), wanted.described(), wanted.symbols())]
    WrongDimension { symbol: String, found: Dimension, wanted: Dimension },
    #[error("unknown unit {symbol:?}, write {} in one of: {}", dimension.described(), dimension.symbols())]
    UnknownUnit { symbol: String, dimension: Dimension },
}

/// The SI value of a text like "900 N" that must state `dimension`. The space before the unit is optional.
///
/// # Errors
/// [`QuantityError`] says what was found and what would be right.
pub fn parse(text: &str, dimension: Dimension) -> Result<f64, QuantityError> {
    let (number, symbol) = split(text.trim());
    if symbol.starts_with(',') && symbol[1..].starts_with(|c: char| c.is_ascii_digit()) {
        return Err(QuantityError::DecimalComma { text: text.to_owned() });
    }
    let value: f64 = number.parse().map_err(|_| QuantityError::NoNumber { text: text.to_owned(), dimension })?;
    if symbol.is_empty() {
        return Err(QuantityError::NoUnit { text: text.to_owned(), dimension });
    }
    let si = fitting_unit(symbol, dimension)?.si_from(value);
    if si.is_finite() { Ok(si) } else { Err(QuantityError::NotFinite { text: text.to_owned() }) }
}

/// The leading decimal number (sign, digits, point, exponent) and what follows it.
fn split(text: &str) -> (&str, &str) {
    let bytes = text.as_bytes();
    let digits_from = |from: usize| bytes[from..].iter().take_while(|byte| byte.is_ascii_digit()).count();
    let mut end = usize::from(matches!(bytes.first(), Some(b'+' | b'-')));
    end += digits_from(end);
    if bytes.get(end) == Some(&b'.') {
        end += 1 + digits_from(end + 1);
    }
    if matches!(bytes.get(end), Some(b'e' | b'E')) {
        let sign = usize::from(matches!(bytes.get(end + 1), Some(b'+' | b'-')));
        let n_digits = digits_from((end + 1 + sign).min(bytes.len()));
        if n_digits > 0 {
            end += 1 + sign + n_digits;
        }
    }
    (&text[..end], text[end..].trim())
}

fn fitting_unit(symbol: &str, dimension: Dimension) -> Result<&'static Unit, QuantityError> {
    match (symbol, dimension) {
        ("kn", _) => return Err(QuantityError::AmbiguousKn),
        ("kg", Dimension::Force) => return Err(QuantityError::KilogramForForce),
        ("lb", Dimension::Force) => return Err(QuantityError::PoundForForce),
        ("g", Dimension::Mass) => return Err(QuantityError::GramForMass),
        _ => {}
    }
    match Unit::named(symbol) {
        Some(unit) if unit.dimension == dimension => Ok(unit),
        Some(unit) => {
            Err(QuantityError::WrongDimension { symbol: symbol.to_owned(), found: unit.dimension, wanted: dimension })
        }
        None => Err(QuantityError::UnknownUnit { symbol: symbol.to_owned(), dimension }),
    }
}

/// A value rounded to its standard uncertainty: two significant digits of the uncertainty, the value to the same
/// decimal (JCGM 100:2008 (GUM), 7.2.6). Returns both as text; without a usable uncertainty the value gets 6 digits.
pub fn rounded(value: f64, standard_uncertainty: f64) -> (String, String) {
    if !value.is_finite() || !standard_uncertainty.is_finite() || standard_uncertainty <= 0.0 {
        return (significant(value, 6), significant(standard_uncertainty, 2));
    }
    let decimals = decimals_for(standard_uncertainty, 2);
    (fixed(value, decimals), fixed(standard_uncertainty, decimals))
}

/// A unit as people read it: "m/s²" for "m/s^2", nothing for "1".
pub fn shown_unit(unit: &str) -> &str {
    match unit {
        "1" => "",
        "m/s^2" => "m/s²",
        other => other,
    }
}

/// A value with `digits` significant digits, in plain notation.
pub fn significant(value: f64, digits: i32) -> String {
    if value == 0.0 || !value.is_finite() { format!("{value}") } else { fixed(value, decimals_for(value, digits)) }
}

/// [`significant`] without the zeros at the end: 95 deg rather than 95.0000 deg.
pub fn brief(value: f64, digits: i32) -> String {
    let text = significant(value, digits);
    if text.contains('.') { text.trim_end_matches('0').trim_end_matches('.').to_owned() } else { text }
}

/// Decimals that show `digits` significant digits of `value`; negative where whole tens and up must be rounded.
fn decimals_for(value: f64, digits: i32) -> i32 {
    let magnitude = value.abs().log10().floor() as i32;
    let decimals = digits - 1 - magnitude;
    let carried = (value.abs() * 10f64.powi(decimals)).round() >= 10f64.powi(digits);
    decimals - i32::from(carried)
}

fn fixed(value: f64, decimals: i32) -> String {
    if decimals >= 0 {
        return format!("{value:.*}", decimals as usize);
    }
    let step = 10f64.powi(-decimals);
    format!("{:.0}", (value / step).round() * step)
}

#[cfg(test)]
mod tests {
    use proptest::prelude::*;

    use super::*;

    #[track_caller]
    fn check(text: &str, dimension: Dimension, expected_si: f64) {
        let found = parse(text, dimension).expect(text);
        assert!((found - expected_si).abs() <= 1e-12 * expected_si.abs(), "{text}: {found}, expected {expected_si}");
    }

    #[track_caller]
    fn refuse(text: &str, dimension: Dimension, message: &str) {
        let error = parse(text, dimension).expect_err(text);
        assert_eq!(error.to_string(), message, "{text}");
    }

    // Values: NIST SP 811 (2008), Appendix B.8, quoted from memory; the knot is 1852 m an hour by definition.
    #[test]
    fn every_way_of_writing_a_quantity_gives_its_si_value() {
        check("900 N", Dimension::Force, 900.0);
        check("0.9 kN", Dimension::Force, 900.0);
        check("900N", Dimension::Force, 900.0);
        check("1 kgf", Dimension::Force, 9.80665);
        check("1 lbf", Dimension::Force, 4.4482216152605);
        check("12 deg", Dimension::Angle, 0.20943951023931956);
        check("12°", Dimension::Angle, 0.20943951023931956);
        check("8 %", Dimension::Ratio, 0.08);
        check("10 g", Dimension::Acceleration, 98.0665);
        check("16 m/s", Dimension::Speed, 16.0);
        check("58 km/h", Dimension::Speed, 58.0 / 3.6);
        check("30 kt", Dimension::Speed, 30.0 * 0.514_444_444_444_444_4);
        check("1 lb", Dimension::Mass, 0.45359237);
        check("250 mm", Dimension::Length, 0.25);
        check("1 ft", Dimension::Length, 0.3048);
        check("-2.5e2 mm", Dimension::Length, -0.25);
        check("+1e-3 kN", Dimension::Force, 1.0);
        check("500 cm2", Dimension::Area, 0.05);
        check("1.225 kg/m3", Dimension::Density, 1.225);
        check("20 ms", Dimension::Duration, 0.02);
    }

    #[test]
    fn what_is_refused_says_what_would_be_right() {
        refuse(
            "90 kg",
            Dimension::Force,
            "\"kg\" is a mass, not a force; write \"kgf\" if the reading is in kilograms-force",
        );
        refuse("30 kn", Dimension::Speed, "\"kn\" is not accepted: write \"kt\" for knots or \"kN\" for kilonewtons");
        refuse("30 kn", Dimension::Force, "\"kn\" is not accepted: write \"kt\" for knots or \"kN\" for kilonewtons");
        refuse("900", Dimension::Force, "\"900\" has no unit, write a force in one of: N, kN, kgf, lbf");
        refuse("0,9 kN", Dimension::Force, "\"0,9 kN\" has a decimal comma, write a point");
        refuse("500 g", Dimension::Mass, "\"g\" means 9.80665 m/s² here, never grams; write the mass in kg");
        refuse("3 m", Dimension::Force, "\"m\" is a length, not a force; write it in one of: N, kN, kgf, lbf");
        refuse("3 n", Dimension::Force, "unknown unit \"n\", write a force in one of: N, kN, kgf, lbf");
        refuse("N", Dimension::Force, "no number in \"N\", write a force as a number and a unit (N, kN, kgf, lbf)");
        refuse(
            "inf N",
            Dimension::Force,
            "no number in \"inf N\", write a force as a number and a unit (N, kN, kgf, lbf)",
        );
        refuse("1e400 N", Dimension::Force, "\"1e400 N\" is too large to be kept");
        refuse("1 000 N", Dimension::Force, "unknown unit \"000 N\", write a force in one of: N, kN, kgf, lbf");
    }

    #[test]
    fn no_two_units_share_a_symbol() {
        for (index, unit) in UNITS.iter().enumerate() {
            assert!(UNITS[index + 1..].iter().all(|other| other.symbol != unit.symbol), "{}", unit.symbol);
        }
    }

    // JCGM 100:2008, 7.2.6: "y = 10.057 62 Ω with u_c = 27 mΩ … rounded to 10.058 Ω".
    #[test]
    fn a_value_is_rounded_where_its_uncertainty_is() {
        assert_eq!(rounded(10.05762, 0.027), ("10.058".into(), "0.027".into()));
        assert_eq!(rounded(16.4237, 0.0996), ("16.42".into(), "0.10".into()));
        assert_eq!(rounded(1234.0, 56.0), ("1234".into(), "56".into()));
        assert_eq!(rounded(12345.0, 678.0), ("12350".into(), "680".into()));
        assert_eq!(rounded(5.0, 0.0), ("5.00000".into(), "0".into()));
        assert_eq!(significant(0.0, 3), "0");
        assert_eq!(significant(99.96, 3), "100");
        assert_eq!((brief(95.0, 6), brief(-2.4, 6), brief(7000.0, 3)), ("95".into(), "-2.4".into(), "7000".into()));
    }

    #[test]
    fn values_are_shown_in_the_unit_asked_for() {
        let kilonewton = Unit::named("kN").expect("kN is known");
        assert_eq!(kilonewton.show(912.4, 2).to_string(), "0.91 kN");
        assert!(Unit::named("kn").is_none());
    }

    proptest! {
        #[test]
        fn any_text_is_answered_without_a_panic(text in ".*") {
            for dimension in [Dimension::Force, Dimension::Mass, Dimension::Ratio] {
                let _ = parse(&text, dimension);
            }
        }

        #[test]
        fn what_is_written_in_any_unit_comes_back(value in -1e6..1e6f64, unit_idx in 0..UNITS.len()) {
            let unit = &UNITS[unit_idx];
            let si = parse(&format!("{value} {}", unit.symbol), unit.dimension)?;
            prop_assert!((unit.value_from_si(si) - value).abs() <= 1e-9 * value.abs());
        }

        #[test]
        fn a_quantity_fits_one_dimension_only(value in -1e3..1e3f64, unit_idx in 0..UNITS.len()) {
            let unit = &UNITS[unit_idx];
            for dimension in [Dimension::Force, Dimension::Mass, Dimension::Speed, Dimension::Angle] {
                let fits = parse(&format!("{value}{}", unit.symbol), dimension).is_ok();
                prop_assert_eq!(fits, dimension == unit.dimension);
            }
        }
    }
}
