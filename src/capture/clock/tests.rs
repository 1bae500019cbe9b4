//! Maps against clocks and lines whose truth is known. Delays: common practice, no published source.

use proptest::prelude::*;

use super::*;

/// Seeded, so that every run is the same: xorshift64* (Vigna 2016, from memory).
struct Random(u64);

impl Random {
    fn seeded(seed: u64) -> Self {
        let mut random = Self(seed.wrapping_mul(0x9E37_79B9_7F4A_7C15) | 1);
        (0..8).for_each(|_| _ = random.uniform());
        random
    }

    fn uniform(&mut self) -> f64 {
        self.0 ^= self.0 >> 12;
        self.0 ^= self.0 << 25;
        self.0 ^= self.0 >> 27;
        (self.0.wrapping_mul(0x2545_F491_4F6C_DD1D) >> 11) as f64 / (1_u64 << 53) as f64
    }

    fn exponential(&mut self, mean: f64) -> f64 {
        -mean * (1.0 - self.uniform()).ln()
    }
}

/// A line between a device and the host, and the device's clock. Times in seconds of the host.
#[derive(Debug, Clone, Copy)]
struct Link {
    offset_ppm: f64,
    /// The rate swings by this once in 40 s.
    wander_ppm: f64,
    tolerance_ppm: f64,
    duration_s: f64,
    block_every_s: f64,
    /// 0 for none.
    requests_per_s: f64,
    /// What has come in is handed on only at multiples of this.
    batch_s: f64,
    hidden_up_s: f64,
    hidden_down_s: f64,
    jitter_s: f64,
}

