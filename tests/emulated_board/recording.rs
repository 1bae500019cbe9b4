//! Recorded by the real daemon, through a power cut in the middle of a trial.

use tautrail::trial::{DeviceRecord, TrialFile};

use crate::board::Board;
use crate::place::Place;
use crate::support::run_oracle;

const DEVICE: &str = "bench-node";
const BOOTS: [u32; 2] = [0x0B00_7011, 0x0B00_7012];

#[test]
fn a_board_that_loses_power_in_the_hold_leaves_a_trial_of_two_boots_with_every_count_right() {
    let place = Place::new(DEVICE);
    let board = Board::boot(BOOTS[0]);
    place.plug_in(&board.port);
    let mut daemon = place.start_daemon();
    daemon.wait_for("link", "is open");
    daemon.wait_for("trial", "opens");
    let hold = daemon.wait_for("phase", "hold");
    place.unplug();
    drop(board);
    let lost = daemon.wait_for("alarm", &format!("{DEVICE}: link lost"));
    let board = Board::boot(BOOTS[1]);
    place.plug_in(&board.port);
    daemon.wait_for("link", "is open");
    let closed = daemon.wait_for("trial", "closes");
    daemon.wait_for("seal", "is sealed");
    assert!(hold.host_ns < lost.host_ns && lost.host_ns < closed.host_ns, "{hold:?} {lost:?} {closed:?}");
    assert_eq!(daemon.stop(), Some(0));

    let path = place.trial();
    let trial = TrialFile::open(&path).unwrap();
    let record = trial.device(DEVICE).unwrap();
    both_boots_were_described(&record);
    nothing_was_refused_but_what_the_cut_tore(&record);
    what_is_missing_is_what_the_board_says_it_dropped(&trial, &record);
    both_boots_have_a_clock_from_answered_requests(&trial);
    let counted = run_oracle(include_str!("counts.py"), &[path.to_str().unwrap(), DEVICE]);
    println!("{counted}");
}

fn both_boots_were_described(record: &DeviceRecord) {
    let boots: Vec<u32> = record.descriptions.iter().map(|description| description.boot_id).collect();
    assert_eq!(boots, BOOTS, "a new boot id is a new segment");
    for description in &record.descriptions {
        assert_eq!(description.streams.len(), 2, "{description:?}");
    }
    assert!(BOOTS.iter().all(|boot| record.statuses.iter().any(|status| status.boot_id == *boot)));
    assert!(record.edges.iter().any(|edge| edge.boot_id == BOOTS[0] && edge.rising), "the hold's edge");
}

fn nothing_was_refused_but_what_the_cut_tore(record: &DeviceRecord) {
    let reasons: Vec<_> = record.rejected.iter().map(|rejected| rejected.reason.as_str()).collect();
    assert!(reasons.is_empty() || reasons == ["cut off when the link was lost"], "{reasons:?}");
    assert_eq!(record.rejected_not_kept, 0);
}

/// On an idle machine both are nothing; an emulator that got no processor for long drops samples, and says so.
fn what_is_missing_is_what_the_board_says_it_dropped(trial: &TrialFile, record: &DeviceRecord) {
    let blocks = trial.blocks(DEVICE).unwrap();
    for (boot, stream) in BOOTS.iter().flat_map(|boot| [(*boot, 1), (*boot, 2)]) {
        let of_stream: Vec<_> = blocks.iter().filter(|block| (block.boot_id, block.stream) == (boot, stream)).collect();
        assert!(of_stream.len() > 50, "{} blocks of stream {stream} of boot {boot:#x}", of_stream.len());
        let (first, last) = (of_stream[0], of_stream[of_stream.len() - 1]);
        let gaps = record.gaps.iter().filter(|gap| (gap.boot_id, gap.stream) == (boot, stream));
        let n_missing: u64 =
            gaps.filter(|gap| gap.first_missing_index > first.first_index).map(|gap| gap.n_missing).sum();
        assert_eq!(n_missing, u64::from(last.overruns - first.overruns), "stream {stream} of boot {boot:#x}");
        let n_held: u64 = of_stream.iter().map(|block| u64::from(block.n_samples)).sum();
        assert_eq!(last.first_index + u64::from(last.n_samples) - first.first_index, n_held + n_missing);
    }
}

fn both_boots_have_a_clock_from_answered_requests(trial: &TrialFile) {
    let (map, exchanges) = trial.clock(DEVICE).unwrap();
    for boot in BOOTS {
        assert!(map.iter().any(|piece| piece.boot_id == boot), "a clock for boot {boot:#x}");
        let n_answered = exchanges.iter().filter(|exchange| exchange.boot_id == boot).count();
        assert!(n_answered >= 5, "{n_answered} time replies of boot {boot:#x}");
    }
}
