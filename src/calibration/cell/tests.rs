//! Calibrations from sheets. Standards' formulas are checked in their own files.

use super::*;
use crate::calibration::testing::{number, reference_toml};
use crate::calibration::{cell_record, readings_from_csv, to_value};
use crate::rig::{CalibrationRecord, Sheet, SheetReading};

const SHEET: &str = r#"
kind = "cell"
channel = "line"
sensor = "invented cell 0417"
person = "rig engineer"
date = "2031-05-04"
valid_until = "2032-05-04"
invented = true
drift_per_year = "0.05 %"
masses_common_uncertainty = "0.002 %"
[place]
latitude = "54.5 deg"
altitude = "6 m"
air_density = "1.225 kg/m3"
air_density_uncertainty = "0.02 kg/m3"
"#;

fn sheet_text(n_masses: usize) -> String {
    let masses = (1..=n_masses).map(|index| {
        format!(
            "[[mass]]\nname = \"M{index}\"\nmass = \"8 kg\"\nuncertainty = \"0.0004 kg\"\ndensity = \"7850 kg/m3\"\n"
        )
    });
    SHEET.to_owned() + &masses.collect::<String>()
}

fn stack(n: usize) -> String {
    if n == 0 { "0".to_owned() } else { (1..=n).map(|index| format!("M{index}")).collect::<Vec<_>>().join("+") }
}

/// Runs up and down over all masses; `counts` of run, number of masses, whether up.
fn csv(runs: &[(&str, f64)], n_masses: usize, counts: impl Fn(&str, usize, bool) -> f64) -> String {
    let mut text = String::from("run,rotation_deg,direction,load,counts\n");
    for (run, rotation) in runs {
        for n in 0..=n_masses {
            text.push_str(&format!("{run},{rotation},up,{},{}\n", stack(n), counts(run, n, true)));
        }
        for n in (0..n_masses).rev() {
            text.push_str(&format!("{run},{rotation},down,{},{}\n", stack(n), counts(run, n, false)));
        }
    }
    text
}

fn sheet(n_masses: usize, csv: &str) -> Sheet {
    let (sheet, findings) = Sheet::read(&sheet_text(n_masses));
    let mut sheet = sheet.unwrap_or_else(|| panic!("{findings:?}"));
    sheet.readings = readings_from_csv(csv).unwrap();
    sheet
}

/// A cell of 2000 counts a newton at zero 12000.
fn straight(_: &str, n: usize, _: bool) -> f64 {
    12_000.0 + 2000.0 * weight_n() * n as f64
}

fn weight_n() -> f64 {
    let gravity = crate::rig::local_gravity_mps2(54.5_f64.to_radians(), 6.0);
    dead_weight_n(8.0, gravity, 1.225, 7850.0)
}

const THREE: [(&str, f64); 3] = [("1", 0.0), ("2", 120.0), ("3", 240.0)];
const FOUR: [(&str, f64); 4] = [("1", 0.0), ("2", 0.0), ("3", 120.0), ("4", 240.0)];

// tests/reference/dead_weight.toml: constructed cases of the buoyancy formula, recomputed; rel 1e-10.
#[test]
fn dead_weights_have_the_force_of_the_reference_cases() {
    let cases = reference_toml("dead_weight.toml");
    for case in cases["case"].as_array().unwrap().iter().filter_map(|case| case.as_table()) {
        if let Some(expected) = case.get("force_N").and_then(toml::Value::as_float) {
            let get = |key| number(case, key);
            let found = dead_weight_n(get("mass_kg"), get("g"), get("rho_air"), get("rho_mass"));
            assert!((found - expected).abs() <= 1e-10 * expected, "{found} for {expected}");
        }
    }
    let gravity = cases["gravity"].as_table().unwrap();
    let found = crate::rig::local_gravity_mps2(52f64.to_radians(), 60.0);
    assert!((found - number(gravity, "gamma_height_second_order")).abs() < 1e-9, "{found}");
}

