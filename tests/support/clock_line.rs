//! A line between a device and the host with known truth, and how far clock maps fitted over it are off. Delays: common
//! practice, no published source. Shared by the clock's own tests and by the bench section that prints their figures.

use std::ops::RangeInclusive;

use super::{BlockTimes, ClockPiece, LiveClock, NominalClock, TimeExchange, fit_clock, piece_at};

/// Seeded, so that every run is the same: xorshift64* (Vigna 2016, from memory).
pub struct Random(u64);

impl Random {
    pub fn seeded(seed: u64) -> Self {
        let mut random = Self(seed.wrapping_mul(0x9E37_79B9_7F4A_7C15) | 1);
        (0..8).for_each(|_| _ = random.uniform());
        random
    }

    pub fn uniform(&mut self) -> f64 {
        self.0 ^= self.0 >> 12;
        self.0 ^= self.0 << 25;
        self.0 ^= self.0 >> 27;
        (self.0.wrapping_mul(0x2545_F491_4F6C_DD1D) >> 11) as f64 / (1_u64 << 53) as f64
    }

    pub fn exponential(&mut self, mean: f64) -> f64 {
        -mean * (1.0 - self.uniform()).ln()
    }
}

/// A line between a device and the host, and the device's clock. Times in seconds of the host.
#[derive(Debug, Clone, Copy)]
pub struct Link {
    pub offset_ppm: f64,
    /// The rate swings by this once in 40 s.
    pub wander_ppm: f64,
    pub tolerance_ppm: f64,
    pub duration_s: f64,
    pub block_every_s: f64,
    /// 0 for none.
    pub requests_per_s: f64,
    /// What has come in is handed on only at multiples of this.
    pub batch_s: f64,
    pub hidden_up_s: f64,
    pub hidden_down_s: f64,
    pub jitter_s: f64,
}

pub const CRYSTAL: Link = Link {
    offset_ppm: 100.0,
    wander_ppm: 0.0,
    tolerance_ppm: 150.0,
    duration_s: 30.0,
    block_every_s: 0.01,
    requests_per_s: 10.0,
    batch_s: 0.001,
    hidden_up_s: 0.000_1,
    hidden_down_s: 0.000_1,
    jitter_s: 0.000_05,
};

pub const TICK_RATE_HZ: f64 = 1e6;
pub const BOOT_S: f64 = 5_000.0;

impl Link {
    /// Device time of a host time since boot, seconds.
    pub fn device_s(&self, since_boot_s: f64) -> f64 {
        let turn_per_s = std::f64::consts::TAU / 40.0;
        let swing_s = self.wander_ppm * 1e-6 / turn_per_s * (1.0 - (turn_per_s * since_boot_s).cos());
        since_boot_s * (1.0 + self.offset_ppm * 1e-6) + swing_s
    }

    pub fn tick(&self, host_s: f64) -> u64 {
        (self.device_s(host_s - BOOT_S) * TICK_RATE_HZ) as u64
    }

    /// Host time of a tick, nanoseconds, by fixed-point iteration.
    pub fn truth_ns(&self, tick: u64) -> f64 {
        let device_s = (tick as f64 + 0.5) / TICK_RATE_HZ;
        let since_boot_s = (0..8).fold(device_s, |guess_s, _| guess_s + device_s - self.device_s(guess_s));
        (BOOT_S + since_boot_s) * 1e9
    }

    pub fn nominal(&self) -> NominalClock {
        NominalClock::ticking(TICK_RATE_HZ, self.tolerance_ppm)
    }

    pub fn up_s(&self, sent_s: f64, phase_s: f64, random: &mut Random) -> f64 {
        let ready_s = sent_s + self.hidden_up_s;
        let batched_s = if self.batch_s > 0.0 {
            ((ready_s - phase_s) / self.batch_s).ceil() * self.batch_s + phase_s
        } else {
            ready_s
        };
        let stall_s = if random.uniform() < 0.003 { random.exponential(0.01) } else { 0.0 };
        batched_s + random.exponential(self.jitter_s) + stall_s
    }

