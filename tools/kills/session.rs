//! One trial, from the rig's first byte to its sealed file, with kills all along.

use std::collections::BTreeMap;
use std::path::{Path, PathBuf};
use std::sync::atomic::{AtomicBool, Ordering};
use std::sync::{Arc, Mutex};
use std::time::{Duration, Instant};

use virtual_rig::performance::{Options, Performance, prepare};
use virtual_rig::play::pty::{PtySettings, play};
use virtual_rig::truth::Truth;

use super::account::{self, Cost, Read};
use super::files::Files;
use super::process::{Killed, Victim, wait_for_orphans};
use super::tally::{Moment, Told};

/// Share of the slow phases' time: a launch takes some four seconds.
const PACE: f64 = 0.12;
/// Longest life of a daemon.
const LIFE_S: f64 = 1.8;
const LIVES_MAX: usize = 14;
const SEALINGS: usize = 6;
/// Until the last daemon has seen rest and closed the trial.
const LAST_LIFE: Duration = Duration::from_millis(2500);
const PATIENCE: Duration = Duration::from_secs(60);

/// What all sessions share.
pub struct Stage {
    program: PathBuf,
    performances: Vec<Performance>,
    /// A trial that an earlier session sealed.
    earlier: Mutex<Option<Vec<u8>>>,
    /// How long a sealing takes here and now.
    seal_s: Mutex<f64>,
}

impl Stage {
    pub fn new(program: PathBuf) -> Self {
        let options = |scenario: &str| Options { scenario: scenario.into(), pace: PACE, ..Options::default() };
        let performances = ["nominal", "let-down"].map(|word| prepare(&options(word)).expect("the scenario"));
        Self { program, performances: performances.into(), earlier: Mutex::new(None), seal_s: Mutex::new(1.0) }
    }
}

struct Session<'s> {
    stage: &'s Stage,
    dir: tempfile::TempDir,
    draw: Draw,
    told: Told,
    lives: Vec<Killed>,
    /// Trial files that must be there.
    files: Files,
    /// Bytes of every trial file that was checked last under its name.
    checked: BTreeMap<PathBuf, Vec<u8>>,
    n_started: u64,
}

/// Plays one trial; the seed draws every instant.
pub fn run(stage: &Stage, seed: u64) -> Told {
    let mut session = Session {
        stage,
        dir: tempfile::tempdir().expect("a directory"),
        draw: Draw(seed),
        told: Told::default(),
        lives: Vec::new(),
        files: Files::default(),
        checked: BTreeMap::new(),
        n_started: 0,
    };
    session.prepare();
    let truth = session.play(&stage.performances[usize::from(seed.is_multiple_of(4))]);
    session.seal(&truth);
    let read = account::read(&session.archive());
    for killed in std::mem::take(&mut session.lives) {
        let cost = account::cost(&read, &truth, &killed);
        session.told.kills.push((moment(&truth, &killed, &cost), killed, cost));
    }
    session.told
}

