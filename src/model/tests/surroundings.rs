//! Gravity and air against tests/reference/{normal_gravity,isa_density,cipm2007_density}.csv.

use super::{assert_close, reference};
use crate::rig::{local_gravity_mps2, moist_air_density_kg_per_m3, standard_air_density_kg_per_m3};

#[test]
fn gravity_agrees_with_the_ellipsoid_of_grs80() {
    for row in reference("normal_gravity.csv") {
        assert_close("gravity", local_gravity_mps2(row[0].to_radians(), 0.0), row[1], 0.0, 1e-9);
    }
}

#[test]
fn gravity_falls_by_three_ten_thousandths_a_kilometre() {
    // Free-air gradient 0.3086 mGal/m (Heiskanen and Moritz, Physical Geodesy, 1967, section 3-3; from memory).
    let fall = local_gravity_mps2(0.785, 0.0) - local_gravity_mps2(0.785, 1000.0);
    assert_close("fall", fall, 3.086e-3, 1e-3, 0.0);
}

#[test]
fn standard_air_agrees_with_iso_2533() {
    for row in reference("isa_density.csv") {
        assert_close("density", standard_air_density_kg_per_m3(row[0]).unwrap(), row[3], 1e-8, 0.0);
    }
    assert!(standard_air_density_kg_per_m3(30_000.0).is_err());
}

#[test]
fn moist_air_agrees_with_cipm_2007() {
    for row in reference("cipm2007_density.csv") {
        assert_close("density", moist_air_density_kg_per_m3(row[0], row[1], row[2]).unwrap(), row[7], 1e-9, 0.0);
    }
    assert!(moist_air_density_kg_per_m3(20.0, 101_325.0, 1.2).is_err());
}
