//! Energy closes over random rigs, every term named.

use proptest::prelude::*;

use super::super::{
    Brake, CordSet, Curve, EventKind, ForceTable, GasPath, GasSource, LaunchSetup, ModelError, RailLosses, Recoil,
    simulate,
};

fn card(scale_n: f64) -> impl Strategy<Value = (Curve, Curve)> {
    prop::collection::vec(0.3..2.0_f64, 5..9).prop_map(move |steps| {
        let total: f64 = steps.iter().sum();
        let last = steps.len() as f64;
        let mut points = vec![(0.0, 0.0)];
        for (i, step) in steps.iter().enumerate() {
            points.push((1.8 * (i as f64 + 1.0) / last, points[i].1 + scale_n * step / total));
        }
        let above: Vec<(f64, f64)> = points.iter().map(|(e, n)| (*e, 1.06 * n)).collect();
        (Curve::through(&points).unwrap(), Curve::through(&above).unwrap())
    })
}

fn cord_set() -> impl Strategy<Value = CordSet> {
    (card(130.0), 1.0..6.0_f64, 2.0..3.0_f64, 0.0..0.4_f64, 0.7..1.1_f64, 2.5..4.0_f64, prop::bool::ANY).prop_map(
        |((unloading, loading), count, free_length_m, mass_kg, travel_ratio, zero_mark_x_m, massless)| CordSet {
            mass_kg: if massless { 0.0 } else { mass_kg },
            travel_ratio,
            retension_x_m: Some(zero_mark_x_m + 2.2),
            loading: Some(loading),
            held_gap_n: 5.0,
            ..CordSet::simple(count, free_length_m, zero_mark_x_m, unloading)
        },
    )
}

fn gas() -> impl Strategy<Value = GasSource> {
    (3e5..8e5_f64, 1.0..1.5_f64, prop::bool::ANY).prop_map(|(charged_pressure_pa, polytropic_exponent, valve)| {
        GasSource {
            charged_pressure_pa,
            ambient_pressure_pa: 101_325.0,
            back_pressure_pa: 500.0,
            vessel_volume_m3: 0.003,
            dead_volume_m3: 1e-4,
            temperature_k: 288.0,
            polytropic_exponent,
            piston_area_m2: 6e-4,
            travel_ratio: 1.0,
            stroke_m: 3.1,
            hold_s: 10.0,
            leak_time_s: 1000.0,
            path: if valve {
                GasPath::Valve { valve_area_m2: 2e-5, line_area_m2: 5e-5, opening_s: 0.02 }
            } else {
                GasPath::Straight
            },
        }
    })
}

fn setup() -> impl Strategy<Value = LaunchSetup> {
    let losses = (0.0..20.0_f64, 0.0..0.1_f64, 0.0..0.03_f64, 0.0..2.0_f64, prop::bool::ANY);
    let bodies = (1.0..4.0_f64, 2.0..9.0_f64, -0.1..0.25_f64, -3.0..6.0_f64);
    let sources = (prop::collection::vec(cord_set(), 1..4), prop::option::of(gas()), prop::bool::ANY);
    let rest = (prop::option::of((60.0..300.0_f64, 1e4..1e5_f64, 0.0..500.0_f64)), 200.0..900.0_f64, prop::bool::ANY);
    (losses, bodies, sources, rest).prop_map(|(losses, bodies, sources, rest)| LaunchSetup {
        payload_mass_kg: bodies.1,
        incline_rad: bodies.2,
        head_wind_mps: bodies.3,
        air_density_kg_per_m3: 1.2,
        payload_drag_area_m2: 0.05,
        shuttle_drag_area_m2: 0.02,
        lift_area_m2: 0.1,
        cords: sources.0,
        gas: sources.1.into_iter().collect(),
        tables: if sources.2 {
            vec![ForceTable { force_n: Curve::through(&[(0.0, 40.0), (1.1, 10.0), (2.3, 25.0)]).unwrap() }]
        } else {
            Vec::new()
        },
        losses: RailLosses {
            friction_n: losses.0,
            load_coefficient: losses.1,
            pull_coefficient: losses.2,
            viscous_n_per_mps: losses.3,
            along_x_n: losses.4.then(|| Curve::through(&[(-5.0, 3.0), (1.7, 6.0), (9.0, 2.0)]).unwrap()),
            breakaway_n: 10.0,
        },
        recoil: rest.0.map(|(mass_kg, stiffness_n_per_m, damping_n_per_mps)| Recoil {
            mass_kg,
            stiffness_n_per_m,
            damping_n_per_mps,
        }),
        brake: Brake { from_x_m: 5.0, constant_n: rest.1, per_metre_n_per_m: 100.0, per_speed_n_per_mps: 5.0 },
        thrust: rest.2.then(|| Curve::through(&[(0.0, 20.0), (12.0, 15.0), (40.0, 2.0)]).unwrap()),
        ..LaunchSetup::bare(bodies.0, 8.0)
    })
}

#[test]
fn energy_closes_where_cords_tighten_again_on_a_rail_that_recoils() {
    let unloading = Curve::through(&[(0.0, 0.0), (0.6, 60.0), (1.2, 90.0), (1.8, 150.0)]).unwrap();
    let loading = Curve::through(&[(0.0, 0.0), (0.6, 66.0), (1.2, 98.0), (1.8, 160.0)]).unwrap();
    let cords = CordSet {
        mass_kg: 0.3,
        retension_x_m: Some(5.2),
        loading: Some(loading),
        held_gap_n: 5.0,
        ..CordSet::simple(4.0, 2.5, 3.0, unloading)
    };
    let setup = LaunchSetup {
        payload_mass_kg: 6.0,
        cords: vec![cords],
        recoil: Some(Recoil { mass_kg: 80.0, stiffness_n_per_m: 2e4, damping_n_per_mps: 100.0 }),
        losses: RailLosses { friction_n: 8.0, ..RailLosses::default() },
        brake: Brake { from_x_m: 6.5, constant_n: 60.0, per_metre_n_per_m: 0.0, per_speed_n_per_mps: 0.0 },
        ..LaunchSetup::bare(2.0, 9.0)
    };
    let run = simulate(&setup).unwrap();
    let kinds: Vec<EventKind> = run.events.iter().map(|event| event.kind).collect();
    assert!(kinds.contains(&EventKind::CordsTaut { set: 0 }) && kinds.contains(&EventKind::Reversal), "{kinds:?}");
    assert!(
        run.energy_at_end.recoil_damping_j > 0.1 && run.energy_at_end.hysteresis_j > 0.1,
        "{:?}",
        run.energy_at_end
    );
    for energy in [run.energy_at_separation, run.energy_at_end] {
        assert!(energy.closure_j.abs() <= 1e-8 * energy.sources_j(), "{energy:?}");
    }
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(200))]

    #[test]
    fn energy_closes_to_a_hundred_millionth_in_every_configuration(setup in setup()) {
        match simulate(&setup) {
            Ok(run) => {
                for energy in [run.energy_at_separation, run.energy_at_end] {
                    let share = energy.closure_j.abs() / energy.sources_j();
                    prop_assert!(share <= 1e-8, "closes to {share:e}: {energy:?}");
                }
            }
            Err(ModelError::CannotMove { .. }) => {}
            Err(other) => prop_assert!(false, "{other}"),
        }
    }
}
