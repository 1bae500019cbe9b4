//! Cords against published values: first mode of a heavy cord, rubber, release acceleration, energy, convergence.

use crate::support::{assert_near, bare, let_go, linear_cord, number, reference_rows};
use virtual_rig::launcher::{Launcher, nominal_cord, north_pier};
use virtual_rig::physics::bench::{BenchPace, cord_on_bench};
use virtual_rig::physics::cord::CordGroup;
use virtual_rig::physics::course::Happening;
use virtual_rig::physics::launch::STEP_S;
use virtual_rig::physics::rubber::{ForceLaw, energy_density_j_per_m3, nominal_stress_pa};
use virtual_rig::physics::stroke::{Grip, LineMode, Mode, System, at};

/// Lowest angular frequency of cord and end mass, from the equations of motion themselves: accelerations against
/// displacements give the stiffness over mass, whose least eigenvalue is found by inverse iteration.
fn first_mode_rad_per_s(launcher: Launcher, n_masses: usize) -> f64 {
    let system = System { launcher, rail_rest_n: 0.0, step_s: STEP_S };
    let mode = Mode { grip: Grip::Sliding(1.0), joined: false, line: LineMode::Opening { t_s: -1.0, hold_n: 0.0 } };
    let still = system.held(0.0, 0.0, &[Default::default()], &Default::default());
    let places: Vec<(usize, usize)> = std::iter::once((at::SHUTTLE_X, at::SHUTTLE_V))
        .chain((0..n_masses).map(|idx| (at::FIRST_CORD + idx, at::FIRST_CORD + n_masses + idx)))
        .collect();
    let accelerations = |y: &[f64]| {
        let mut dy = vec![0.0; y.len()];
        system.derivative(0.0, y, &mode, &mut dy);
        places.iter().map(|place| dy[place.1]).collect::<Vec<f64>>()
    };
    let base = accelerations(&still);
    let n = places.len();
    let mut matrix = vec![vec![0.0; n]; n];
    for (column, place) in places.iter().enumerate() {
        let mut moved = still.clone();
        moved[place.0] += 1e-3;
        for (row, (after, before)) in accelerations(&moved).iter().zip(&base).enumerate() {
            matrix[row][column] = (before - after) / 1e-3;
        }
    }
    least_eigenvalue(&matrix).sqrt()
}

fn least_eigenvalue(matrix: &[Vec<f64>]) -> f64 {
    let n = matrix.len();
    let mut vector: Vec<f64> = (0..n).map(|idx| 1.0 - idx as f64 / n as f64).collect();
    let mut eigenvalue = 0.0;
    for _ in 0..60 {
        let solved = solved(matrix, &vector);
        let norm = solved.iter().map(|value| value * value).sum::<f64>().sqrt();
        eigenvalue = vector.iter().map(|value| value * value).sum::<f64>().sqrt() / norm;
        vector = solved.iter().map(|value| value / norm).collect();
    }
    eigenvalue
}

/// Gaussian elimination with row exchange.
fn solved(matrix: &[Vec<f64>], right: &[f64]) -> Vec<f64> {
    let n = right.len();
    let mut rows: Vec<Vec<f64>> = matrix.iter().zip(right).map(|(row, value)| [&row[..], &[*value]].concat()).collect();
    for column in 0..n {
        let pivot =
            (column..n).max_by(|a, b| rows[*a][column].abs().total_cmp(&rows[*b][column].abs())).unwrap_or(column);
        rows.swap(column, pivot);
        let pivot_row = rows[column].clone();
        for row in rows.iter_mut().skip(column + 1) {
            let factor = row[column] / pivot_row[column];
            row.iter_mut().zip(&pivot_row).for_each(|(value, above)| *value -= factor * above);
        }
    }
    let mut solution = vec![0.0; n];
    for idx in (0..n).rev() {
        let known: f64 = (idx + 1..n).map(|column| rows[idx][column] * solution[column]).sum();
        solution[idx] = (rows[idx][n] - known) / rows[idx][idx];
    }
    solution
}

fn heavy_cord(cord_over_end_mass: f64, n_masses: usize) -> Launcher {
    let mut launcher = bare(1.0);
    launcher.cords = vec![linear_cord(1.0, 1.0, cord_over_end_mass, n_masses)];
    launcher.anchor_x_m = 3.0;
    launcher
}

