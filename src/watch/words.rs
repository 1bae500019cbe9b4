//! Numbers as the display may show them: fresh, visibly stale, or a word in place of the number.

use crate::live::ChannelNow;

/// From here on a number looks old.
pub const STALE_S: f64 = 0.2;
/// From here on there is a word in its place.
pub const SILENT_S: f64 = 1.0;

#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Freshness {
    Fresh,
    Stale,
    Silent,
}

impl Freshness {
    pub fn of(age_s: f64) -> Self {
        match age_s {
            age_s if age_s < STALE_S => Self::Fresh,
            age_s if age_s < SILENT_S => Self::Stale,
            // An age that is no number is no freshness.
            _ => Self::Silent,
        }
    }
}

/// A value as it may be shown.
#[derive(Debug, Clone, PartialEq)]
pub struct Reading {
    pub freshness: Freshness,
    /// None when silent: there is no number to show.
    pub value: Option<f64>,
    pub age_s: f64,
}

impl Reading {
    pub const SILENT: Self = Self { freshness: Freshness::Silent, value: None, age_s: f64::INFINITY };

    /// A channel's newest value, `since_s` after the snapshot arrived.
    pub fn of(channel: &ChannelNow, since_s: f64) -> Self {
        match (channel.value, channel.age_s) {
            (Some(value), Some(age_s)) => Self::aged(value, age_s + since_s),
            _ => Self::SILENT,
        }
    }

    pub fn is_fresh(&self) -> bool {
        self.freshness == Freshness::Fresh
    }

    pub fn aged(value: f64, age_s: f64) -> Self {
        let freshness = Freshness::of(age_s);
        let value = (freshness != Freshness::Silent && value.is_finite()).then_some(value);
        Self { freshness, value, age_s }
    }

    /// "688 N", "~688 N (0.4 s old)" or "SILENT".
    pub fn text(&self, decimals: usize, unit: &str) -> String {
        match (self.value, self.freshness) {
            (Some(value), Freshness::Fresh) => format!("{value:.decimals$} {unit}"),
            (Some(value), _) => format!("~{value:.decimals$} {unit} ({:.1} s old)", self.age_s),
            (None, _) => String::from("SILENT"),
        }
    }
}

/// Bytes as people read them.
pub fn bytes(n: f64) -> String {
    let mut n = n;
    for unit in ["B", "kB", "MB", "GB"] {
        if n < 1_000.0 {
            return if unit == "B" { format!("{n:.0} B") } else { format!("{n:.1} {unit}") };
        }
        n /= 1_000.0;
    }
    format!("{n:.1} TB")
}

/// Where an interval stands against a window.
pub fn against_window(low: f64, high: f64, min: f64, max: f64) -> &'static str {
    if low >= min && high <= max {
        "IN WINDOW"
    } else if high < min {
        "UNDER WINDOW"
    } else if low > max {
        "OVER WINDOW"
    } else {
        "MAY MISS WINDOW"
    }
}

/// The g limit, and beside it what the proof load of the airframe allows, where one is recorded.
pub fn limit_words(limit_g: f64, proof_limit_g: Option<f64>) -> String {
    let proof = proof_limit_g.map_or_else(String::new, |proof_g| format!(", proof {proof_g:.1} g"));
    format!("limit {limit_g:>5.1} g{proof}")
}

/// Where an interval stands against a limit.
pub fn against_limit(low: f64, high: f64, limit: f64) -> &'static str {
    if high <= limit {
        "under limit"
    } else if low > limit {
        "OVER LIMIT"
    } else {
        "MAY PASS LIMIT"
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_number_looks_old_after_a_fifth_of_a_second_and_is_a_word_after_one() {
        assert_eq!(Reading::aged(688.4, 0.19).text(0, "N"), "688 N");
        assert_eq!(Reading::aged(688.4, 0.2).text(0, "N"), "~688 N (0.2 s old)");
        assert_eq!(Reading::aged(688.4, 0.999).text(0, "N"), "~688 N (1.0 s old)");
        for age_s in [1.0, 5.0, f64::INFINITY, f64::NAN] {
            assert_eq!(Reading::aged(688.4, age_s).text(0, "N"), "SILENT");
        }
        assert_eq!(Reading::aged(f64::NAN, 0.0).text(0, "N"), "SILENT");
    }

    #[test]
    fn the_proof_load_stands_beside_the_limit_and_fits_the_panel() {
        assert_eq!(limit_words(10.0, None), "limit  10.0 g");
        assert_eq!(limit_words(10.0, Some(8.0)), "limit  10.0 g, proof 8.0 g");
        assert!(limit_words(12.5, Some(10.4)).len() <= 28);
    }

    #[test]
    fn an_interval_that_touches_both_sides_is_never_called_good() {
        assert_eq!(against_window(15.1, 17.9, 15.0, 18.0), "IN WINDOW");
        assert_eq!(against_window(14.9, 16.0, 15.0, 18.0), "MAY MISS WINDOW");
        assert_eq!(against_window(14.0, 14.9, 15.0, 18.0), "UNDER WINDOW");
        assert_eq!(against_window(18.1, 19.0, 15.0, 18.0), "OVER WINDOW");
        assert_eq!(against_window(f64::NAN, 16.0, 15.0, 18.0), "MAY MISS WINDOW");
        assert_eq!(against_limit(9.0, 9.9, 10.0), "under limit");
        assert_eq!(against_limit(9.5, 10.5, 10.0), "MAY PASS LIMIT");
        assert_eq!(against_limit(10.1, 10.5, 10.0), "OVER LIMIT");
    }
}
