use super::line::{Cut, LineReader, LineSplitter, NO_MATCH, NO_NUMBER, NOT_TEXT, Piece, Refusal};
use super::time::{Placed, PrintedTime};
use super::*;
use crate::capture::sample::{Block, Captured, Counts, Gap, Rejected};
use crate::capture::{ClockMethod, ClockSamples};
use crate::rig::{Checked, Device, Protocol, check};
use proptest::prelude::*;
use regex::Regex;

const MS: i64 = 1_000_000;

/// A device of the rig file of every key with another `[device.text]`.
fn device(text: &str) -> Device {
    let rig = format!(
        "{}\n[[device]]\nname = \"gauge\"\nport = \"ports/gauge\"\nbaud = 9600\nprotocol = \"text\"\n[device.text]\n{text}\n{}",
        include_str!("../../../tools/rehearsal/north-pier.toml").split("[[device]]").next().unwrap(),
        "[[channel]]\nname = \"line\"\ndevice = \"gauge\"\ndevice_channel = \"force\"\nrole = \"release_line_tension\"\n[channel.calibration]\nwithout_record = true\nzero_uncertainty = \"0.5 N\"\nscale_uncertainty = \"0.1 %\"\n"
    );
    let Checked { rig, findings } = check(&rig);
    rig.unwrap_or_else(|| panic!("{findings:#?}")).devices.remove(0)
}

fn decoder(text: &str) -> TextDecoder {
    let device = device(text);
    let Protocol::Text(instrument) = &device.protocol else { panic!("it speaks text") };
    TextDecoder::new(&device, instrument)
}

const INDICATOR: &str = r#"
pattern = '^(ST|US),[+-] *(?P<force>[+-]? *[0-9.]+) kg$'
interval = "12.5 ms"
column = [{ name = "force", unit = "kgf" }]
"#;
const BOARD: &str = r##"
separator = ","
fields = 3
interval = "10 ms"
time_field = 1
time_unit = "ms"
time_wrap = 65536
header_lines = 1
skip_prefix = "#"
column = [{ name = "force", field = 3, unit = "N" }]
"##;

fn feed(decoder: &mut TextDecoder, host_ns: i64, bytes: &[u8]) -> Vec<Captured> {
    let mut heard = Vec::new();
    decoder.feed(host_ns, bytes, &mut |captured| heard.push(captured));
    heard
}

fn blocks(heard: &[Captured]) -> Vec<&Block> {
    heard.iter().filter_map(|c| if let Captured::Block(block) = c { Some(block) } else { None }).collect()
}

fn values(heard: &[Captured]) -> Vec<f32> {
    let value = |block: &&Block| match &block.counts[0] {
        Counts::Float(values) => values[0],
        Counts::Integer(_) => panic!("text gives floats"),
    };
    blocks(heard).iter().map(value).collect()
}

fn rejected(heard: &[Captured]) -> Vec<(&'static str, Vec<u8>)> {
    let rejected = |c: &Captured| match c {
        Captured::Rejected(Rejected { reason, bytes, .. }) => Some((*reason, bytes.clone())),
        _ => None,
    };
    heard.iter().filter_map(rejected).collect()
}

fn gaps(heard: &[Captured]) -> Vec<(u64, u64)> {
    let gap = |c: &Captured| match c {
        Captured::Gap(Gap { first_missing_index, n_missing, .. }) => Some((*first_missing_index, *n_missing)),
        _ => None,
    };
    heard.iter().filter_map(gap).collect()
}

