//! What a rig's limit and cords rest on: proof load and cards, one line each, for the commands that show a limit.

use tautrail::rig::Rig;

use crate::cli::screen::Screen;

/// The proof load behind the g limit, or that there is none.
pub fn proof_sentence(rig: &Rig) -> String {
    rig.details.proof_load.as_ref().map_or_else(
        || "no proof load is recorded ([proof_load]): the g limit is a statement only".to_owned(),
        |proof| proof.sentence(),
    )
}

/// Proof load and cord cards.
pub fn print_standing(rig: &Rig, screen: &Screen) {
    screen.line(format!("  {}", proof_sentence(rig)));
    for card in rig.details.cards() {
        let (mean, between) = (100.0 * card.mean_uncertainty, 100.0 * card.between_cords);
        screen.line(format!(
            "  card {}: lot {}, {} cords tested to {:.0} % on {}; mean ± {mean:.1} %, between cords {between:.1} %",
            card.name,
            card.lot,
            card.serials.len(),
            100.0 * card.tested_to,
            card.date
        ));
    }
}
