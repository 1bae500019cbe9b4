use super::*;
use crate::estimation::testing::{number, numbers, reference_rows, reference_text, reference_toml};

// NIST/ITL StRD univariate sets NumAcc1-4 (generated), tolerances of the copy's notes.
#[test]
fn means_and_deviations_keep_their_digits_far_from_zero() {
    let sets = reference_toml("nist_strd_univariate.toml");
    for (name, tolerance) in [("numacc1", 1e-14), ("numacc2", 1e-14), ("numacc3", 1e-9), ("numacc4", 1e-8)] {
        let set = sets[name].as_table().unwrap();
        let pair = numbers(set, "pair");
        let mut values = vec![number(set, "first")];
        (0..set["pair_repeats"].as_integer().unwrap()).for_each(|_| values.extend(&pair));
        let running: RunningMean = values.iter().copied().collect();
        assert_eq!(running.count() as i64, set["n"].as_integer().unwrap());
        let (mean, sd) = (number(set, "mean"), number(set, "sd"));
        assert!((running.mean() - mean).abs() <= 1e-14 * mean, "{name}: {}", running.mean());
        let found = running.standard_deviation();
        assert!((found - sd).abs() <= tolerance * sd, "{name}: {found}");
        let r1 = lag1_autocorrelation(&values);
        assert!((r1 - number(set, "lag1_autocorrelation")).abs() <= 1e-9, "{name}: r1 {r1}");
    }
}

// JCGM 100:2008, table G.2 (to ten decimals by SciPy 1.17.1).
#[test]
fn student_factors_are_those_of_the_table() {
    let header = reference_text("student_t_two_sided.csv");
    let header = header.lines().find(|line| line.starts_with("dof")).unwrap();
    let percent: Vec<f64> =
        header.split(',').skip(1).map(|field| field.trim_start_matches('p').parse().unwrap()).collect();
    for row in reference_rows("student_t_two_sided.csv") {
        for (percent, expected) in percent.iter().zip(&row[1..]) {
            let found = coverage_factor(percent / 100.0, row[0]);
            assert!((found - expected).abs() <= 1e-8 * expected, "dof {} p {percent}: {found} for {expected}", row[0]);
        }
    }
}

// Handbook table of chi-square quantiles (to ten digits by SciPy 1.17.1).
#[test]
fn chi_square_quantiles_are_those_of_the_table() {
    let header = reference_text("chi_square_quantiles.csv");
    let header = header.lines().find(|line| line.starts_with("dof")).unwrap();
    let parts: Vec<f64> =
        header.split(',').skip(1).map(|field| field.trim_start_matches('q').parse().unwrap()).collect();
    for row in reference_rows("chi_square_quantiles.csv") {
        for (part, expected) in parts.iter().zip(&row[1..]) {
            let found = chi_square_quantile(*part, row[0]);
            assert!((found - expected).abs() <= 1e-8 * expected, "dof {} q {part}: {found} for {expected}", row[0]);
        }
    }
}

/// The components of a case, their combination, and its table.
fn case(name: &str, key: &str) -> (Component, toml::Table) {
    let table = reference_toml("welch_satterthwaite.toml")[name].as_table().unwrap().clone();
    let components: Vec<Component> = numbers(&table, key)
        .into_iter()
        .zip(numbers(&table, "nu"))
        .map(|(standard_uncertainty, degrees_of_freedom)| Component { standard_uncertainty, degrees_of_freedom })
        .collect();
    (combined(&components), table["recomputed"].as_table().unwrap().clone())
}

fn near(found: f64, expected: f64) {
    assert!((found - expected).abs() <= 1e-9 * expected, "{found} for {expected}");
}

// JCGM 100:2008 (GUM), examples G.4.1 and H.1: published 19 (18.9987 unrounded), 16.7 and 25.6; k₉₉ = 2.92.
#[test]
fn effective_degrees_of_freedom_are_those_of_the_guide() {
    let (product, expected) = case("gum_g4_1_example", "u_percent");
    near(product.standard_uncertainty, number(&expected, "u_c_percent"));
    near(product.degrees_of_freedom, number(&expected, "nu_eff"));
    assert!((product.degrees_of_freedom - 19.0).abs() <= 0.1);
    assert!((coverage_factor(0.95, 19.0) - number(&expected, "t95")).abs() < 1e-8);
    let (gauge, expected) = case("gum_h1_end_gauge", "u_nm");
    near(gauge.standard_uncertainty, number(&expected, "u_c_nm"));
    near(gauge.degrees_of_freedom, number(&expected, "nu_eff_unrounded_u_c"));
    let sixteen = Component { degrees_of_freedom: gauge.degrees_of_freedom.floor(), ..gauge };
    near(coverage_factor(0.99, 16.0), number(&expected, "t99_16"));
    assert!((sixteen.expanded(0.99) - 93.0).abs() < 0.5, "{}", sixteen.expanded(0.99));
    let (comparator, expected) = case("gum_h1_comparator_d", "u_nm");
    near(comparator.standard_uncertainty, number(&expected, "u_nm"));
    near(comparator.degrees_of_freedom, number(&expected, "nu_eff_unrounded_u"));
}

#[test]
fn certain_components_cover_as_the_normal_distribution_does() {
    let both = combined(&[Component::certain(3.0), Component::certain(4.0)]);
    assert_eq!(both, Component::certain(5.0));
    // 1.959963985, table of the normal distribution.
    assert!((both.expanded(0.95) - 5.0 * 1.959_963_985).abs() < 1e-8);
    assert_eq!(combined(&[]), Component::certain(0.0));
}

#[test]
fn what_can_not_be_covered_has_an_infinite_factor() {
    assert_eq!(coverage_factor(0.95, 0.5), f64::INFINITY);
    assert_eq!(coverage_factor(1.0, 10.0), f64::INFINITY);
    assert_eq!(coverage_factor(f64::NAN, 10.0), f64::INFINITY);
    assert_eq!(coverage_factor(0.95, f64::NAN), f64::INFINITY);
    assert_eq!(coverage_factor(-1.0, 10.0), 0.0);
    assert!(RunningMean::default().mean().is_nan());
    assert!(RunningMean::from_iter([1.0]).standard_deviation().is_nan());
}
