//! Units as the person at the display wants them. Inside everything stays SI; sentences of the daemon (alarms, events) stay as
//! they stand in the records.

use crate::units::STANDARD_GRAVITY_MPS2;

/// The international pound of force (NIST Special Publication 811, 2008, appendix B.8).
const NEWTONS_PER_LBF: f64 = 4.448_221_615_260_5;

#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub enum ForceUnit {
    #[default]
    Newton,
    Kilonewton,
    KilogramForce,
    PoundForce,
}

#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub enum SpeedUnit {
    #[default]
    MetrePerSecond,
    KilometrePerHour,
    Knot,
}

/// What forces and speeds are shown in.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub struct ShownUnits {
    pub force: ForceUnit,
    pub speed: SpeedUnit,
}

/// In the order in which a key goes through them.
const SETS: [ShownUnits; 4] = [
    ShownUnits { force: ForceUnit::Newton, speed: SpeedUnit::MetrePerSecond },
    ShownUnits { force: ForceUnit::Kilonewton, speed: SpeedUnit::MetrePerSecond },
    ShownUnits { force: ForceUnit::KilogramForce, speed: SpeedUnit::KilometrePerHour },
    ShownUnits { force: ForceUnit::PoundForce, speed: SpeedUnit::Knot },
];

impl ForceUnit {
    pub const ALL: [Self; 4] = [Self::Newton, Self::Kilonewton, Self::KilogramForce, Self::PoundForce];

    pub const fn symbol(self) -> &'static str {
        match self {
            Self::Newton => "N",
            Self::Kilonewton => "kN",
            Self::KilogramForce => "kgf",
            Self::PoundForce => "lbf",
        }
    }

    const fn newtons(self) -> f64 {
        match self {
            Self::Newton => 1.0,
            Self::Kilonewton => 1e3,
            Self::KilogramForce => STANDARD_GRAVITY_MPS2,
            Self::PoundForce => NEWTONS_PER_LBF,
        }
    }

    /// Enough for a newton or two.
    pub const fn decimals(self) -> usize {
        match self {
            Self::Newton => 0,
            Self::Kilonewton => 3,
            Self::KilogramForce | Self::PoundForce => 1,
        }
    }
}

impl SpeedUnit {
    pub const ALL: [Self; 3] = [Self::MetrePerSecond, Self::KilometrePerHour, Self::Knot];

    pub const fn symbol(self) -> &'static str {
        match self {
            Self::MetrePerSecond => "m/s",
            Self::KilometrePerHour => "km/h",
            Self::Knot => "kt",
        }
    }

    const fn metres_per_second(self) -> f64 {
        match self {
            Self::MetrePerSecond => 1.0,
            Self::KilometrePerHour => 1.0 / 3.6,
            Self::Knot => 1852.0 / 3600.0,
        }
    }
}

impl ShownUnits {
    /// The next set; the first one after any that is none of the sets.
    pub fn next(self) -> Self {
        let at = SETS.iter().position(|set| *set == self);
        SETS[at.map_or(0, |at| (at + 1) % SETS.len())]
    }

    /// Both symbols, for a notice.
    pub fn symbols(self) -> String {
        format!("{} and {}", self.force.symbol(), self.speed.symbol())
    }

    pub fn force_value(self, tension_n: f64) -> f64 {
        tension_n / self.force.newtons()
    }

    /// "613", "0.613", "62.5".
    pub fn force_number(self, tension_n: f64) -> String {
        format!("{:.*}", self.force.decimals(), self.force_value(tension_n))
    }

    /// "613 N".
    pub fn force(self, tension_n: f64) -> String {
        format!("{} {}", self.force_number(tension_n), self.force.symbol())
    }

    /// Newtons between marks of an axis, finely and coarsely.
    pub fn force_steps_n(self) -> (f64, f64) {
        let steps = match self.force {
            ForceUnit::Newton => (100.0, 300.0),
            ForceUnit::Kilonewton => (0.1, 0.3),
            ForceUnit::KilogramForce => (10.0, 30.0),
            ForceUnit::PoundForce => (25.0, 75.0),
        };
        (steps.0 * self.force.newtons(), steps.1 * self.force.newtons())
    }

    /// Number of a mark: "300", "0.3".
    pub fn force_mark(self, tension_n: f64) -> String {
        let decimals = usize::from(self.force == ForceUnit::Kilonewton);
        format!("{:.decimals$}", self.force_value(tension_n))
    }

    pub fn speed_number(self, speed_mps: f64, decimals: usize) -> String {
        format!("{:.decimals$}", speed_mps / self.speed.metres_per_second())
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    // Conversion factors: NIST Special Publication 811 (2008), appendix B.8: 1 lbf = 4.448222 N, 1 kgf = 9.80665 N,
    // 1 knot = 0.5144444 m/s, 1 km/h = 0.2777778 m/s.
    #[test]
    fn every_unit_shows_the_published_factor() {
        let with = |force, speed| ShownUnits { force, speed };
        let pounds = with(ForceUnit::PoundForce, SpeedUnit::Knot);
        assert_eq!(pounds.force(444.8222), "100.0 lbf");
        assert_eq!(pounds.speed_number(51.44444, 2), "100.00");
        let kilograms = with(ForceUnit::KilogramForce, SpeedUnit::KilometrePerHour);
        assert_eq!(kilograms.force(980.665), "100.0 kgf");
        assert_eq!(kilograms.speed_number(27.77778, 2), "100.00");
        assert_eq!(with(ForceUnit::Kilonewton, SpeedUnit::MetrePerSecond).force(613.4), "0.613 kN");
        assert_eq!(ShownUnits::default().force(613.4), "613 N");
    }

    #[test]
    fn the_key_goes_round_and_comes_back_to_si() {
        let mut units = ShownUnits::default();
        for _ in 0..SETS.len() {
            units = units.next();
        }
        assert_eq!(units, ShownUnits::default());
        let own = ShownUnits { force: ForceUnit::PoundForce, speed: SpeedUnit::MetrePerSecond };
        assert_eq!(own.next(), ShownUnits::default());
    }
}
