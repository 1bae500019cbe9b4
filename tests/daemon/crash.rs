//! kill -9 at the worst moments: while the winch draws, while the shuttle flies, five times in one trial, while it is sealed.
//!
//! The virtual rig waits while nobody reads its ports, so what is missing afterwards is what stood in a port's queue and
//! was cleared at the new opening. A real device would go on: it would lose all of the time the daemon was away.

use std::path::PathBuf;
use std::sync::Arc;
use std::sync::atomic::{AtomicBool, AtomicI64, Ordering};
use std::time::Duration;

use crate::stage::{DEVICES, Daemon, Stage, monotonic_ns, wait_until};

/// Written but not read by the daemon when it was killed: one block in the making, and the machine's lateness.
const NOT_READ_YET_S: f64 = 0.1;

/// Kills the daemon `after` an event, starts it again, and checks what the sealed trial holds.
fn killed(wait: impl Fn(&Daemon), after: Duration) {
    let stage = Stage::new();
    let rig = stage.play(".");
    let daemon = stage.start_daemon();
    wait(&daemon);
    std::thread::sleep(after);
    let killed_ns = daemon.kill();
    let mut daemon = stage.start_daemon();
    daemon.wait_for("journal", "was under way and goes on; nothing was recorded for");
    daemon.wait_for("trial", "closes");
    daemon.wait_for("seal", "is sealed");
    assert_eq!(daemon.stop(), Some(0));
    let truth = stage.truth(rig, ".");
    let trial = stage.trial();
    for device in DEVICES {
        let blocks = trial.blocks(device).unwrap();
        let holes = truth.holes(device, &blocks);
        let lost: u64 = holes.iter().map(|(_, n)| n).sum();
        println!("{device}: {lost} samples lost in {} holes, of {} blocks kept", holes.len(), blocks.len());
        assert!(holes.len() <= 1, "{device}: only where the daemon was away: {holes:?}");
        for (before, _) in &holes {
            let unread_s = (killed_ns - before.host_ns) as f64 * 1e-9;
            assert!(unread_s < NOT_READ_YET_S, "{device}: {unread_s} s before the kill are missing");
        }
        let told: u64 = trial.device(device).unwrap().gaps.iter().map(|gap| gap.n_missing).sum();
        assert_eq!(told, lost, "{device}: the file says what is missing, no more and no less");
    }
}

#[test]
fn killed_during_winch_back_the_next_start_goes_on_with_the_trial() {
    killed(|daemon| drop(daemon.wait_for("trial", "opens")), Duration::from_millis(900));
}

#[test]
fn killed_during_launch_the_next_start_seals_what_was_recorded() {
    killed(|daemon| drop(daemon.wait_for("phase", "launch")), Duration::from_millis(100));
}

/// A thread that does nothing but note the time each 5 ms: how old its last note is beyond that is how late this machine
/// was with anything at all.
struct Sentinel {
    noted_ns: Arc<AtomicI64>,
    stop: Arc<AtomicBool>,
}

const NOTED_EVERY: Duration = Duration::from_millis(5);

impl Sentinel {
    fn start() -> Self {
        let (noted_ns, stop) = (Arc::new(AtomicI64::new(monotonic_ns())), Arc::new(AtomicBool::new(false)));
        let (note, stopped) = (Arc::clone(&noted_ns), Arc::clone(&stop));
        std::thread::spawn(move || {
            while !stopped.load(Ordering::Relaxed) {
                note.store(monotonic_ns(), Ordering::Relaxed);
                std::thread::sleep(NOTED_EVERY);
            }
        });
        Self { noted_ns, stop }
    }

    fn late_s(&self) -> f64 {
        let late_ns = monotonic_ns() - self.noted_ns.load(Ordering::Relaxed) - NOTED_EVERY.as_nanos() as i64;
        late_ns.max(0) as f64 * 1e-9
    }
}

impl Drop for Sentinel {
    fn drop(&mut self) {
        self.stop.store(true, Ordering::Relaxed);
    }
}

