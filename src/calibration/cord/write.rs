//! A cord card as text: what the rig file and the launch model read, then the evidence for people.

use std::fmt::Write as _;

use super::branch::BranchFit;
use super::characterise::Characterised;
use super::law::LawKind;
use crate::rig::{CordSheet, RelaxationTerm};

/// Points of a curve that is no spline.
const POINTS: u32 = 30;
/// Places of the band that the evidence lists.
const BAND: u32 = 15;

/// The card of a lot.
pub fn card_text(sheet: &CordSheet, made: &Characterised) -> String {
    let mut text = String::from(
        "# Cord card, written by `tautrail cord card`; the rig file points to it with card = \"…\" under [cords].\n\
         # Limits and forecasts made from it advise only; interlocks, local codes and licensed practice decide.\n\n",
    );
    heading(&mut text, sheet, made);
    factors(&mut text, sheet, made);
    relaxation(&mut text, made);
    curve(&mut text, "curve", &made.unloading, made.tested_to);
    curve(&mut text, "loading_curve", &made.loading, made.tested_to);
    uncertainty(&mut text, made);
    evidence(&mut text, sheet, made);
    text
}

fn put(text: &mut String, line: std::fmt::Arguments<'_>) {
    // Writing into a String can't fail.
    let _ = text.write_fmt(line);
    text.push('\n');
}

fn quoted(text: &str) -> String {
    toml::Value::String(text.to_owned()).to_string()
}

fn quoted_list(all: &[String]) -> String {
    all.iter().map(|one| quoted(one)).collect::<Vec<_>>().join(", ")
}

fn heading(text: &mut String, sheet: &CordSheet, made: &Characterised) {
    put(text, format_args!("kind = \"cord card\""));
    put(text, format_args!("lot = {}", quoted(&sheet.lot)));
    put(text, format_args!("person = {}", quoted(&sheet.person)));
    put(text, format_args!("date = \"{}\"", sheet.date));
    if sheet.invented {
        put(text, format_args!("invented = true"));
    }
    put(text, format_args!("serials = [{}]", quoted_list(&made.serials)));
    put(text, format_args!("marks = {}", quoted(&sheet.marks)));
    put(text, format_args!("free_length = \"{:.4} m\"", sheet.free_length_m.value));
    put(text, format_args!("mass = \"{:.4} kg\"", sheet.mass_kg));
    put(text, format_args!("tested_to = \"{:.3} %\"", 100.0 * made.tested_to));
    put(
        text,
        format_args!("# The tension at an elongation: on the way out, and coming in from the tested elongation."),
    );
    put(text, format_args!("loading_law = {}", quoted(&made.loading.law.kind.words())));
    put(text, format_args!("law = {}", quoted(&made.unloading.law.kind.words())));
}

fn factors(text: &mut String, sheet: &CordSheet, made: &Characterised) {
    let width = made.turning.width;
    put(
        text,
        format_args!(
            "# Turned back at an elongation, a cord comes down to the lower branch over this width (by a factor e)."
        ),
    );
    put(text, format_args!("branch_gap_width = \"{:.3} %\"", 100.0 * width.value));
    put(text, format_args!("branch_gap_width_uncertainty = \"{:.3} %\"", 100.0 * width.standard_uncertainty));
    put(text, format_args!("turned_at = [{}]", percents(&made.turning.turned_at)));
    put(text, format_args!("curve_temperature = \"{:.1} degC\"", sheet.temperature_c));
    put(text, format_args!("curve_cycle = {:.2}", made.factors.card_cycle));
    if let Some(loss) = made.factors.loss_per_tenfold_cycles {
        put(text, format_args!("tension_loss_per_tenfold_cycles = \"{:.3} %\"", 100.0 * loss.value.max(0.0)));
        let u = 100.0 * loss.standard_uncertainty;
        put(text, format_args!("tension_loss_per_tenfold_cycles_uncertainty = \"{u:.3} %\""));
    }
    if let Some(change) = made.factors.per_kelvin {
        put(text, format_args!("tension_per_kelvin = \"{:.4} %\"", 100.0 * change.value));
        put(text, format_args!("tension_per_kelvin_uncertainty = \"{:.4} %\"", 100.0 * change.standard_uncertainty));
    }
}

