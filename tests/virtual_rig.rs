//! The virtual rig's launch against SciPy's integration of the same equations, where no closed form exists.

mod support;

use virtual_rig::launcher::{Launcher, Payload, RailBody, north_pier};
use virtual_rig::physics::cord::{CordGroup, CordKind};
use virtual_rig::physics::course::{Course, Happening};
use virtual_rig::physics::launch::{Held, STEP_S, Start, launch};
use virtual_rig::physics::rubber::ForceLaw;
use virtual_rig::physics::stroke::System;

/// Spring, Coulomb friction, incline, head wind on both bodies and a recoiling rail, until the contact force vanishes.
const ORACLE: &str = r#"
import math
from scipy.integrate import solve_ivp
g, th, rho, w = 9.8146, math.radians(6.0), 1.225, 5.0
ms, mp, mr, kr, cr = 2.4, 6.2, 150.0, 3.0e4, 400.0
fr, k, x0 = 12.0, 150.0, 4.0
def drag(area, v): return 0.5 * rho * area * (v + w) * abs(v + w)
def forces(y):
    xs, vs, xr, vr = y
    pull = max(0.0, k * (x0 - (xs - xr)))
    a = (pull - fr - drag(0.02, vs) - drag(0.05, vs)) / (ms + mp) - g * math.sin(th)
    ar = (-pull + fr - kr * xr - cr * vr + k * x0) / mr
    contact = mp * (a + g * math.sin(th)) + drag(0.05, vs)
    return a, ar, contact
def rhs(t, y):
    a, ar, _ = forces(y)
    return [y[1], a, y[3], ar]
def parting(t, y): return forces(y)[2]
parting.terminal, parting.direction = True, -1
run = solve_ivp(rhs, (0, 1), [0, 0, 0, 0], method="DOP853", rtol=1e-11, atol=1e-12, events=parting)
t, y = run.t_events[0][0], run.y_events[0][0]
print(t, y[0] - y[2], y[1], y[3])
"#;

/// The oracle's rig: one massless linear cord on north-pier's bodies, the rail's spring carrying the cord beforehand.
fn sprung() -> Launcher {
    let kind = CordKind {
        free_length_m: 1.0,
        mass_kg: 0.0,
        law: ForceLaw::Linear { stiffness_n: 150.0 },
        hysteresis: 0.0,
        turn_stretch: 0.1,
        relaxation: [(0.0, 1.0); 2],
        damping_n_s: 0.0,
        n_masses: 0,
    };
    let mut launcher = north_pier();
    launcher.cords = vec![CordGroup { count: 1.0, kind }];
    launcher.anchor_x_m = 5.0;
    launcher.head_wind_mps = 5.0;
    launcher.payload = Some(Payload { mass_kg: 6.2, drag_area_m2: 0.05, latch_opens_x_m: 0.3, comes_off_x_m: None });
    launcher.rail = RailBody { mass_kg: 150.0, stiffness_n_per_m: 3.0e4, damping_n_s_per_m: 400.0 };
    launcher.shuttle.friction_static_n = 12.0;
    launcher
}

fn let_go(launcher: Launcher) -> Course {
    let held = Held { t_s: 0.0, x_m: 0.0, line_n: 0.0, memories: vec![Default::default()], gas: Default::default() };
    launch(System { launcher, rail_rest_n: -600.0, step_s: STEP_S }, &held, Start::HookOpens)
}

#[test]
fn the_virtual_rig_parts_from_its_payload_where_scipy_says() {
    let printed = support::run_oracle(ORACLE, &[]);
    let numbers: Vec<f64> = printed.split_whitespace().map(|text| text.parse().unwrap()).collect();
    let [t_s, x_m, v_mps, rail_v_mps] = numbers[..] else { panic!("the oracle printed {printed:?}") };
    let course = let_go(sprung());
    let parting = course.instant(Happening::Separation).unwrap();
    let near = |what: &str, found: f64, expected: f64| {
        assert!((found - expected).abs() < 1e-7, "{what}: found {found}, SciPy says {expected}");
    };
    near("time", parting.t_s, t_s);
    near("x", parting.row.x_m, x_m);
    near("launch speed", parting.row.payload_v_ground_mps, v_mps);
    near("recoil", parting.row.rail_v_mps, rail_v_mps);
}