/// Exact: ζ tan ζ = m_c/m (Rayleigh, Theory of Sound, 156a; Timoshenko, Vibration Problems in Engineering), tabulated
/// in `tests/reference/launch/cord_mass.csv`.
#[test]
fn a_chain_of_masses_converges_to_the_exact_first_mode_of_a_heavy_cord() {
    for row in reference_rows("launch/cord_mass.csv") {
        let (ratio, exact) = (number(&row, 0), number(&row, 2));
        let error = |n_masses| first_mode_rad_per_s(heavy_cord(ratio, n_masses), n_masses) / exact - 1.0;
        let (coarse, fine, own) = (error(10), error(20), error(48));
        assert!(own.abs() < 1e-4, "m_c/m = {ratio}: 48 masses are off by {own}");
        assert_near(&format!("m_c/m = {ratio}: order of convergence"), (coarse / fine).log2(), 2.0, 0.05);
    }
}

/// Newton against Rayleigh's third (Theory of Sound, 156a): the first is exact at the first instant, the second is not.
#[test]
fn release_acceleration_is_force_over_mass_and_rayleigh_is_six_percent_low() {
    let mut launcher = bare(8.6);
    launcher.cords = vec![CordGroup { count: 6.0, kind: nominal_cord() }];
    launcher.anchor_x_m = 6.7;
    let course = let_go(&launcher, STEP_S);
    let first = course.rows.iter().find(|row| row.v_mps > 0.0).unwrap();
    let cords_n = 6.0 * nominal_cord().law.force_n(6.7 / 2.7);
    assert_near("a·m over force", first.shuttle_a_ground_mps2 * 8.6 / cords_n, 1.0, 1e-3);
    let rayleigh_mps2 = cords_n / (8.6 + launcher.cord_mass_kg() / 3.0);
    let low = 1.0 - rayleigh_mps2 / first.shuttle_a_ground_mps2;
    assert!((0.06..0.09).contains(&low), "Rayleigh is {low} low");
}

/// `tests/reference/ogden_treloar.toml` and `treloar_1944_uniaxial.csv` (Ogden 1972; Treloar 1944).
#[test]
fn rubber_follows_the_published_curve_and_energy() {
    let stretches = [1.5, 2.0, 3.0, 4.0, 5.0, 6.0];
    let energies = [0.115277990275, 0.370383434372, 1.11532006128, 2.14830962101, 3.59810201791, 5.73655102398];
    for (stretch, energy) in stretches.into_iter().zip(energies) {
        assert_near("energy density", energy_density_j_per_m3(stretch) * 1e-6 / energy, 1.0, 1e-10);
    }
    let law = ForceLaw::rubber(1.0, 1.0);
    for row in reference_rows("treloar_1944_uniaxial.csv") {
        let (stretch, measured, curve) = (number(&row, 0), number(&row, 2), number(&row, 3));
        assert_near("nominal stress", nominal_stress_pa(stretch) * 1e-6, curve, 1e-6);
        assert_near("tabulated force", law.force_n(stretch) * 1e-6, curve, 1e-6);
        if stretch <= 6.2 {
            assert_near("against the measured point", curve, measured, 0.1);
        }
    }
}

#[test]
fn a_cord_that_turns_gives_back_less_than_it_took_and_relaxes_in_the_hold() {
    let pace = BenchPace { draw_s: 11.5, hold_s: 5.0, return_s: 0.4 };
    let points = cord_on_bench(&nominal_cord(), 1.48, 30, pace);
    let area = |force: fn(&virtual_rig::physics::bench::BenchPoint) -> f64| {
        points.windows(2).map(|pair| 0.5 * (force(&pair[0]) + force(&pair[1])) * 1.48 / 29.0).sum::<f64>()
    };
    let loss = 1.0 - area(|point| point.unloading_n) / area(|point| point.loading_n);
    assert!((0.06..0.15).contains(&loss), "a cycle loses {loss} of the work");
    let end = points.last().unwrap();
    let decay = 1.0 - end.unloading_n / end.loading_n;
    assert!((0.002..0.02).contains(&decay), "the hold takes {decay} of the force");
}

#[test]
fn half_the_step_and_twice_the_masses_change_the_launch_little() {
    let run = |n_masses: usize, step_s: f64| {
        let mut launcher = north_pier();
        launcher.cords.iter_mut().for_each(|group| group.kind.n_masses = n_masses);
        let course = let_go(&launcher, step_s);
        assert!(course.energy_error < 1e-6, "energy closes to {}", course.energy_error);
        course.instant(Happening::Separation).map(|instant| instant.row.payload_v_ground_mps).unwrap_or_default()
    };
    let nominal = run(48, STEP_S);
    assert_near("half the step", run(48, 0.5 * STEP_S), nominal, 1e-6);
    assert_near("twice the masses", run(96, 0.5 * STEP_S), nominal, 1e-3);
}