impl Session<'_> {
    fn archive(&self) -> PathBuf {
        self.dir.path().join("trials")
    }

    fn prepare(&mut self) {
        let rig = Path::new(env!("CARGO_MANIFEST_DIR")).join("tools/rehearsal/north-pier.toml");
        let text = tautrail::rig::read_joined(&rig).expect("the rehearsal's rig file");
        std::fs::write(self.dir.path().join("rig.toml"), text).expect("the rig file");
        std::fs::create_dir(self.archive()).expect("the archive");
        if let Some(bytes) = &*self.stage.earlier.lock().expect("a session panicked") {
            let path = self.archive().join("trial-000001-aaaaaa.h5");
            std::fs::write(&path, bytes).expect("the earlier trial");
            self.files.note(&path);
        }
    }

    fn start(&mut self, args: &[&str]) -> Victim {
        self.n_started += 1;
        let stamps = self.dir.path().join(format!("stamps-{}", self.n_started));
        Victim::start(&self.stage.program, args, &self.archive(), stamps)
    }

    fn start_daemon(&mut self) -> Victim {
        let (rig, archive) = (self.dir.path().join("rig.toml"), self.archive());
        let path = |path: &Path| path.to_str().expect("a plain path").to_owned();
        self.start(&["daemon", &path(&rig), "--dir", &path(&archive), "--wait-for-ports"])
    }

    /// The rig plays; daemons live and die until it is through.
    fn play(&mut self, performance: &Performance) -> Truth {
        let stop = Arc::new(AtomicBool::new(false));
        let settings =
            PtySettings { dir: self.dir.path().to_owned(), wait_for_start: PATIENCE, stop: Arc::clone(&stop) };
        std::thread::scope(|scope| {
            let rig = scope.spawn(|| play(performance, &settings).expect("the rig plays"));
            let until = Instant::now() + Duration::from_secs_f64(performance.end_s + 1.5);
            let mut n_lives = 0;
            while n_lives == 0 || (Instant::now() < until && n_lives < LIVES_MAX) {
                let daemon = self.start_daemon();
                std::thread::sleep(Duration::from_secs_f64(self.draw.up_to(LIFE_S)));
                self.kill_daemon(daemon);
                n_lives += 1;
            }
            // Every other trial may come to its end; then the daemon dies while it seals, or just before or after.
            if self.draw.next().is_multiple_of(2) {
                let daemon = self.start_daemon();
                std::thread::sleep(LAST_LIFE + Duration::from_secs_f64(self.draw.up_to(self.seal_s())));
                self.kill_daemon(daemon);
            }
            stop.store(true, Ordering::Relaxed);
            rig.join().expect("the rig ends")
        })
    }

    fn kill_daemon(&mut self, daemon: Victim) {
        let with_sealing = self.draw.next().is_multiple_of(2);
        let killed = daemon.kill(with_sealing);
        self.lives.push(killed);
        if killed.over {
            self.told.faults.push("a daemon ended by itself".to_owned());
        }
        self.compare_earlier();
    }

    /// `recover` and daemons seal and die; the last `recover` may finish. Every file that appears is checked, and taken
    /// away so that the next one has something to do.
    fn seal(&mut self, truth: &Truth) {
        for round in 0..SEALINGS {
            wait_for_orphans(&self.archive());
            self.take_files(truth, true);
            let after_s = self.draw.up_to(1.1 * self.seal_s());
            if round % 3 == 2 {
                let daemon = self.start_daemon();
                std::thread::sleep(Duration::from_secs_f64(after_s + 0.3));
                self.kill_daemon(daemon);
                continue;
            }
            let archive = self.archive().to_str().expect("a plain path").to_owned();
            let mut recover = self.start(&["recover", &archive]);
            std::thread::sleep(Duration::from_secs_f64(after_s));
            let moment = if self.part_exists() { Moment::RecoverSealing } else { Moment::RecoverReading };
            if recover.is_over() {
                recover.finish();
                continue;
            }
            self.told.kills.push((moment, recover.kill(false), Cost::default()));
            self.compare_earlier();
        }
        wait_for_orphans(&self.archive());
        self.take_files(truth, true);
        self.recover_to_the_end();
        self.take_files(truth, false);
        self.compare_earlier();
    }

    fn recover_to_the_end(&mut self) {
        let archive = self.archive().to_str().expect("a plain path").to_owned();
        let begun = Instant::now();
        let code = self.start(&["recover", &archive]).finish();
        *self.stage.seal_s.lock().expect("a session panicked") = begun.elapsed().as_secs_f64();
        if code != Some(0) {
            self.told.faults.push(format!("the last recover ended with {code:?}"));
        }
        for path in self.names().iter().filter(|path| is_part(path)) {
            self.told.faults.push(format!("the last recover left {}", path.display()));
        }
    }

    fn seal_s(&self) -> f64 {
        *self.stage.seal_s.lock().expect("a session panicked")
    }

    fn names(&self) -> Vec<PathBuf> {
        let entries = std::fs::read_dir(self.archive()).expect("the archive");
        entries.filter_map(|entry| Some(entry.ok()?.path())).collect()
    }

    fn part_exists(&self) -> bool {
        self.names().iter().any(|path| is_part(path))
    }

    fn trial_files(&self) -> Vec<PathBuf> {
        let is_trial = |path: &PathBuf| path.extension().is_some_and(|extension| extension == "h5");
        self.names().into_iter().filter(is_trial).collect()
    }

    fn earlier(path: &Path) -> bool {
        path.ends_with("trial-000001-aaaaaa.h5")
    }

    /// Files that were there are there with the same bytes, before anything else happens; those that are new are noted.
    fn compare_earlier(&mut self) {
        let compared = self.files.compare();
        self.told.n_earlier_compared += compared.n_files;
        self.told.touched.extend(compared.touched);
        self.trial_files().iter().for_each(|path| self.files.note(path));
    }

    /// Checks the files of this session's trials against the journal as it is now.
    fn take_files(&mut self, truth: &Truth, take_away: bool) {
        let mut read: Option<Read> = None;
        for path in self.trial_files().into_iter().filter(|path| !Self::earlier(path)) {
            let bytes = std::fs::read(&path).expect("the trial file");
            let read = read.get_or_insert_with(|| account::read(&self.archive()));
            self.told.n_files_checked += 1;
            self.told.faults.extend(account::faults_of(&path, read, truth));
            self.files.note(&path);
            let same_range = self.checked.insert(path.clone(), bytes.clone());
            if let Some(before) = same_range.filter(|before| range_of(before) == range_of(&bytes)) {
                self.told.n_sealed_again += 1;
                if before != bytes {
                    self.told.faults.push(format!("{} was sealed again with other bytes", path.display()));
                }
            }
            *self.stage.earlier.lock().expect("a session panicked") = Some(bytes);
            if take_away {
                self.files.take_away(&path);
            }
        }
    }
}