#[test]
fn a_straight_cell_comes_back_with_its_masses_uncertainty() {
    let found = calibrate(&sheet(10, &csv(&THREE, 10, straight))).unwrap();
    assert_eq!(found.degree, 1);
    assert!((found.coefficients.coefficients[1] - 1.0 / 2000.0).abs() < 1e-15);
    assert!((found.coefficients.zero_counts - 12_000.0).abs() < 1e-9);
    let top = found.steps.last().unwrap();
    assert!((top.force_n - 10.0 * weight_n()).abs() < 1e-6);
    // Ten masses of 0.4 g each, by the line's weights no more than their sum in quadrature: 1.26 g of 80 kg; their
    // reference 2e-5, gravity from latitude 5e-5, air 0.02/7850.
    let masses = top.shares.iter().find(|share| share.source == "masses").unwrap().component.standard_uncertainty;
    assert!(masses > 0.5 * 0.00126 * 9.81 && masses < 1.1 * 0.00126 * 9.81, "{masses}");
    let common = top.shares[1].component.standard_uncertainty / top.force_n;
    assert!((common - 2e-5_f64.hypot(5e-5).hypot(0.02 / 7850.0)).abs() < 1e-9, "{common}");
    assert_eq!(found.flagged().count(), 0);
}

#[test]
fn hysteresis_creep_and_return_are_found() {
    let csv = csv(&THREE, 10, |run, n, up| {
        let back = if up { 0.0 } else { 400.0 * (1.0 - (n as f64 / 10.0).powi(2)) };
        straight(run, n, up) + back
    }) + &format!(
        "3,240,up,0,12000\n3,240,up,{0},{1}\n3,240,creep,{0},{1}\n3,240,creep,{0},{2}\n",
        stack(10),
        straight("", 10, true),
        straight("", 10, true) + 157.0
    );
    let csv = csv.replace(
        "\n3,240,up,0,12000\n3,240,up,M1+M2+M3+M4+M5+M6+M7+M8+M9+M10",
        "\n4,240,up,0,12000\n4,240,up,M1+M2+M3+M4+M5+M6+M7+M8+M9+M10",
    );
    let csv = csv.replace("3,240,creep", "4,240,creep");
    let found = calibrate(&sheet(10, &csv)).unwrap();
    let figures = &found.figures;
    assert!((figures.zero_return_n.unwrap() - 0.2).abs() < 0.001, "{:?}", figures.zero_return_n);
    assert!((figures.reversibility_n.unwrap() - 0.198).abs() < 0.003, "{:?}", figures.reversibility_n);
    assert!((figures.creep_relative.unwrap() - 1e-4).abs() < 1e-6, "{:?}", figures.creep_relative);
}

#[test]
fn a_bent_cell_gets_the_degree_that_it_needs() {
    let bent = |run: &str, n: usize, up: bool| {
        let straight = straight(run, n, up) - 12_000.0;
        12_000.0 + straight * (1.0 + 2e-3 * straight / 1.6e6)
    };
    let found = calibrate(&sheet(10, &csv(&THREE, 10, bent))).unwrap();
    assert_eq!(found.degree, 2);
    let residual = found.points.iter().map(|point| point.residual_n.abs()).fold(0.0, f64::max);
    assert!(residual < 0.002, "{residual}");
    assert!(found.figures.non_linearity_n > 0.2, "{}", found.figures.non_linearity_n);
}

#[test]
fn no_class_is_named_unless_the_series_satisfies_the_rule() {
    let short = calibrate(&sheet(5, &csv(&THREE[..1], 5, straight))).unwrap();
    let e74 = short.manners.e74.unwrap();
    assert_eq!(e74.class_lower_limits_n, None);
    assert!(e74.against.iter().any(|why| why == "5 rising readings, 30 are wanted"), "{:?}", e74.against);
    assert!(short.manners.iso376.is_err());
    let noisy = |run: &str, n: usize, up: bool| straight(run, n, up) + if run == "2" && n > 0 { 30.0 } else { 0.0 };
    let long = calibrate(&sheet(10, &csv(&FOUR, 10, noisy))).unwrap();
    let e74 = long.manners.e74.unwrap();
    assert!(e74.against.iter().any(|why| why.contains("the applied force is known to 0.015 %")), "{:?}", e74.against);
    assert_eq!(e74.class_lower_limits_n, None);
    let iso = long.manners.iso376.unwrap();
    assert_eq!(iso.class, None);
    assert_eq!(iso.against, ["no creep readings (30 s and 300 s)"]);
}

