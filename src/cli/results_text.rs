//! Results as `read`, `show` and `compare` print them: one way to round, one way to write a unit.

use tautrail::units::{rounded, shown_unit};

/// Name, value and half-width of the 95 % interval to two digits of the uncertainty (GUM 7.2.6), unit.
pub fn result_line(name: &str, value: f64, standard_uncertainty: f64, interval: (f64, f64), unit: &str) -> String {
    let (value, _) = rounded(value, standard_uncertainty);
    let decimals = value.split_once('.').map_or(0, |(_, decimals)| decimals.len());
    let half_width = 0.5 * (interval.1 - interval.0);
    format!("  {name:<26} {value:>11} ± {half_width:.decimals$} {}", shown_unit(unit)).trim_end().to_owned()
}

/// An instant to the digits its uncertainty deserves.
pub fn instant_line(name: &str, time_s: f64, standard_uncertainty_s: f64) -> String {
    let (time, _) = rounded(time_s, standard_uncertainty_s);
    format!(
        "  {name:<26} {time:>11} s    u = {} ms",
        rounded(1e3 * standard_uncertainty_s, 1e3 * standard_uncertainty_s).0
    )
}

/// A wall-clock time to the second: nobody reads nanoseconds of it.
pub fn shown_time(rfc3339: &str) -> String {
    let Some((seconds, rest)) = rfc3339.split_once('.') else { return rfc3339.to_owned() };
    format!("{seconds}{}", rest.trim_start_matches(|letter: char| letter.is_ascii_digit()))
}

#[cfg(test)]
mod tests {
    use super::{result_line, shown_time};

    #[test]
    fn a_value_is_shown_to_two_digits_of_its_uncertainty() {
        for (u, wanted) in [(0.0123, "17.123 ± 0.024 m/s²"), (0.99, "17.12 ± 1.94 m/s²"), (12.0, "17 ± 24 m/s²")]
        {
            let line = result_line("a", 17.1234, u, (17.1234 - 1.96 * u, 17.1234 + 1.96 * u), "m/s^2");
            assert!(line.ends_with(wanted), "{line}");
        }
    }

    #[test]
    fn a_time_loses_its_fraction_and_keeps_its_offset() {
        assert_eq!(shown_time("2031-05-04T10:12:33.123456789Z"), "2031-05-04T10:12:33Z");
        assert_eq!(shown_time("2031-05-04T10:12:33.5+02:00"), "2031-05-04T10:12:33+02:00");
        assert_eq!(shown_time("never set"), "never set");
    }
}