#[test]
fn an_indicators_lines_become_readings_and_what_is_none_is_kept() {
    let mut decoder = decoder(INDICATOR);
    let heard = feed(&mut decoder, 100 * MS, b"3.4 kg\r\nST,+ 12.50 kg\r\nUS,+-  3.0 kg\r\nOVERLOAD\r\nST,+ 12.");
    assert!(matches!(&heard[0], Captured::Description(d) if d.streams[0].ticks_per_sample == 12_500_000));
    assert_eq!(values(&heard), [12.5, -3.0]);
    let refused = rejected(&heard);
    assert_eq!(refused[0].1, b"3.4 kg", "the first line may be cut");
    assert_eq!(refused[1], ("line does not match the pattern", b"OVERLOAD".to_vec()));
    let heard = feed(&mut decoder, 125 * MS, b"75 kg\r\n");
    assert_eq!((values(&heard), gaps(&heard)), (vec![12.75], vec![(2, 1)]), "the refused line may have been a reading");
    let texts = heard.iter().filter(|c| matches!(c, Captured::Text { text, .. } if text == "ST,+ 12.75 kg")).count();
    assert_eq!(texts, 1, "the line is kept as it came");
    let mut lost = Vec::new();
    feed(&mut decoder, 130 * MS, b"ST,+ 1");
    decoder.link_lost(140 * MS, &mut |captured| lost.push(captured));
    assert_eq!(rejected(&lost), [("cut off when the link was lost", b"ST,+ 1".to_vec())]);
    let heard = feed(&mut decoder, 900 * MS, b"2.00 kg\nST,+ 2.00 kg\n");
    assert_eq!((values(&heard), rejected(&heard).len()), (vec![2.0], 1), "no line is joined across a lost link");
}

#[test]
fn lines_that_came_in_one_read_are_an_interval_apart_and_never_run_backward() {
    let mut decoder = decoder(INDICATOR);
    feed(&mut decoder, 0, b"x\n");
    let heard = feed(&mut decoder, 1000 * MS, b"ST,+ 1 kg\nST,+ 2 kg\nST,+ 3 kg\n");
    let ticks: Vec<u64> = blocks(&heard).iter().map(|block| block.first_tick).collect();
    assert_eq!(ticks, [975_000_000, 987_500_000, 1_000_000_000]);
    let heard = feed(&mut decoder, 1002 * MS, b"ST,+ 4 kg\nST,+ 5 kg\n");
    let ticks: Vec<u64> = blocks(&heard).iter().map(|block| block.first_tick).collect();
    assert_eq!(ticks, [1_001_000_000, 1_002_000_000]);
}

#[test]
fn the_time_of_an_arrival_is_stated_with_its_larger_uncertainty() {
    let mut decoder = decoder(INDICATOR);
    let mut clock = ClockSamples::default();
    for k in 0..100 {
        for captured in feed(&mut decoder, 1_000 * MS + k * 12 * MS, b"ST,+ 1 kg\n") {
            clock.captured(&captured);
        }
    }
    let pieces = clock.fit();
    assert_eq!((pieces.len(), pieces[0].method), (1, ClockMethod::Stamps));
    // 20 ms of adapter and host and 25 ms of line at 9600 baud: half of it is the half-width of a rectangle.
    let half_width_ns = 0.5 * (2e7 + 24.0 * 10.0 / 9600.0 * 1e9);
    assert!((pieces[0].u_ns - half_width_ns / 3_f64.sqrt()).abs() < 1.0);
    assert!((pieces[0].host_ns(2_000_000_000) - (2e9 - half_width_ns)).abs() < 1.0);
}

fn board_line(ms: u64, force: f64) -> Vec<u8> {
    format!("{},7,{force}\n", ms % 65_536).into_bytes()
}

#[test]
fn printed_time_wraps_over_several_turns_and_shows_what_is_missing() {
    let mut decoder = decoder(BOARD);
    feed(&mut decoder, 0, b"time,flag,force\n# a remark\n");
    let mut heard = Vec::new();
    // lines at 65 500 ms and on, a silence of 200 s (three turns), then on
    for ms in [65_500_u64, 65_510, 65_520, 65_530, 65_540, 265_540, 265_550] {
        heard.extend(feed(&mut decoder, ms as i64 * MS + 3 * MS, &board_line(ms, 1.5)));
    }
    let first = blocks(&heard)[0].first_tick;
    let since_first: Vec<u64> = blocks(&heard).iter().map(|block| (block.first_tick - first) / 1_000_000).collect();
    assert_eq!(since_first, [0, 10, 20, 30, 40, 200_040, 200_050]);
    assert_eq!(gaps(&heard), [(5, 19_999)]);
}