#[test]
fn a_full_series_with_good_masses_has_its_class() {
    let mut csv = csv(&FOUR, 10, |run, n, up| straight(run, n, up) + if run == "3" { 5.0 * n as f64 } else { 0.0 });
    csv.push_str(&format!(
        "5,0,up,0,12000\n5,0,up,{0},{1}\n5,0,creep,{0},{1}\n5,0,creep,{0},{1}\n",
        stack(10),
        straight("", 10, true)
    ));
    let mut sheet = sheet(10, &csv);
    if let crate::rig::Standard::Masses { masses, common_relative_uncertainty } = &mut sheet.standard {
        masses.iter_mut().for_each(|mass| mass.uncertainty_kg = 1e-5);
        *common_relative_uncertainty = 1e-6;
    }
    sheet.place.gravity_uncertainty_mps2 = 1e-5;
    let found = calibrate(&sheet).unwrap();
    let e74 = found.manners.e74.unwrap();
    assert_eq!(e74.against, Vec::<String>::new());
    let (class_a, class_aa) = e74.class_lower_limits_n.unwrap();
    assert!((class_a - 400.0 * e74.lower_limit_factor_n).abs() < 1e-9 && (class_aa - 5.0 * class_a).abs() < 1e-9);
    assert_eq!(found.manners.iso376.unwrap().class, Some("00"));
}

#[test]
fn one_reading_ten_times_off_is_flagged_and_kept() {
    let csv = csv(&THREE, 10, |run, n, up| if run == "2" && n == 4 && up { 10.0 } else { 1.0 } * straight(run, n, up));
    let found = calibrate(&sheet(10, &csv)).unwrap();
    assert_eq!(found.points.len(), 63);
    let flagged: Vec<&str> = found.flagged().map(|point| point.load.place.as_str()).collect();
    assert_eq!(flagged, ["line 27"]);
    let top = found.steps.last().unwrap();
    assert!(top.expanded_n > 10.0, "a fit with it in is worth little, and says so: {}", top.expanded_n);
    assert!(found.manners.e74.unwrap().against.contains(&"a reading is flagged".to_owned()));
}

#[test]
fn readings_that_can_not_calibrate_are_refused_with_their_place() {
    let said = |csv: &str| calibrate(&sheet(10, csv)).expect_err("must be refused").to_string();
    let head = "run,direction,load,counts\n";
    assert_eq!(
        said(&format!("{head}1,up,0,12000\n1,up,M1+M2,3.2e5\n1,up,M1,1.6e5\n")),
        format!(
            "line 4: {:.2} N after {:.2} N is no rising step of run 1: put the readings in the order in which they were taken",
            weight_n(),
            2.0 * weight_n()
        )
    );
    assert!(
        said(&format!("{head}1,up,0,12000\n1,up,M1,1.6e5\n1,up,M1+M2,3.2e5\n"))
            .starts_with("2 different loads over zero can't show a curve")
    );
    assert!(said(&csv(&THREE, 10, |_, _, _| 7.0)).starts_with("all readings are the same, 7 counts"));
    assert!(
        said(&format!("{head}1,up,0,12000\n1,up,M1,8388607\n"))
            .contains("line 3: 8388607 counts are at the end of what the channel can read")
    );
    assert_eq!(said(&format!("{head}1,up,0,nan\n")), "line 2: the reading is not a number");
    assert_eq!(
        said(&format!("{head}1,up,M1,1.6e5\n")),
        "run 1 does not begin without load: read the zero first (load \"0\", direction up)"
    );
    assert!(
        said(&format!("{head}1,up,0,1\n1,up,Q,2\n"))
            .starts_with("line 3: there is no mass \"Q\" in the sheet, there are: M1, M2")
    );
    assert_eq!(said(&format!("{head}1,up,0,1\n1,up,M1+M1,2\n")), "line 3: mass \"M1\" hangs twice");
    assert!(said(&format!("{head}1,side,0,1\n")).contains("direction \"side\" is not known"));
}