    pub fn play(&self, seed: u64) -> (Vec<BlockTimes>, Vec<TimeExchange>) {
        let random = &mut Random::seeded(seed);
        let start_s = BOOT_S + 10.0 * random.uniform();
        let phase_s = random.uniform() * self.batch_s;
        let mut arrivals = Vec::new();
        let device_interval_s = self.block_every_s / (1.0 + self.offset_ppm * 1e-6);
        for number in 0..(self.duration_s / self.block_every_s) as u32 {
            let sent_s = start_s + f64::from(number) * device_interval_s;
            let host_s = self.up_s(sent_s, phase_s, random);
            arrivals.push(BlockTimes { boot_id: 1, sent_tick: self.tick(sent_s), host_ns: (host_s * 1e9) as i64 });
        }
        let mut exchanges = Vec::new();
        for number in 0..(self.duration_s * self.requests_per_s) as u32 {
            let asked_s = start_s + (f64::from(number) + random.uniform()) / self.requests_per_s;
            let received_s = asked_s + self.hidden_down_s + random.exponential(self.jitter_s);
            let sent_s = received_s + 2e-5;
            exchanges.push(TimeExchange {
                boot_id: 1,
                requested_host_ns: (asked_s * 1e9) as i64,
                received_tick: self.tick(received_s),
                sent_tick: self.tick(sent_s),
                replied_host_ns: (self.up_s(sent_s, phase_s, random) * 1e9) as i64,
            });
        }
        (arrivals, exchanges)
    }

    /// What the map would say with perfect timing of both paths, against the truth.
    pub fn bias_ns(&self) -> f64 {
        if self.requests_per_s > 0.0 { 0.5e9 * (self.hidden_up_s - self.hidden_down_s) } else { 1e9 * self.hidden_up_s }
    }
}

pub struct Errors {
    /// 95th percentile over runs of the largest error in the last second, apart from the asymmetry, ns.
    pub p95_ns: f64,
    /// Part of the runs whose error, asymmetry included, stays inside 1.96 u all the time.
    pub covered: f64,
    pub mean_u_ns: f64,
}

pub fn errors_of(link: Link, seeds: RangeInclusive<u64>, map: impl Fn(&Link, u64) -> Vec<(u64, ClockPiece)>) -> Errors {
    let n_runs = seeds.clone().count() as f64;
    let (mut worst, mut n_covered, mut sum_u_ns) = (Vec::new(), 0, 0.0);
    for seed in seeds {
        let looked_up = map(&link, seed);
        let error_ns = |(tick, piece): &(u64, ClockPiece)| piece.host_ns(*tick) - link.truth_ns(*tick);
        let last_second = &looked_up[looked_up.len() - (1.0 / link.block_every_s) as usize..];
        let random_ns = last_second.iter().map(|at| (error_ns(at) - link.bias_ns()).abs()).fold(0.0, f64::max);
        worst.push(random_ns);
        n_covered += u32::from(looked_up.iter().all(|at| error_ns(at).abs() <= 1.96 * at.1.u_ns));
        sum_u_ns += looked_up.last().unwrap().1.u_ns;
    }
    worst.sort_by(f64::total_cmp);
    let p95_ns = worst[(worst.len() * 95).div_ceil(100) - 1];
    Errors { p95_ns, covered: f64::from(n_covered) / n_runs, mean_u_ns: sum_u_ns / n_runs }
}

pub fn sealed(link: &Link, seed: u64) -> Vec<(u64, ClockPiece)> {
    let (arrivals, exchanges) = link.play(seed);
    let pieces = fit_clock(link.nominal(), &arrivals, &exchanges);
    let ticks = arrivals.iter().map(|times| times.sent_tick);
    ticks.map(|tick| (tick, *piece_at(&pieces, 1, tick).unwrap())).collect()
}

/// As the map stood at each arrival.
pub fn live(link: &Link, seed: u64) -> Vec<(u64, ClockPiece)> {
    let (arrivals, exchanges) = link.play(seed);
    let mut clock = LiveClock::new(link.nominal());
    let mut exchanges = exchanges.iter().peekable();
    let mut looked_up = Vec::new();
    for times in &arrivals {
        while let Some(exchange) = exchanges.next_if(|exchange| exchange.replied_host_ns <= times.host_ns) {
            clock.exchanged(exchange);
        }
        clock.arrived(times);
        looked_up.push((times.sent_tick, *clock.piece().unwrap()));
    }
    looked_up
}
