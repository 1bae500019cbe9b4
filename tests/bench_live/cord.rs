//! Cords read beside the real daemon: force from a live cell, length typed or by the encoder. Invented data.

use std::fs;
use std::path::Path;

use tautrail::rig::{CordBranch, CordReading, CordSheet};

use crate::board::{Board, Prints};
use crate::guided::{Guided, daemon, rig_text};

/// A cord on the winch: what the cell of the rehearsal's record prints, and the encoder beside it.
struct Pulled {
    force_n: f64,
    draw_m: f64,
    n_printed: u32,
}

impl Prints for Pulled {
    fn line(&mut self) -> String {
        self.n_printed += 1;
        let flicker = f64::from(self.n_printed % 3) - 1.0;
        let counts = 12_000.0 + 2000.0 * self.force_n + 20.0 * flicker;
        // The zero mark is at x = 4 m, the encoder gives 0.1 mm a count.
        format!("{counts:.0},{:.0}", 1e4 * (4.0 - self.draw_m))
    }
}

const PLAN: &str = "serial,cycle,branch,do,hold_s\n7-01,4,load,draw to the first mark,\n7-01,4,load,draw to the second mark,\n\
                    7-01,4,hold,keep the length,5\n7-01,4,unload,let down to the first mark,\n";

const CORD_SHEET: &str = "kind = \"cord sheet\"\nlot = \"7\"\nperson = \"rig engineer\"\ndate = \"2031-05-04\"\ninvented = true\n\
                          free_length = \"2.7 m\"\nfree_length_uncertainty = \"3 mm\"\nmarks = \"painted rings\"\n\
                          mass = \"0.35 kg\"\nconditioning_cycles = 3\ntemperature = \"20 degC\"\nforce_uncertainty = \"0.2 %\"\n\
                          length_uncertainty = \"0.3 mm\"\nreadings = \"lot.csv\"\n";

/// Works through [`PLAN`], typing lengths where they are asked for; the readings that were kept.
fn read_cord(dir: &Path, board: &Board<Pulled>, name: &str, typed: bool) -> Vec<CordReading> {
    let mut args = vec!["cord", "read", "plan.csv", "--cell", "line", "--readings", name];
    args.extend((!typed).then_some("--encoder"));
    let mut guided = Guided::start(dir, &args);
    for (step, force_n, draw_m) in [(1, 20.0, 0.27), (2, 45.0, 0.81), (4, 17.0, 0.27)] {
        guided.asked(&format!("step {step} of 4: cord 7-01, cycle 4, "));
        let mut shown = board.shown.lock().unwrap();
        (shown.force_n, shown.draw_m) = (force_n, draw_m);
        drop(shown);
        guided.answer("");
        if typed {
            guided.asked("length between the marks?");
            if step == 1 {
                guided.answer("2,970 m");
                guided.asked("has a decimal comma, write a point");
                guided.asked("length between the marks?");
            }
            guided.answer(&format!("{:.3} m", 2.7 + draw_m));
        }
        if step == 2 {
            guided.asked("step 3 of 4: cord 7-01, cycle 4, hold");
            // It relaxes while it is held; nobody presses a key.
            board.shown.lock().unwrap().force_n = 43.0;
        }
    }
    let (code, said) = guided.end();
    assert_eq!(code, Some(0), "{said}");
    let (sheet, findings) = CordSheet::read(CORD_SHEET, Some(&fs::read_to_string(dir.join(name)).unwrap()));
    sheet.unwrap_or_else(|| panic!("{findings:?}")).readings
}

#[test]
fn a_cord_is_read_beside_the_daemon_by_typed_lengths_and_by_the_encoder() {
    let dir = tempfile::tempdir().unwrap();
    let slack = Pulled { force_n: 0.0, draw_m: 0.0, n_printed: 0 };
    let board = Board::at(&dir.path().join("ports/bench-board"), slack);
    let text = crate::rehearsal_rig::rig_text("north-pier.toml");
    let encoder = "[[channel]]\nname = \"encoder\"\ndevice = \"bench-board\"\ndevice_channel = \"place\"\n\
                   role = \"shuttle_position\"\nrecord = \"records/encoder.toml\"\n";
    let rig = rig_text(&format!("record = \"records/line.toml\"\n{encoder}"))
        .replace("field = 1 }]", "field = 1 }, { name = \"place\", field = 2 }]")
        .replacen("interval = ", "separator = \",\"\ninterval = ", 1);
    fs::write(dir.path().join("rig.toml"), rig + &text[text.find("\n#@attached").unwrap()..]).unwrap();
    fs::write(dir.path().join("plan.csv"), PLAN).unwrap();
    let mut daemon = daemon(dir.path());
    daemon.wait_for("phase", "slack");
    for (name, typed) in [("lot.csv", true), ("by-encoder.csv", false)] {
        let readings = read_cord(dir.path(), &board, name, typed);
        let found: Vec<(CordBranch, f64, f64)> =
            readings.iter().map(|one| (one.branch, one.tension_n, one.elongation)).collect();
        let expected = [
            (CordBranch::Load, 20.0, 0.1),
            (CordBranch::Load, 45.0, 0.3),
            (CordBranch::Hold, 43.0, 0.3),
            (CordBranch::Unload, 17.0, 0.1),
        ];
        assert_eq!(found.len(), 4);
        for (found, expected) in found.iter().zip(expected) {
            assert_eq!(found.0, expected.0);
            assert!(
                (found.1 - expected.1).abs() < 0.05 && (found.2 - expected.2).abs() < 1e-3,
                "{found:?}: {expected:?}"
            );
        }
        let times: Vec<f64> = readings.iter().filter_map(|one| one.time_s).collect();
        assert!(times.len() == 4 && times.is_sorted() && times[0] == 0.0, "{times:?}");
        assert!((4.5..8.0).contains(&(times[2] - times[1])), "the hold is read five seconds later: {times:?}");
        board.shown.lock().unwrap().force_n = 0.0;
    }
    let again =
        Guided::start(dir.path(), &["cord", "read", "plan.csv", "--cell", "line", "--readings", "lot.csv"]).end();
    assert!(again.0 == Some(2) && again.1.contains("readings are never overwritten"), "{again:?}");
    let mut other =
        Guided::start(dir.path(), &["cord", "read", "plan.csv", "--cell", "encoder", "--readings", "x.csv"]);
    other.answer("");
    let (code, said) = other.end();
    assert!(code == Some(2) && said.contains("encoder is no tension cell, it reads in m"), "{said}");
    assert_eq!(daemon.stop(), Some(0));
}