#[test]
fn a_reference_transducer_states_forces_and_kilograms_are_refused() {
    let text = SHEET.replace("masses_common_uncertainty = \"0.002 %\"", "reference_uncertainty = \"0.05 %\"");
    let mut reference = Sheet::read(&text).0.unwrap();
    let reading = |load: &str, counts: f64| SheetReading {
        place: "line 2".into(),
        run: "1".into(),
        direction: "up".into(),
        load: load.into(),
        counts,
        ..SheetReading::default()
    };
    reference.readings = (0..6).map(|n| reading(&format!("{} N", 100 * n), 12_000.0 + 2e5 * f64::from(n))).collect();
    reference.readings[0].load = "0".into();
    let found = calibrate(&reference).unwrap();
    assert!((found.coefficients.coefficients[1] - 5e-4).abs() < 1e-15);
    assert!((found.steps[4].standard_n / 500.0 - 5e-4).abs() < 1e-5);
    reference.readings[1].load = "10 kg".into();
    let said = calibrate(&reference).expect_err("must be refused").to_string();
    assert_eq!(said, "line 2: load: \"kg\" is a mass, not a force; write \"kgf\" if the reading is in kilograms-force");
    reference.readings[1].load = "10 m".into();
    assert!(calibrate(&reference).expect_err("refused").to_string().contains("is a length, not a force"));
}

#[test]
fn a_displays_last_digit_is_its_resolution() {
    let text =
        SHEET.replace("masses_common_uncertainty = \"0.002 %\"", "reference_uncertainty = \"0 %\"\ncounts_step = 0.5");
    let mut display = Sheet::read(&text).0.unwrap();
    display.readings =
        readings_from_csv("run,direction,load,counts\n1,up,0,0\n1,up,100 N,100\n1,up,200 N,200\n1,up,300 N,300\n")
            .unwrap();
    let found = calibrate(&display).unwrap();
    // Half a digit either way, rectangular (JCGM 100:2008, F.2.2.1): 0.5 N / √12.
    assert!((found.steps[2].standard_n - 0.5 / 12f64.sqrt()).abs() < 1e-9, "{:?}", found.steps[2]);
}

#[test]
fn ratiometric_readings_do_not_see_the_excitation_sag() {
    let mut sagging = sheet(10, &csv(&THREE, 10, straight));
    sagging.excitation_v = Some(5.0);
    for (index, reading) in sagging.readings.iter_mut().enumerate() {
        let v = 5.0 - 0.01 * index as f64;
        reading.excitation_v = Some(v);
        reading.counts *= v / 5.0;
    }
    let found = calibrate(&sagging).unwrap();
    assert!((found.coefficients.coefficients[1] - 1.0 / 2000.0).abs() < 1e-12);
    sagging.readings[3].excitation_v = None;
    assert!(calibrate(&sagging).expect_err("refused").to_string().contains("has no excitation_v"));
}

#[test]
fn the_record_says_what_the_calibration_found() {
    let mut with_shunt = sheet(10, &csv(&THREE, 10, straight));
    with_shunt.shunt_counts = Some(812_000.0);
    let found = calibrate(&with_shunt).unwrap();
    let text = cell_record(&with_shunt, &found, "the \"sheet\"\n");
    let (record, findings) = CalibrationRecord::read("line.toml", &text);
    let record = record.unwrap_or_else(|| panic!("{findings:?}\n{text}"));
    assert_eq!(record.coefficients.coefficients, found.coefficients.coefficients);
    assert_eq!(record.coefficients.zero_counts, found.coefficients.zero_counts);
    assert!((to_value(&record.coefficients, 12_000.0 + 2000.0 * 500.0) - 500.0).abs() < 1e-9);
    assert!((record.shunt.unwrap().deflection_counts - 800_000.0).abs() < 1e-6);
    assert!((record.drift_relative_per_year - 5e-4).abs() < 1e-12);
    assert!(text.contains("in_the_manner_of_astm_e74") && text.contains("no_class_because"));
    let table: toml::Table = text.parse().unwrap();
    assert_eq!(table["evidence"]["sheet"].as_str(), Some("the \"sheet\"\n"));
    assert_eq!(table["evidence"]["reading"].as_array().map(Vec::len), Some(63));
}