fn percents(all: &[f64]) -> String {
    all.iter().map(|one| format!("\"{:.1} %\"", 100.0 * one)).collect::<Vec<_>>().join(", ")
}

fn relaxation(text: &mut String, made: &Characterised) {
    let Some(relaxation) = &made.relaxation else { return };
    let term = |term: &RelaxationTerm| {
        format!("{{ share = \"{:.4} %\", time = \"{:.3} s\" }}", 100.0 * term.share, term.time_s)
    };
    let terms: Vec<String> = relaxation.terms.iter().map(term).collect();
    put(
        text,
        format_args!(
            "# Prony terms, the winch-back's ramp convolved, faster ones than a third of it left in the curve; known to {:.0} s of hold.",
            relaxation.longest_s
        ),
    );
    put(text, format_args!("relaxation = [{}]", terms.join(", ")));
    put(
        text,
        format_args!(
            "# Part of the tension that relaxation had left while the branches were read; the rig divides by it."
        ),
    );
    put(text, format_args!("loading_curve_relaxed_to = \"{:.3} %\"", 100.0 * made.left_while_read[0]));
    put(text, format_args!("curve_relaxed_to = \"{:.3} %\"", 100.0 * made.left_while_read[1]));
}

/// Places to list: the knots of a spline, else evenly.
fn places(branch: &BranchFit, tested_to: f64) -> Vec<f64> {
    let mut places: Vec<f64> = match branch.law.kind {
        LawKind::Spline { .. } => branch.law.parameters.chunks(2).map(|knot| knot[0]).collect(),
        _ => (0..=POINTS).map(|point| tested_to * f64::from(point) / f64::from(POINTS)).collect(),
    };
    places.retain(|place| *place < 0.999 * tested_to);
    places.push(tested_to);
    places
}

fn curve(text: &mut String, key: &str, branch: &BranchFit, tested_to: f64) {
    put(text, format_args!("{key} = ["));
    let mut least_n: f64 = 0.0;
    for place in places(branch, tested_to) {
        least_n = branch.law.tension_n(place).max(least_n);
        put(text, format_args!("    {{ elongation = \"{:.4} %\", tension = \"{least_n:.4} N\" }},", 100.0 * place));
    }
    put(text, format_args!("]"));
}

impl Characterised {
    /// Relative standard uncertainty of the lot's mean pull, by energy on the unloading branch. Of a few cords it is widened, so
    /// that twice it still covers 95 %.
    pub fn mean_uncertainty(&self) -> f64 {
        let at = |part: u32| self.unloading.band(self.tested_to * f64::from(part) / f64::from(BAND));
        let (wide, tension) = (1..=BAND)
            .map(at)
            .fold((0.0, 0.0), |sum, one| (sum.0 + one.mean.expanded(0.95) / 1.96, sum.1 + one.tension_n));
        wide / tension
    }

    /// Relative standard deviation between cords, measured or assumed.
    pub fn between_cords(&self) -> f64 {
        self.relative_scatter.unwrap_or(self.assumed_scatter)
    }

    /// What the unknown width of the turning point does to the energy given back, relative, as a standard uncertainty.
    pub fn turning_uncertainty(&self) -> f64 {
        let gap_n = self.loading.law.tension_n(self.tested_to) - self.unloading.law.tension_n(self.tested_to);
        let at_middle =
            self.loading.law.tension_n(0.8 * self.tested_to) - self.unloading.law.tension_n(0.8 * self.tested_to);
        gap_n.max(at_middle).max(0.0) * self.turning.width.standard_uncertainty
            / self.unloading.law.integral_n(self.tested_to)
    }
}

fn uncertainty(text: &mut String, made: &Characterised) {
    put(
        text,
        format_args!(
            "\n[uncertainty]\n# Relative standard uncertainties: of the lot's mean, between its cords, of the turning-point rule."
        ),
    );
    put(text, format_args!("mean = \"{:.3} %\"", 100.0 * made.mean_uncertainty()));
    put(text, format_args!("between_cords = \"{:.3} %\"", 100.0 * made.between_cords()));
    put(text, format_args!("turning_point = \"{:.3} %\"", 100.0 * made.turning_uncertainty()));
}