#[test]
fn a_board_that_began_again_is_a_new_boot_and_a_damaged_time_is_one_refused_line() {
    let mut decoder = decoder(&BOARD.replace("time_wrap = 65536\n", ""));
    feed(&mut decoder, 0, b"header\n");
    let mut heard = Vec::new();
    for (host_ms, ms) in
        [(0, 5_000_u64), (10, 5_010), (20, 95_020), (30, 5_030), (2_000, 100), (2_010, 110), (2_020, 120)]
    {
        heard.extend(feed(&mut decoder, (10_000 + host_ms) * MS, format!("{ms},7,2.5\n").as_bytes()));
    }
    let refused: Vec<_> = rejected(&heard).into_iter().map(|(reason, line)| (reason, line[0])).collect();
    assert_eq!(refused, [("device time jumps", b'9'), ("device time jumps", b'1')]);
    let boots: Vec<u32> = blocks(&heard).iter().map(|block| block.boot_id).collect();
    assert_eq!(boots, [1, 1, 1, 2, 2]);
    assert_eq!(gaps(&heard), [(2, 1)], "the refused line was a reading; across a boot nothing is known");
}

#[test]
fn a_line_with_other_fields_or_no_number_is_refused() {
    let reader = LineReader { cut: Cut::At(','), n_fields: 2, values: vec![1], time: None, decimal_comma: false };
    assert_eq!(reader.read(b"a,+ 1.5").unwrap().values, [1.5]);
    assert_eq!(reader.read(b"\x02a,-2e3\x03").unwrap().values, [-2000.0]);
    for bad in ["1.5", "a,1.5,b", "a,", "a,nan", "a,inf", "a,1e999", "a,1;5", "a,--1", "a,0x10", "a,1_000"] {
        assert!(reader.read(bad.as_bytes()).is_err(), "{bad}");
    }
    assert!(reader.read(b"a,1\xff").is_err());
    let comma = LineReader { cut: Cut::At(';'), decimal_comma: true, ..reader };
    assert_eq!(comma.read(b"a;-12,25").unwrap().values, [-12.25]);
    assert!(comma.read(b"a;12.25").is_err(), "a point is a thousands mark there, or damage");
}

#[test]
fn malformed_lines_under_a_pattern_are_refused_counted_and_kept_each_with_its_reason() {
    let mut decoder = decoder(INDICATOR);
    feed(&mut decoder, 0, b"x\nST,+ 12.50 kg\r\n");
    let malformed: [(&[u8], Refusal); 7] = [
        (b"ST,+ 12.50", NO_MATCH),
        (b"ST,+ 12.50 kg kg", NO_MATCH),
        (b"ST,+ 12,50 kg", NO_MATCH),
        (b"QT,+ 12.50 kg", NO_MATCH),
        (b"ST,+ 1.2.5 kg", NO_NUMBER),
        (b"ST,+ . kg", NO_NUMBER),
        (b"ST,+ 12.\xb50 kg", NOT_TEXT),
    ];
    for (k, (line, reason)) in (1_i64..).zip(malformed) {
        let heard = feed(&mut decoder, k * 12 * MS, &[line, b"\r\n"].concat());
        assert_eq!((rejected(&heard), values(&heard)), (vec![(reason, line.to_vec())], vec![]), "{line:?}");
    }
    let by_reason = &decoder.counters().refused;
    assert_eq!((by_reason[NO_MATCH], by_reason[NO_NUMBER], by_reason[NOT_TEXT]), (4, 2, 1));
    let heard = feed(&mut decoder, 200 * MS, b"ST,+ 12.50 kg\r\n");
    assert_eq!((values(&heard), gaps(&heard)), (vec![12.5], vec![(1, 7)]), "each may have been a reading");
}

