//! A tare from the operator's command to the sealed trial: the real daemon, a board on a pty whose cell has drifted. Invented
//! data.

use std::path::Path;
use std::process::{Command, Output};
use std::time::Duration;

use tautrail::trial::TrialFile;

use crate::board::{Board, Prints};
use crate::guided::daemon;

/// What the calibration record of the rehearsal's line cell says, and how far this cell has drifted from its zero since.
const ZERO_COUNTS: f64 = 12_000.0;
const COUNTS_PER_N: f64 = 2000.0;
const DRIFTED_N: f64 = 3.0;

/// The cell on its board; silent, it prints what is no reading.
struct Cell {
    force_n: f64,
    silent: bool,
    n_printed: u32,
}

impl Prints for Cell {
    fn line(&mut self) -> String {
        self.n_printed += 1;
        let flicker = f64::from(self.n_printed % 3) - 1.0;
        let counts = ZERO_COUNTS + COUNTS_PER_N * (self.force_n + DRIFTED_N) + 20.0 * flicker;
        if self.silent { "?".to_owned() } else { format!("{counts:.0}") }
    }
}

fn rig_text() -> String {
    let text = crate::rehearsal_rig::rig_text("north-pier.toml");
    let launcher = text.split("[[device]]").next().unwrap();
    let records = &text[text.find("\n#@attached").unwrap()..];
    format!(
        "{launcher}[[device]]\nname = \"winch-board\"\nport = \"ports/winch-board\"\nbaud = 115200\nprotocol = \"text\"\n\
         [device.text]\ninterval = \"33.3 ms\"\ncolumn = [{{ name = \"counts\", field = 1 }}]\n\
         [[channel]]\nname = \"line\"\ndevice = \"winch-board\"\ndevice_channel = \"counts\"\nrole = \"release_line_tension\"\n\
         record = \"records/line.toml\"\n{records}"
    )
}

fn tare(dir: &Path, person: &str) -> Output {
    let mut command = Command::new(env!("CARGO_BIN_EXE_tautrail"));
    command.current_dir(dir).args(["tare", "line", "--dir", "trials", "--person", person]).output().unwrap()
}

fn said(output: &Output) -> String {
    String::from_utf8_lossy(&output.stdout).into_owned() + &String::from_utf8_lossy(&output.stderr)
}

/// Draws or lets down within a second.
fn pull(board: &Board<Cell>, to_n: f64) {
    let from_n = board.shown.lock().unwrap().force_n;
    for step in 1..=20 {
        board.shown.lock().unwrap().force_n = from_n + (to_n - from_n) * f64::from(step) / 20.0;
        std::thread::sleep(Duration::from_millis(50));
    }
}

#[test]
fn a_trial_sealed_under_a_tare_has_the_right_values_and_its_counts_untouched() {
    let dir = tempfile::tempdir().unwrap();
    let board = Board::at(&dir.path().join("ports/winch-board"), Cell { force_n: 0.0, silent: false, n_printed: 0 });
    std::fs::write(dir.path().join("rig.toml"), rig_text()).unwrap();
    let mut daemon = daemon(dir.path());
    daemon.wait_for("phase", "slack");

    // A silent cell is not known to be slack.
    board.shown.lock().unwrap().silent = true;
    daemon.wait_for("alarm", "silent");
    let refused = tare(dir.path(), "duty recorder");
    assert!(refused.status.code() == Some(1) && said(&refused).contains("not known to be slack"), "{refused:?}");
    board.shown.lock().unwrap().silent = false;
    daemon.wait_for("phase", "slack");
    std::thread::sleep(Duration::from_millis(2500)); // two fresh seconds

    let tared = tare(dir.path(), "duty recorder");
    assert!(tared.status.success() && said(&tared).contains("line: zero 12000 to 1"), "{}", said(&tared));
    let event = daemon.wait_for("tare", "N were read there");
    let (_, new) = event.text.split_once(" to ").unwrap();
    let new_counts: f64 = new.split_once(" counts").unwrap().0.parse().unwrap();
    assert!((new_counts - ZERO_COUNTS - DRIFTED_N * COUNTS_PER_N).abs() < 20.0, "{}", event.text);

    pull(&board, 300.0);
    daemon.wait_for("trial", "opens");
    std::thread::sleep(Duration::from_millis(1500));
    let refused = tare(dir.path(), "duty recorder");
    assert!(refused.status.code() == Some(1) && said(&refused).contains("a trial is open"), "{}", said(&refused));
    pull(&board, 0.0);
    daemon.wait_for("trial", "closes");
    daemon.wait_for("seal", "is sealed");
    assert_eq!(daemon.stop(), Some(0));
    the_file_says_so(dir.path(), new_counts);
}

fn the_file_says_so(dir: &Path, new_counts: f64) {
    let entries = std::fs::read_dir(dir.join("trials")).unwrap().map(|entry| entry.unwrap().path());
    let files: Vec<_> = entries.filter(|path| path.extension().is_some_and(|extension| extension == "h5")).collect();
    let [file] = &files[..] else { panic!("{files:?}") };
    let trial = TrialFile::open(file).unwrap();
    let line = trial.signal("line").unwrap();
    let first_n = line.value[..20].iter().sum::<f64>() / 20.0;
    let most_n = line.value.iter().copied().fold(0.0, f64::max);
    assert!(first_n.abs() < 0.02, "slack reads nothing under the tare: {first_n} N");
    assert!((most_n - 300.0).abs() < 0.05, "{most_n} N");

    let lines = trial.device("winch-board").unwrap().text_lines;
    let counts: Vec<f64> = lines.iter().filter_map(|line| line.text.trim().parse().ok()).collect();
    let printed = |n: f64| ZERO_COUNTS + COUNTS_PER_N * (DRIFTED_N + n);
    let (least, most) =
        counts.iter().fold((f64::MAX, f64::MIN), |(low, high), count| (low.min(*count), high.max(*count)));
    assert_eq!((least, most), (printed(0.0) - 20.0, printed(300.0) + 20.0), "as the board printed them");

    // The tare itself lies in the two seconds before the trial, or just before them.
    let events = trial.events().unwrap();
    let tares: Vec<_> = events.iter().filter(|event| event.kind == "tare").collect();
    assert!(tares.iter().all(|event| event.person == "duty recorder"), "{tares:?}");
    let in_force = format!("in force: line: zero 12000 to {new_counts} counts, ");
    assert_eq!(tares.iter().filter(|event| event.text.starts_with(&in_force)).count(), 1, "{tares:?}");
    let carried = trial.texts().unwrap();
    let record = carried.iter().find(|text| text.name.ends_with("line.toml")).expect("the record itself");
    assert!(record.text.contains("zero_counts = 12000\n"), "the record keeps its own zero");
}
