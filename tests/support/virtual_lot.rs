//! A lot of cords that do not exist, hung with weights: the truth is known, and its law is none of those that are fitted.
//!
//! Tension: a saturating toe, a straight part and a steep end; coming in, a share of it that closes at the turning point.
//! Hidden: each cord's stiffness and length scale, the weights' common error, where the marks really are, the reader's eye.

use tautrail::estimation::Random;

pub const FREE_LENGTH_M: f64 = 2.7;
pub const NEWTONS_PER_KG: f64 = 9.814 * (1.0 - 1.2 / 8000.0);
pub const N_STEPS: u32 = 15;

/// Hidden spread, as the sheet states it.
pub const FORCE_RELATIVE: f64 = 0.002;
pub const FREE_LENGTH_U_M: f64 = 0.003;
pub const EYE_M: f64 = 0.001;

/// One cord as it really is.
#[derive(Debug, Clone, Copy)]
pub struct VirtualCord {
    stiffness: f64,
    stretch: f64,
}

impl VirtualCord {
    pub fn drawn(random: &mut Random) -> Self {
        Self { stiffness: 1.0 + 0.03 * random.normal(), stretch: 1.0 + 0.012 * random.normal() }
    }

    pub fn loading_n(self, elongation: f64) -> f64 {
        let e = elongation * self.stretch;
        let toe = 42.0 * -(-e / 0.24).exp_m1();
        let end = 9.0 * (1.0 + ((e - 1.35) / 0.11).exp()).ln();
        let end_at_zero = 9.0 * (1.0 + (-1.35_f64 / 0.11).exp()).ln();
        self.stiffness * (toe + 30.0 * e + end - end_at_zero)
    }

    /// Coming in from where it carried all the weights.
    pub fn unloading_n(self, elongation: f64) -> f64 {
        let turned = self.at_load(NEWTONS_PER_KG * f64::from(N_STEPS), Self::loading_n);
        let below = (1.0 - elongation / turned).max(0.0);
        self.loading_n(elongation) * (1.0 - 0.11 * below.powf(0.6))
    }

    fn at_load(self, tension_n: f64, law: impl Fn(Self, f64) -> f64) -> f64 {
        let (mut low, mut high) = (0.0, 4.0);
        for _ in 0..60 {
            let middle = 0.5 * (low + high);
            if law(self, middle) < tension_n { low = middle } else { high = middle }
        }
        0.5 * (low + high)
    }
}

/// The sheet of a lot and the CSV it names.
pub fn sheet(seed: u64, n_cords: usize) -> (String, String) {
    let mut random = Random::new(seed, 0);
    let weights = 1.0 + FORCE_RELATIVE * random.normal();
    let marks_m = FREE_LENGTH_M + FREE_LENGTH_U_M * random.normal();
    let mut csv = String::from("serial, cycle, branch, weight [kg], length [m]\n");
    for cord in 0..n_cords {
        let virtual_cord = VirtualCord::drawn(&mut random);
        let mut read = |branch: &str, kilograms: u32, elongation: f64, random: &mut Random| {
            let length_m = marks_m * (1.0 + elongation) + EYE_M * random.normal();
            csv.push_str(&format!(
                "v-{cord:02}, 4, {branch}, {kilograms}, {:.3}\n",
                (length_m * 1000.0).round() / 1000.0
            ));
        };
        let load_n = |kilograms: u32| NEWTONS_PER_KG * weights * f64::from(kilograms);
        for kilograms in 1..=N_STEPS {
            let elongation = virtual_cord.at_load(load_n(kilograms), VirtualCord::loading_n);
            read("load", kilograms, elongation, &mut random);
        }
        for kilograms in (1..N_STEPS).rev() {
            let elongation = virtual_cord.at_load(load_n(kilograms), VirtualCord::unloading_n);
            read("unload", kilograms, elongation, &mut random);
        }
    }
    let toml = format!(
        "kind = \"cord sheet\"\nlot = \"virtual {seed}\"\nperson = \"nobody\"\ndate = \"2031-05-04\"\ninvented = true\n\
         free_length = \"{FREE_LENGTH_M} m\"\nfree_length_uncertainty = \"{} mm\"\nmarks = \"painted rings\"\n\
         mass = \"0.35 kg\"\nconditioning_cycles = 3\ntemperature = \"20 degC\"\nforce_uncertainty = \"{} %\"\n\
         length_uncertainty = \"0.3 mm\"\ngravity = \"9.814 m/s2\"\nreadings = \"lot.csv\"\n",
        1000.0 * FREE_LENGTH_U_M,
        100.0 * FORCE_RELATIVE,
    );
    (toml, csv)
}
