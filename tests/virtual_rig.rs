//! The virtual rig's launch against SciPy's integration of the same equations, where no closed form exists.

mod support;

use virtual_rig::launcher::{Launcher, Payload, RailBody, north_pier};
use virtual_rig::physics::cord::{CordGroup, CordKind};
use virtual_rig::physics::course::{Course, Happening};
use virtual_rig::physics::gas::GasDrive;
use virtual_rig::physics::launch::{Held, STEP_S, Start, launch};
use virtual_rig::physics::rubber::ForceLaw;
use virtual_rig::physics::stroke::System;
use virtual_rig::physics::trajectory::Row;

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

/// Bottle and cylinder of one polytrope joined by a nozzle that chokes, back-pressure, friction, weight and drag; the
/// payload stays on the shuttle. Prints speed and both pressures at the end of the piston's stroke.
const GAS_ORACLE: &str = r#"
import math
from scipy.integrate import solve_ivp
R, T, gamma, n = 287.05, 293.15, 1.4, 1.25
p0, pa, V1, A, V2 = 5.6e5, 101325.0, 0.012, 1.2566e-3, 2e-4
valve, kb, m, g, th, rho = 6e-5, 30.0, 8.6, 9.8146, math.radians(6.0), 1.225
rho0 = p0 / (R * T)
def pressure(density): return p0 * (density / rho0) ** n
def psi(r):
    critical = (2 / (gamma + 1)) ** (gamma / (gamma - 1))
    r = max(r, critical)
    if r > 0.999:
        return psi(0.999) * (1 - r) / 0.001
    return math.sqrt(2 * gamma / (gamma - 1) * (r ** (2 / gamma) - r ** ((gamma + 1) / gamma)))
def state(y):
    d1, d2 = y[2] / V1, y[3] / (V2 + A * y[0])
    return d1, d2, pressure(d1), pressure(d2)
def rhs(t, y):
    d1, d2, p1, p2 = state(y)
    flow = valve * math.sqrt(p1 * d1) * psi(p2 / p1) if p1 >= p2 else -valve * math.sqrt(p2 * d2) * psi(p1 / p2)
    force = A * (p2 - pa - kb * y[1] * abs(y[1])) - 12.0 - 0.5 * rho * 0.07 * y[1] * abs(y[1])
    return [y[1], force / m - g * math.sin(th), -flow, flow]
def end(t, y): return y[0] - 2.8
end.terminal = True
run = solve_ivp(rhs, (0, 2), [0, 0, rho0 * V1, rho0 * V2], method="LSODA", rtol=1e-11, atol=1e-13, events=end, max_step=1e-3)
y = run.y_events[0][0]
_, _, p1, p2 = state(y)
print(run.t_events[0][0], y[1], p1, p2)
"#;

#[test]
fn the_virtual_rigs_gas_cylinder_goes_as_scipy_says() {
    let printed = support::run_oracle(GAS_ORACLE, &[]);
    let numbers: Vec<f64> = printed.split_whitespace().map(|text| text.parse().unwrap()).collect();
    let [t_s, v_mps, bottle_pa, cylinder_pa] = numbers[..] else { panic!("the oracle printed {printed:?}") };
    let course = launch(System { launcher: blown(), rail_rest_n: 0.0, step_s: 10e-6 }, &filled(), Start::HookOpens);
    let after = course.rows.partition_point(|row| row.x_m < 2.8);
    let (before, row) = (&course.rows[after - 1], &course.rows[after]);
    let share = (2.8 - before.x_m) / (row.x_m - before.x_m);
    let at_end = |value: fn(&Row) -> f64| value(before) + share * (value(row) - value(before));
    let near = |what: &str, found: f64, expected: f64| {
        assert!((found / expected - 1.0).abs() < 1e-6, "{what}: found {found}, SciPy says {expected}");
    };
    near("time", at_end(|row| row.t_s), t_s);
    near("speed", at_end(|row| row.v_mps), v_mps);
    near("bottle", at_end(|row| row.reservoir_pa), bottle_pa);
    near("cylinder", at_end(|row| row.cylinder_pa), cylinder_pa);
    assert!(cylinder_pa < 0.9 * bottle_pa, "the valve must throttle for this to mean anything");
}

/// The gas oracle's rig, its rail practically unmovable.
fn blown() -> Launcher {
    let mut launcher = north_pier();
    launcher.cords.clear();
    launcher.rail = RailBody { mass_kg: 1e15, stiffness_n_per_m: 0.0, damping_n_s_per_m: 0.0 };
    launcher.shuttle.friction_static_n = 12.0;
    launcher.payload = launcher.payload.map(|payload| Payload { latch_opens_x_m: f64::MAX, ..payload });
    launcher.gas = Some(GasDrive {
        reservoir_m3: 0.012,
        charge_pa: 5.6e5,
        ambient_pa: 101_325.0,
        temperature_k: 293.15,
        polytropic_exponent: 1.25,
        piston_area_m2: 1.2566e-3,
        dead_volume_m3: 2e-4,
        stroke_m: 2.8,
        venting_m: 0.05,
        valve_area_m2: 6e-5,
        valve_opening_s: 0.08,
        leak_per_s: 0.0,
        back_pressure_pa_s2_per_m2: 30.0,
    });
    launcher
}

fn filled() -> Held {
    let gas = blown().gas.map(|drive| drive.filled()).unwrap_or_default();
    Held { t_s: 0.0, x_m: 0.0, v_mps: 0.0, line_n: 0.0, memories: Vec::new(), gas }
}

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
    let held = Held {
        t_s: 0.0,
        x_m: 0.0,
        v_mps: 0.0,
        line_n: 0.0,
        memories: vec![Default::default()],
        gas: Default::default(),
    };
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