#[test]
fn killed_five_times_in_one_trial_it_is_one_trial_with_a_hole_a_kill() {
    let stage = Stage::new();
    let rig = stage.play(".");
    let sentinel = Sentinel::start();
    let mut kills = Vec::new();
    let mut daemon = stage.start_daemon();
    daemon.wait_for("trial", "opens");
    for after_ms in [300, 500, 100, 400, 200] {
        std::thread::sleep(Duration::from_millis(after_ms));
        let late_s = sentinel.late_s();
        kills.push((daemon.kill(), late_s));
        daemon = stage.start_daemon();
        daemon.wait_for("journal", "was under way and goes on");
    }
    daemon.wait_for("trial", "closes");
    daemon.wait_for("seal", "is sealed");
    assert_eq!(daemon.stop(), Some(0));
    let truth = stage.truth(rig, ".");
    let trial = stage.trial();
    for device in DEVICES {
        let blocks = trial.blocks(device).unwrap();
        let holes = truth.holes(device, &blocks);
        assert!(holes.len() <= kills.len(), "{device}: {holes:?}");
        for (before, n) in &holes {
            let (killed_ns, late_s) =
                *kills.iter().find(|(at_ns, _)| *at_ns >= before.host_ns).expect("a kill after it");
            let unread_s = (killed_ns - before.host_ns) as f64 * 1e-9;
            println!("{device}: {n} samples lost, from {unread_s:.3} s before a kill on, sentinel {late_s:.3} s late");
            assert!(unread_s < NOT_READ_YET_S + late_s, "{device}: {unread_s} s before a kill, {late_s} s late");
        }
        let (lost, record) = (holes.iter().map(|(_, n)| n).sum::<u64>(), trial.device(device).unwrap());
        assert_eq!(record.gaps.iter().map(|gap| gap.n_missing).sum::<u64>(), lost, "{device}: said to be missing");
    }
}

/// The process that seals a trial now, by the name of the file that it writes.
fn sealing_process(stage: &Stage) -> i32 {
    let trials = stage.path("trials");
    let pid_of = |path: PathBuf| {
        let name = path.file_name()?.to_str()?.strip_suffix(".part")?;
        name.rsplit_once('.')?.1.parse().ok().filter(|pid| is_running(*pid))
    };
    let found = || std::fs::read_dir(&trials).unwrap().find_map(|entry| pid_of(entry.ok()?.path()));
    wait_until("a trial being sealed", || found().is_some());
    found().expect("it is still being sealed")
}

/// Not gone, and not a zombie either (proc(5)).
fn is_running(pid: i32) -> bool {
    let stat = std::fs::read_to_string(format!("/proc/{pid}/stat")).unwrap_or_default();
    stat.rsplit_once(") ").is_some_and(|(_, state)| !state.starts_with(['Z', 'X']))
}

/// The 19th field of a process's `stat` (proc(5)).
fn niceness(pid: i32) -> i32 {
    let stat = std::fs::read_to_string(format!("/proc/{pid}/stat")).unwrap();
    let after_name = stat.rsplit_once(") ").unwrap().1;
    after_name.split(' ').nth(16).unwrap().parse().unwrap()
}

fn n_parts(stage: &Stage) -> usize {
    let names = std::fs::read_dir(stage.path("trials")).unwrap().map(|entry| entry.unwrap().file_name());
    names.filter(|name| name.to_string_lossy().ends_with(".part")).count()
}

#[test]
fn killed_while_a_child_seals_the_trial_is_sealed_by_the_child_or_by_the_next_start() {
    let stage = Stage::new();
    let rig = stage.play(".");
    let daemon = stage.start_daemon_with(&["--keep-journal"]);
    daemon.wait_for("trial", "closes");
    let child = sealing_process(&stage);
    let program = std::fs::read_link(format!("/proc/{child}/exe")).unwrap();
    assert_eq!((program.as_path(), niceness(child)), (env!("CARGO_BIN_EXE_tautrail").as_ref(), 15), "itself, niced");
    daemon.kill();
    // SAFETY: sends a signal to a process that ran a moment ago; ids are not reused that fast.
    assert_eq!(unsafe { libc::kill(child, libc::SIGKILL) }, 0);
    wait_until("the child's end", || !is_running(child));
    assert_eq!((stage.trials().len(), n_parts(&stage)), (0, 1), "half a file, and not under a trial's name");

    // The next start clears it up and begins again; killed too, it leaves a child that finishes by itself.
    let daemon = stage.start_daemon();
    daemon.wait_for("seal", "has no file yet and is sealed now");
    let child = sealing_process(&stage);
    assert_eq!(n_parts(&stage), 1, "what the first child left is gone");
    daemon.kill();
    wait_until("the child's end", || !is_running(child));
    assert_eq!((stage.trials().len(), n_parts(&stage)), (1, 0));

    let truth = stage.truth(rig, ".");
    let recovered = stage.run(&["--json", "recover"]);
    let told: serde_json::Value = serde_json::from_slice(&recovered.stdout).unwrap();
    assert_eq!((&told["trials"][0]["fate"], recovered.status.code()), (&"already_sealed".into(), Some(0)), "{told}");
    let trial = stage.trial();
    assert_eq!(trial.outcome(), "launched");
    let kept = &told["kept_journals"][0]["trial_id"];
    assert_eq!(kept, &trial.header().trial_id, "the first run was told to keep it, whoever sealed it");
    for device in DEVICES {
        assert_eq!(truth.holes(device, &trial.blocks(device).unwrap()), [], "{device}");
    }
}