fn is_part(path: &Path) -> bool {
    path.extension().is_some_and(|extension| extension == "part")
}

/// First and last record of a trial file.
fn range_of(bytes: &[u8]) -> (u64, u64) {
    let file = tempfile::NamedTempFile::new().expect("a file");
    std::fs::write(file.path(), bytes).expect("the copy");
    let trial = tautrail::trial::TrialFile::open(file.path()).expect("a checked trial file");
    (trial.header().first_seq, trial.header().last_seq)
}

fn moment(truth: &Truth, killed: &Killed, cost: &Cost) -> Moment {
    if killed.sealing {
        return Moment::DaemonSealing;
    }
    if !cost.recorded {
        return Moment::DaemonStarting;
    }
    let before = |event: &&virtual_rig::truth::Event| event.host_ns <= killed.killed_ns;
    match truth.events.iter().filter(before).max_by_key(|event| event.host_ns).map(|event| event.kind) {
        None | Some("slack") => Moment::DaemonSlack,
        Some("winch-back") => Moment::DaemonWinchBack,
        Some("hold") => Moment::DaemonHold,
        Some("rest" | "let-down") => Moment::DaemonAfter,
        Some(_) => Moment::DaemonLaunch,
    }
}

/// Sebastiano Vigna's SplitMix64.
struct Draw(u64);

impl Draw {
    fn next(&mut self) -> u64 {
        self.0 = self.0.wrapping_add(0x9e37_79b9_7f4a_7c15);
        let mut z = self.0;
        z = (z ^ (z >> 30)).wrapping_mul(0xbf58_476d_1ce4_e5b9);
        z = (z ^ (z >> 27)).wrapping_mul(0x94d0_49bb_1331_11eb);
        z ^ (z >> 31)
    }

    fn up_to(&mut self, most: f64) -> f64 {
        (self.next() >> 11) as f64 / (1_u64 << 53) as f64 * most
    }
}