const CRYSTAL: Link = Link {
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

const TICK_RATE_HZ: f64 = 1e6;
const BOOT_S: f64 = 5_000.0;

impl Link {
    /// Device time of a host time since boot, seconds.
    fn device_s(&self, since_boot_s: f64) -> f64 {
        let turn_per_s = std::f64::consts::TAU / 40.0;
        let swing_s = self.wander_ppm * 1e-6 / turn_per_s * (1.0 - (turn_per_s * since_boot_s).cos());
        since_boot_s * (1.0 + self.offset_ppm * 1e-6) + swing_s
    }

    fn tick(&self, host_s: f64) -> u64 {
        (self.device_s(host_s - BOOT_S) * TICK_RATE_HZ) as u64
    }

    /// Host time of a tick, nanoseconds, by fixed-point iteration.
    fn truth_ns(&self, tick: u64) -> f64 {
        let device_s = (tick as f64 + 0.5) / TICK_RATE_HZ;
        let since_boot_s = (0..8).fold(device_s, |guess_s, _| guess_s + device_s - self.device_s(guess_s));
        (BOOT_S + since_boot_s) * 1e9
    }

    fn nominal(&self) -> NominalClock {
        NominalClock::ticking(TICK_RATE_HZ, self.tolerance_ppm)
    }

    fn up_s(&self, sent_s: f64, phase_s: f64, random: &mut Random) -> f64 {
        let ready_s = sent_s + self.hidden_up_s;
        let batched_s = if self.batch_s > 0.0 {
            ((ready_s - phase_s) / self.batch_s).ceil() * self.batch_s + phase_s
        } else {
            ready_s
        };
        let stall_s = if random.uniform() < 0.003 { random.exponential(0.01) } else { 0.0 };
        batched_s + random.exponential(self.jitter_s) + stall_s
    }

    fn play(&self, seed: u64) -> (Vec<BlockTimes>, Vec<TimeExchange>) {
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
    fn bias_ns(&self) -> f64 {
        if self.requests_per_s > 0.0 { 0.5e9 * (self.hidden_up_s - self.hidden_down_s) } else { 1e9 * self.hidden_up_s }
    }
}

struct Errors {
    /// 95th percentile over runs of the largest error in the last second, apart from the asymmetry, ns.
    p95_ns: f64,
    /// Part of the runs whose error, asymmetry included, stays inside 1.96 u all the time.
    covered: f64,
    mean_u_ns: f64,
}

const N_RUNS: u64 = 40;

fn errors_of(link: Link, map: impl Fn(&Link, u64) -> Vec<(u64, ClockPiece)>) -> Errors {
    let (mut worst, mut n_covered, mut sum_u_ns) = (Vec::new(), 0, 0.0);
    for seed in 1..=N_RUNS {
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
    Errors { p95_ns, covered: f64::from(n_covered) / N_RUNS as f64, mean_u_ns: sum_u_ns / N_RUNS as f64 }
}

fn sealed(link: &Link, seed: u64) -> Vec<(u64, ClockPiece)> {
    let (arrivals, exchanges) = link.play(seed);
    let pieces = fit_clock(link.nominal(), &arrivals, &exchanges);
    let ticks = arrivals.iter().map(|times| times.sent_tick);
    ticks.map(|tick| (tick, *piece_at(&pieces, 1, tick).unwrap())).collect()
}

/// As the map stood at each arrival.
fn live(link: &Link, seed: u64) -> Vec<(u64, ClockPiece)> {
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

#[track_caller]
fn check_after_30_s(name: &str, link: Link, limit_ns: f64) {
    for (kind, errors) in [("sealed", errors_of(link, sealed)), ("live", errors_of(link, live))] {
        assert!(errors.p95_ns < limit_ns, "{name}, {kind}: 95 % within {} ns", errors.p95_ns);
        assert!(errors.covered >= 0.95, "{name}, {kind}: {} covered by {} ns", errors.covered, errors.mean_u_ns);
    }
}

#[test]
fn with_requests_the_clock_is_known_to_100_us_apart_from_the_asymmetry() {
    check_after_30_s("no batching", Link { batch_s: 0.0, ..CRYSTAL }, 1e5);
    check_after_30_s("1 ms batching", CRYSTAL, 1e5);
    check_after_30_s("16 ms batching", Link { batch_s: 0.016, ..CRYSTAL }, 1e5);
    check_after_30_s("resonator", Link { offset_ppm: -10_000.0, tolerance_ppm: 10_000.0, ..CRYSTAL }, 1e5);
}

#[test]
fn without_requests_the_clock_is_known_to_500_us_when_the_phase_sweeps() {
    let silent = Link { requests_per_s: 0.0, ..CRYSTAL };
    check_after_30_s("1 ms batching", silent, 5e5);
    check_after_30_s("16 ms batching, swept", Link { batch_s: 0.016, block_every_s: 0.009_9, ..silent }, 5e5);
}

#[test]
fn the_stated_uncertainty_covers_what_the_timing_cannot_see() {
    let silent = Link { requests_per_s: 0.0, ..CRYSTAL };
    check_after_30_s("2 ms hidden up", Link { hidden_up_s: 0.002, batch_s: 0.016, ..CRYSTAL }, 1e5);
    check_after_30_s("2 ms hidden down", Link { hidden_down_s: 0.002, ..CRYSTAL }, 1e5);
    check_after_30_s("2 ms hidden, no requests", Link { hidden_up_s: 0.002, ..silent }, f64::INFINITY);
    check_after_30_s("16 ms, no requests", Link { hidden_up_s: 0.002, batch_s: 0.016, ..silent }, f64::INFINITY);
}

#[test]
fn a_rate_that_wanders_is_followed_within_the_stated_uncertainty() {
    let wandering = Link { wander_ppm: 100.0, duration_s: 60.0, ..CRYSTAL };
    check_after_30_s("1 ms batching", wandering, 1.5e5);
    check_after_30_s("no requests", Link { requests_per_s: 0.0, ..wandering }, f64::INFINITY);
}

#[test]
fn half_the_least_round_trip_is_stated_as_asymmetry() {
    let link = Link { batch_s: 0.0, jitter_s: 0.0, hidden_up_s: 0.001, hidden_down_s: 0.003, ..CRYSTAL };
    let (arrivals, exchanges) = link.play(1);
    for piece in fit_clock(link.nominal(), &arrivals, &exchanges) {
        assert_eq!(piece.method, ClockMethod::Exchanges);
        assert!((piece.asymmetry_ns - 2e6).abs() < 5e3, "{} ns", piece.asymmetry_ns);
        assert!(piece.u_ns > piece.asymmetry_ns / 3_f64.sqrt());
    }
}

#[test]
fn a_map_is_continuous_and_does_not_depend_on_the_order_of_its_input() {
    let (mut arrivals, mut exchanges) = CRYSTAL.play(3);
    let pieces = fit_clock(CRYSTAL.nominal(), &arrivals, &exchanges);
    for pair in pieces.windows(2) {
        let joint = pair[1].first_tick;
        assert_eq!(pair[0].last_tick, joint);
        assert!((pair[0].host_ns(joint) - pair[1].host_ns(joint)).abs() < 1_000.0);
    }
    arrivals.reverse();
    exchanges.rotate_left(100);
    assert_eq!(fit_clock(CRYSTAL.nominal(), &arrivals, &exchanges), pieces);
}

#[test]
fn each_boot_has_its_own_pieces_in_order_of_time() {
    let (mut arrivals, _) = Link { duration_s: 4.0, ..CRYSTAL }.play(1);
    let later = arrivals.clone().into_iter().map(|times| BlockTimes {
        boot_id: 2,
        host_ns: times.host_ns + 60_000_000_000,
        ..times
    });
    arrivals.extend(later);
    let pieces = fit_clock(CRYSTAL.nominal(), &arrivals, &[]);
    assert!(pieces.is_sorted_by_key(|piece| piece.host_ns_at_origin as i64));
    assert_eq!(pieces.first().map(|piece| piece.boot_id), Some(1));
    assert_eq!(pieces.last().map(|piece| piece.boot_id), Some(2));
    let tick = arrivals[0].sent_tick;
    let apart_ns =
        piece_at(&pieces, 2, tick).unwrap().host_ns(tick) - piece_at(&pieces, 1, tick).unwrap().host_ns(tick);
    assert!((apart_ns - 6e10).abs() < 1e6, "{apart_ns}");
    assert_eq!(piece_at(&pieces, 3, tick), None);
}

/// CLOCK_MONOTONIC stands still while the host sleeps; the device does not.
#[test]
fn a_suspended_host_starts_a_new_piece_and_bends_none() {
    let link = Link { duration_s: 20.0, ..CRYSTAL };
    let (mut arrivals, mut exchanges) = link.play(5);
    let (asleep_ns, slept_ns) = (exchanges[100].requested_host_ns, 8_000_000_000);
    let stamp = |host_ns: i64| {
        if host_ns > asleep_ns + slept_ns {
            Some(host_ns - slept_ns)
        } else {
            Some(host_ns).filter(|ns| *ns < asleep_ns)
        }
    };
    arrivals.retain_mut(|times| stamp(times.host_ns).map(|host_ns| times.host_ns = host_ns).is_some());
    exchanges.retain_mut(|times| {
        let stamps = stamp(times.requested_host_ns).zip(stamp(times.replied_host_ns));
        stamps.map(|stamps| (times.requested_host_ns, times.replied_host_ns) = stamps).is_some()
    });
    let pieces = fit_clock(link.nominal(), &arrivals, &exchanges);
    let mut clock = LiveClock::new(link.nominal());
    for exchange in &exchanges {
        clock.exchanged(exchange);
        let piece = clock.piece().unwrap();
        let slept_ns = if exchange.requested_host_ns < asleep_ns { 0.0 } else { slept_ns as f64 };
        for map in [piece, piece_at(&pieces, 1, exchange.sent_tick).unwrap()] {
            let error_ns = map.host_ns(exchange.sent_tick) + slept_ns - link.truth_ns(exchange.sent_tick);
            assert!(error_ns.abs() < 1.96 * map.u_ns, "{error_ns} ns at {}", exchange.sent_tick);
        }
    }
}

proptest! {
    #[test]
    fn no_times_whatever_make_a_map_panic_or_turn_infinite(
        raw in prop::collection::vec((any::<u32>(), any::<u64>(), any::<u64>(), any::<i64>(), any::<i64>()), 0..40),
        rate_hz in 1.0..1e12_f64,
        near in any::<bool>(),
    ) {
        let nominal = NominalClock::ticking(rate_hz, 50.0);
        let mut clock = LiveClock::new(nominal);
        let (mut arrivals, mut exchanges) = (Vec::new(), Vec::new());
        for (boot_id, a, b, asked_ns, replied_ns) in raw {
            let boot_id = boot_id % 2;
            let [received_tick, sent_tick] = [a, b].map(|tick| if near { tick % 100_000_000 } else { tick });
            let [requested_host_ns, replied_host_ns] = [asked_ns, replied_ns].map(|ns| if near { ns % 100_000_000_000 } else { ns });
            arrivals.push(BlockTimes { boot_id, sent_tick, host_ns: replied_host_ns });
            exchanges.push(TimeExchange { boot_id, requested_host_ns, received_tick, sent_tick, replied_host_ns });
            clock.arrived(arrivals.last().unwrap());
            clock.exchanged(exchanges.last().unwrap());
        }
        for piece in fit_clock(nominal, &arrivals, &exchanges).iter().chain(clock.piece()) {
            prop_assert!(piece.host_ns(piece.last_tick).is_finite() && piece.u_ns >= 0.0 && piece.u_ns.is_finite(), "{piece:?}");
        }
    }
}
