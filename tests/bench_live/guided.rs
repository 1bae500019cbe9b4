//! A guided command as a person runs it, and the rig it is run at.

use std::io::{BufRead, BufReader, Write};
use std::path::Path;
use std::process::{Child, ChildStdin, ChildStdout, Command, Stdio};

use crate::daemon_process::Daemon;

/// The daemon on `rig.toml` in `dir`.
pub fn daemon(dir: &Path) -> Daemon {
    let mut command = Command::new(env!("CARGO_BIN_EXE_tautrail"));
    Daemon::start(command.current_dir(dir).args(["--json", "daemon", "rig.toml", "--dir", "trials"]))
}

/// The rehearsal's rig with the bench's cell as its only sensor; `values` is what the channel says of its calibration.
pub fn rig_text(values: &str) -> String {
    let text = crate::rehearsal_rig::rig_text("north-pier.toml");
    let launcher = text.split("[[device]]").next().unwrap();
    format!(
        "{launcher}[[device]]\nname = \"bench-board\"\nport = \"ports/bench-board\"\nbaud = 115200\nprotocol = \"text\"\n\
         [device.text]\ninterval = \"33.3 ms\"\ncolumn = [{{ name = \"counts\", field = 1 }}]\n\
         [[channel]]\nname = \"line\"\ndevice = \"bench-board\"\ndevice_channel = \"counts\"\nrole = \"release_line_tension\"\n{values}"
    )
}

/// The guided command, and the person in front of it.
pub struct Guided {
    child: Child,
    lines: std::io::Lines<BufReader<ChildStdout>>,
    enter: Option<ChildStdin>,
    said: String,
}

impl Guided {
    pub fn start(dir: &Path, args: &[&str]) -> Self {
        let mut child = Command::new(env!("CARGO_BIN_EXE_tautrail"))
            .current_dir(dir)
            .args(args)
            .args(["--dir", "trials"])
            .env("NO_COLOR", "1")
            .stdin(Stdio::piped())
            .stdout(Stdio::piped())
            .stderr(Stdio::piped())
            .spawn()
            .unwrap();
        let lines = BufReader::new(child.stdout.take().unwrap()).lines();
        Self { enter: child.stdin.take(), child, lines, said: String::new() }
    }

    /// Reads on until it asks for something; the line that asks.
    #[track_caller]
    pub fn asked(&mut self, for_what: &str) -> String {
        for line in self.lines.by_ref().map_while(Result::ok) {
            self.said.push_str(&format!("{line}\n"));
            if line.contains(for_what) {
                return line;
            }
        }
        let complaint = self.complaint();
        panic!("it never asked for {for_what:?}: {}\n{complaint}", self.said);
    }

    pub fn answer(&mut self, text: &str) {
        self.enter.as_mut().unwrap().write_all(format!("{text}\n").as_bytes()).unwrap();
    }

    fn complaint(&mut self) -> String {
        let mut text = String::new();
        if let Some(mut stderr) = self.child.stderr.take() {
            std::io::Read::read_to_string(&mut stderr, &mut text).unwrap();
        }
        text
    }

    /// To its end: exit code and all it said.
    pub fn end(mut self) -> (Option<i32>, String) {
        drop(self.enter.take());
        let rest: Vec<String> = self.lines.by_ref().map_while(Result::ok).collect();
        let complaint = self.complaint();
        let said = format!("{}{}\n{complaint}", self.said, rest.join("\n"));
        (self.child.wait().unwrap().code(), said)
    }
}