#[test]
fn an_endless_line_is_junk_handed_out_once_and_takes_no_memory() {
    let (mut splitter, mut n_junk, mut lines) = (LineSplitter::default(), 0, Vec::new());
    let mut stream = vec![b'x'; 100_000];
    stream.extend_from_slice(b"\nST\n");
    splitter.feed(&stream, &mut |piece| match piece {
        Piece::Junk(junk) => n_junk += junk.len(),
        Piece::Line(line) => lines.push(line.to_vec()),
    });
    assert_eq!((n_junk, lines), (100_000, vec![b"ST".to_vec()]));
}

proptest! {
    #[test]
    fn how_reads_cut_the_bytes_changes_nothing_but_times(
        bytes in proptest::collection::vec(prop_oneof![Just(b'\n'), Just(b','), b'0'..=b'9', any::<u8>()], 0..400),
        n in 1_usize..50,
    ) {
        let told = |n: usize| {
            let mut decoder = decoder(INDICATOR);
            let mut heard = Vec::new();
            for read in bytes.chunks(n) {
                heard.extend(feed(&mut decoder, 5 * MS, read));
            }
            (values(&heard), rejected(&heard))
        };
        prop_assert_eq!(told(n), told(1000));
    }

    #[test]
    fn a_number_is_read_as_it_was_printed(value in -1e6..1e6_f64, decimals in 0_usize..6, sign in any::<bool>()) {
        let reader = LineReader { cut: Cut::Spaces, n_fields: 1, values: vec![0], time: None, decimal_comma: false };
        let printed = if sign { format!("{value:+.decimals$}") } else { format!("{value:.decimals$}") };
        let read = reader.read(printed.as_bytes()).unwrap().values[0];
        prop_assert_eq!(read, printed.parse::<f64>().unwrap() as f32);
    }

    #[test]
    fn any_text_and_any_time_leave_the_decoder_sound(lines in proptest::collection::vec("[-+0-9.,# a-z]{0,20}", 0..50)) {
        for text in [INDICATOR, BOARD] {
            let mut decoder = decoder(text);
            let mut last = (0, 0);
            for (k, line) in lines.iter().enumerate() {
                for block in blocks(&feed(&mut decoder, k as i64 * 7 * MS, format!("{line}\n").as_bytes())) {
                    let now = (block.boot_id, block.first_tick);
                    prop_assert!(now > last || last == (0, 0), "{now:?} after {last:?}");
                    last = now;
                }
            }
        }
    }

    #[test]
    fn ticks_never_run_backward_within_a_boot(steps in proptest::collection::vec((0_u64..3_000, 0_i64..3_000), 1..200)) {
        let mut time = PrintedTime::wrapping_at(Some(65_536 * 1_000_000));
        let (mut host_ns, mut last) = (0, None);
        for (ms, host_ms) in steps {
            host_ns += host_ms * MS;
            match time.place(ms * 1_000_000, host_ns) {
                Placed::Tick(tick) => {
                    prop_assert!(last.is_none_or(|last| tick > last));
                    last = Some(tick);
                }
                Placed::NewBoot(tick) => last = Some(tick),
                Placed::Refused(_) => {}
            }
        }
    }
}

#[test]
fn a_pattern_finds_its_groups_by_name() {
    let pattern = Regex::new(r"^t=(?P<time>\d+) F=(?P<force>\S+)$").unwrap();
    let reader =
        LineReader { cut: Cut::Pattern(pattern), n_fields: 0, values: vec![2], time: Some(1), decimal_comma: false };
    let read = reader.read(b"t=42 F=-1.25").unwrap();
    assert_eq!((read.values, read.time), (vec![-1.25], Some(42.0)));
}
