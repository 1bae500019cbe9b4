//! Text to [`Rig`], with all findings at once.

use std::path::{Path, PathBuf};

use super::attached::{Attached, read_joined, take_apart};
use super::details::{CordDetails, Details, SettingUncertainties};
use super::document::{Findings, Section};
use super::finding::{Finding, RigError};
use super::text_read::read_text;
use super::{Cords, Rig, channels, checks, cord_items, detail_sections, proof, reading_sections, sections};

/// What a rig file's text amounts to.
#[derive(Debug, Clone)]
pub struct Checked {
    /// Absent while there is an error among the findings.
    pub rig: Option<Rig>,
    /// Errors and cautions, in the order of the text.
    pub findings: Vec<Finding>,
}

/// Reads a rig file's text, [joined](super::join) with what it points to, and reports every finding. Pure.
///
/// Syntax errors come alone: what the rest of such a text means can't be told.
pub fn check(text: &str) -> Checked {
    let (own, attached) = take_apart(text);
    let (rig, findings) = read_text(own, |root, findings| Some(whole(text, attached, root, findings)));
    Checked { rig, findings }
}

fn whole(text: &str, attached: Vec<Attached>, mut root: Section<'_, '_>, findings: &mut Findings<'_>) -> Rig {
    let name = channels::plain_name(&mut root, findings);
    let invented = root.optional_flag(findings, "invented");
    let [site, rail, shuttle, payload, losses, limits, plan] =
        ["site", "rail", "shuttle", "payload", "losses", "limits", "plan"].map(|key| root.section(findings, key));
    let gas = detail_sections::gas(&mut root, findings);
    let force_tables = detail_sections::force_tables(&mut root, findings);
    let pulled_otherwise = !gas.is_empty() || !force_tables.is_empty();
    let cords =
        if pulled_otherwise { root.optional_section(findings, "cords") } else { Some(root.section(findings, "cords")) };
    let (cords, cord_details) = cords
        .map_or_else(|| (Cords::none(), CordDetails::default()), |table| sections::cords(table, &attached, findings));
    let devices = channels::devices(&mut root, findings);
    let channels = channels::channels(&mut root, findings, &devices, &attached);
    let inputs = reading_sections::inputs(&mut root, findings, &devices);
    checks::channels(&channels, &devices, &inputs, findings);
    let (site, of_site) = sections::site(site, findings);
    let (rail, brake, uncoupling_x_m) = sections::rail(rail, findings);
    let (payload, payload_details) = sections::payload(payload, findings);
    let (losses, more_losses, loss_card) = sections::losses(losses, findings);
    let (plan, of_plan) = sections::plan(plan, findings);
    let (limits, asymmetry_limit) = sections::limits(limits, findings);
    let details = Details {
        cords: cord_details,
        more_cords: detail_sections::more_cords(&mut root, &attached, findings),
        gas,
        force_tables,
        losses: more_losses,
        rail_support: detail_sections::rail_support(&mut root, findings),
        payload: payload_details,
        brake,
        uncoupling_x_m,
        settings: SettingUncertainties {
            head_wind_mps: of_site.head_wind_mps,
            air_density_relative: of_site.air_density_relative,
            ..of_plan
        },
        correlations: detail_sections::correlations(&mut root, findings),
        stages: detail_sections::stages(&mut root, findings),
        cord_items: cord_items::cord_items(&mut root, findings),
        proof_load: proof::proof_load(&mut root, findings),
        reading: reading_sections::reading(&mut root, findings),
        inputs,
        asymmetry_limit,
    };
    let mut rig = Rig {
        name,
        invented,
        site,
        rail,
        shuttle: sections::shuttle(shuttle, findings),
        payload,
        cords,
        losses,
        details,
        limits,
        plan,
        devices,
        channels: channels.calibrated,
        uncalibrated: channels.uncalibrated,
        attached,
        text: text.to_owned(),
    };
    if let Some(pointer) = loss_card {
        sections::put_loss_card(&mut rig, &pointer, findings);
    }
    checks::rig(&rig, findings);
    root.finish(findings);
    rig
}

/// The rig of a text. Port paths stay as written. Pure.
///
/// # Errors
/// [`RigError::Refused`] with all findings when one of them is an error.
pub fn parse(text: &str) -> Result<Rig, RigError> {
    let Checked { rig, findings } = check(text);
    rig.ok_or(RigError::Refused { path: String::new(), findings })
}

/// The rig of a file. A relative port path is taken from the rig file's folder.
///
/// # Errors
/// [`RigError`]: the file can't be read, or what it says is refused.
pub fn load(path: &Path) -> Result<Rig, RigError> {
    let shown = path.display().to_string();
    let text = read_joined(path)?;
    let Checked { rig, findings } = check(&text);
    let mut rig = rig.ok_or(RigError::Refused { path: shown, findings })?;
    for device in &mut rig.devices {
        device.port = port_path(path, &device.port).display().to_string();
    }
    Ok(rig)
}

/// Where a port path of the rig file at `rig_path` points.
pub fn port_path(rig_path: &Path, port: &str) -> PathBuf {
    rig_path.parent().map_or_else(|| PathBuf::from(port), |folder| folder.join(port))
}
