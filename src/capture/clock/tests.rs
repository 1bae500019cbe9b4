//! Maps against clocks and lines whose truth is known.

use proptest::prelude::*;

use super::*;

#[path = "../../../tests/support/clock_line.rs"]
mod line;

use line::{CRYSTAL, Link, errors_of, live, sealed};

const SEEDS: std::ops::RangeInclusive<u64> = 1..=40;

#[track_caller]
fn check_after_30_s(name: &str, link: Link, limit_ns: f64) {
    for (kind, errors) in [("sealed", errors_of(link, SEEDS, sealed)), ("live", errors_of(link, SEEDS, live))] {
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

/// From the first arrivals on, and not only after half a minute.
#[test]
fn a_tolerance_that_is_not_kept_is_found_out_and_never_believed_too_far() {
    for offset_ppm in [10_000.0, -10_000.0, 2_000.0] {
        let dishonest = Link { offset_ppm, tolerance_ppm: 10.0, duration_s: 12.0, ..CRYSTAL };
        let silent = Link { requests_per_s: 0.0, ..dishonest };
        for (name, link) in [("requests", dishonest), ("no requests", silent)] {
            let errors = errors_of(link, 1..=20, live);
            assert!(
                errors.covered >= 0.95,
                "{name}, {offset_ppm} ppm: {} covered by {} ns",
                errors.covered,
                errors.mean_u_ns
            );
            assert!(errors.p95_ns < 5e5, "{name}, {offset_ppm} ppm: {} ns", errors.p95_ns);
        }
    }
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