fn evidence(text: &mut String, sheet: &CordSheet, made: &Characterised) {
    put(text, format_args!("\n[evidence]"));
    put(text, format_args!("conditioning_cycles = {}", sheet.conditioning_cycles));
    put(text, format_args!("scatter_assumed = {}", made.relative_scatter.is_none()));
    put(text, format_args!("lost_in_a_cycle = \"{:.2} J\"", made.hysteresis_j.0));
    put(text, format_args!("lost_in_a_cycle_uncertainty = \"{:.2} J\"", made.hysteresis_j.1));
    put(text, format_args!("cautions = [{}]", quoted_list(&made.cautions)));
    for (name, branch) in [("loading", &made.loading), ("unloading", &made.unloading)] {
        put(text, format_args!("\n[evidence.{name}]"));
        for one in &branch.comparisons {
            let error = match (&one.left_out_rms_n, one.falls) {
                (Ok(rms_n), false) => format!("{rms_n:.4} N at steps left out"),
                (Ok(rms_n), true) => format!("{rms_n:.4} N at steps left out, but falls somewhere"),
                (Err(why), _) => why.clone(),
            };
            put(text, format_args!("{} = {}", quoted(&one.law), quoted(&error)));
        }
        let parameters: Vec<String> = branch.law.parameters.iter().map(|one| format!("{one:.9e}")).collect();
        put(text, format_args!("parameters = [{}]", parameters.join(", ")));
        put(
            text,
            format_args!("# elongation %, tension N, u of the mean N, half-width that covers 95 % of further cords N"),
        );
        put(text, format_args!("band = ["));
        for part in 1..=BAND {
            let at = branch.band(made.tested_to * f64::from(part) / f64::from(BAND));
            let (u_n, half_n) = (at.mean.standard_uncertainty, at.one_cord.expanded(0.95));
            let percent = 100.0 * at.elongation;
            put(text, format_args!("    [{percent:.2}, {:.3}, {u_n:.3}, {half_n:.3}],", at.tension_n));
        }
        put(text, format_args!("]"));
    }
    more_evidence(text, sheet, made);
}

fn more_evidence(text: &mut String, sheet: &CordSheet, made: &Characterised) {
    if let Some(relaxation) = &made.relaxation {
        let shares: Vec<String> =
            relaxation.share_uncertainties.iter().map(|u| format!("\"{:.4} %\"", 100.0 * u)).collect();
        put(text, format_args!("\n[evidence.relaxation]\nshare_uncertainties = [{}]", shares.join(", ")));
        put(text, format_args!("relative_rms = \"{:.4} %\"", 100.0 * relaxation.relative_rms));
        put(text, format_args!("longest_hold = \"{:.1} s\"", relaxation.longest_s));
        put(text, format_args!("cell_creep_taken_off = \"{:.4} %\"", 100.0 * relaxation.cell_creep_removed));
    }
    for creep in &made.creep {
        put(text, format_args!("\n[[evidence.creep]]\nserial = {}", quoted(&creep.serial)));
        put(
            text,
            format_args!("tension = \"{:.3} N\"\nelongation = \"{:.3} %\"", creep.tension_n, 100.0 * creep.elongation),
        );
        put(
            text,
            format_args!(
                "per_tenfold_of_time = \"{:.4} %\"\nlongest = \"{:.0} s\"",
                100.0 * creep.per_tenfold,
                creep.longest_s
            ),
        );
    }
    put(text, format_args!("\n[evidence.cycles]\n# serial, cycle, temperature degC, tension against the loading law"));
    put(text, format_args!("data = ["));
    for one in &made.factors.data {
        let (serial, cycle, temperature_c, factor) = (quoted(&one.serial), one.cycle, one.temperature_c, one.factor);
        put(text, format_args!("    [{serial}, {cycle}, {temperature_c:.1}, {factor:.5}],"));
    }
    put(text, format_args!("]\n\n[evidence.readings]\n# serial, cycle, branch, time s, tension N, elongation %"));
    put(text, format_args!("data = ["));
    for one in &sheet.readings {
        let time = one.time_s.map_or_else(|| "\"\"".to_owned(), |time_s| format!("{time_s:.2}"));
        let (serial, branch, percent) = (quoted(&one.serial), one.branch.word(), 100.0 * one.elongation);
        put(
            text,
            format_args!("    [{serial}, {}, \"{branch}\", {time}, {:.4}, {percent:.4}],", one.cycle, one.tension_n),
        );
    }
    put(text, format_args!("]"));
}
