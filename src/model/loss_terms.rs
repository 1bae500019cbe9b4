//! The losses of a launch, one by one: off, given or to be fitted, and whether they belong to the rail or to each cord.

use super::run::LaunchRun;
use super::setup::LaunchSetup;
use crate::rig::{Asked, Given, Rig};

/// What a loss travels with: a loss of the rail stays when cords are changed, one of the cords scales with their number.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum BelongsTo {
    Rail,
    EachCord,
    Payload,
}

#[derive(Debug, Clone, Copy, PartialEq)]
pub enum LossState {
    Off,
    Given(Given),
    /// Named in `losses.fit`: the value in the rig file, if any, is where a fit starts.
    ToBeFitted(Option<Given>),
}

#[derive(Debug, Clone, Copy, PartialEq)]
pub struct LossTerm {
    /// As in the rig file and in `losses.fit`.
    pub name: &'static str,
    pub meaning: &'static str,
    pub unit: &'static str,
    pub belongs_to: BelongsTo,
    pub state: LossState,
}

/// Every loss this model knows, in the state the rig file gives it.
pub fn loss_terms(rig: &Rig) -> Vec<LossTerm> {
    let (basic, more) = (&rig.losses, &rig.details.losses);
    let relative = |there: bool, u: f64| there.then_some(Given { value: 1.0, standard_uncertainty: u });
    let branches = !rig.details.cords.loading_curve.is_empty();
    let cords_u = rig.cords.force_relative_uncertainty;
    let support = rig.details.rail_support;
    let rail = BelongsTo::Rail;
    let all = [
        ("friction", "constant friction", "N", rail, Some(basic.friction_n)),
        ("load_friction", "friction by the load across the rail", "", rail, more.load_coefficient),
        ("pull_friction", "friction by the cords' pull", "", BelongsTo::EachCord, more.pull_coefficient),
        ("viscous", "viscous loss", "N s/m", rail, more.viscous_n_per_mps),
        ("shuttle_drag_area", "drag of the shuttle", "m^2", rail, Some(basic.shuttle_drag_area_m2)),
        ("payload_drag_area", "drag of the payload", "m^2", BelongsTo::Payload, Some(rig.payload.drag_area_m2)),
        ("hysteresis", "loading above unloading branch", "relative", BelongsTo::EachCord, relative(branches, cords_u)),
        ("recoil", "rail on its support", "N/m", rail, support.map(|support| support.stiffness_n_per_m)),
        (
            "along_x",
            "free form over x",
            "relative",
            rail,
            relative(!more.along_x.is_empty(), more.along_x_relative_uncertainty),
        ),
        ("breakaway", "breakaway friction", "N", rail, more.breakaway_n),
        ("cord_lag", "held tension the cords don't give back", "", BelongsTo::EachCord, more.cord_lag),
        ("cord_viscous", "viscous loss of a cord", "N s/m", BelongsTo::EachCord, more.cord_viscous_n_per_mps),
    ];
    let state = |name: &str, given: Option<Given>| {
        let there = given.filter(|given| given.value != 0.0 || given.standard_uncertainty != 0.0);
        if more.fit.iter().any(|fitted| fitted == name) {
            return LossState::ToBeFitted(there);
        }
        there.map_or(LossState::Off, LossState::Given)
    };
    let term = |(name, meaning, unit, belongs_to, given)| LossTerm {
        name,
        meaning,
        unit,
        belongs_to,
        state: state(name, given),
    };
    all.into_iter().map(term).collect()
}

/// Sentences on losses that a fit is still to find: what stands in for them in a forecast until then.
pub fn unfitted(rig: &Rig) -> Vec<String> {
    let terms = loss_terms(rig).into_iter().filter_map(|term| match term.state {
        LossState::ToBeFitted(prior) => Some((term, prior)),
        LossState::Off | LossState::Given(_) => None,
    });
    let sentence = |(term, prior): (LossTerm, Option<Given>)| {
        let (name, unit) = (term.meaning, term.unit);
        let space = if unit.is_empty() { "" } else { " " };
        match prior {
            Some(Given { value, standard_uncertainty }) if standard_uncertainty > 0.0 => format!(
                "NOT FITTED YET: {name}: the rig file's {value}{space}{unit} with its standard uncertainty of \
                 {standard_uncertainty}{space}{unit} stands in for it"
            ),
            Some(Given { value, .. }) => format!(
                "NOT FITTED YET: {name}: the rig file's {value}{space}{unit} stands in for it as if it were exact, so \
                 the intervals are too narrow; give it an uncertainty"
            ),
            None => format!(
                "NOT FITTED YET: {name}: the rig file gives no value, so it is left out and the intervals do not cover \
                 it; give it a value with its uncertainty"
            ),
        }
    };
    terms.map(sentence).collect()
}

/// Sentences on where a launch lies outside what the trials behind the rig's loss card spanned.
pub fn beyond_loss_card(rig: &Rig, setup: &LaunchSetup, run: &LaunchRun) -> Vec<String> {
    let Some(card) = &rig.details.losses.card else { return Vec::new() };
    let cords_alone = setup.gas.is_empty() && setup.tables.is_empty();
    card.outside(&Asked {
        cord_count: cords_alone.then(|| setup.cords.iter().map(|set| set.count).sum()),
        moving_mass_kg: setup.shuttle_mass_kg + setup.payload_mass_kg,
        draw_m: rig.rail.zero_mark_x_m - setup.start_x_m,
        pull_n: cords_alone.then(|| setup.cord_pull_n(setup.start_x_m)),
        launch_speed_mps: run.answers.separation.map(|at| at.launch_speed_mps),
    })
}

#[cfg(test)]
mod tests {
    use super::{BelongsTo, LossState, loss_terms, unfitted};
    use crate::rig::{self, testing::NORTH_PIER};

    #[test]
    fn each_loss_is_off_given_or_to_be_fitted() {
        let asked = NORTH_PIER.replace("[losses]\n", "[losses]\nfit = [\"friction\", \"viscous\"]\n");
        let terms = loss_terms(&rig::parse(&asked).unwrap());
        let state = |name: &str| terms.iter().find(|term| term.name == name).unwrap().state;
        assert!(matches!(state("friction"), LossState::ToBeFitted(Some(given)) if given.value == 12.0));
        assert_eq!(state("viscous"), LossState::ToBeFitted(None));
        assert_eq!(state("along_x"), LossState::Off);
        assert!(matches!(state("shuttle_drag_area"), LossState::Given(_)));
        assert!(terms.iter().any(|term| term.belongs_to == BelongsTo::EachCord));
        let sentences = unfitted(&rig::parse(&asked).unwrap());
        assert!(sentences[0].contains("12 N with its standard uncertainty of 3 N stands in"), "{sentences:?}");
        assert!(sentences[1].contains("the intervals do not cover it") && sentences.len() == 2, "{sentences:?}");
    }

    #[test]
    fn an_unknown_loss_to_fit_is_refused_with_those_there_are() {
        let asked = NORTH_PIER.replace("[losses]\n", "[losses]\nfit = [\"fricton\"]\n");
        let findings: Vec<String> = rig::check(&asked).findings.iter().map(ToString::to_string).collect();
        assert!(
            findings.iter().any(|finding| finding.contains("losses.fit") && finding.contains("friction")),
            "{findings:?}"
        );
    }
}
