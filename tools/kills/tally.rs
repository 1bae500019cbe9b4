//! Sums, and the table.

use std::collections::BTreeMap;
use std::fmt::Write;

use super::account::Cost;
use super::process::Killed;

/// What was killed, and when in its work.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord)]
pub enum Moment {
    DaemonStarting,
    DaemonSlack,
    DaemonWinchBack,
    DaemonHold,
    DaemonLaunch,
    DaemonAfter,
    DaemonSealing,
    RecoverReading,
    RecoverSealing,
}

impl Moment {
    const fn words(self) -> &'static str {
        match self {
            Self::DaemonStarting => "daemon, before it records",
            Self::DaemonSlack => "daemon, slack",
            Self::DaemonWinchBack => "daemon, winch-back",
            Self::DaemonHold => "daemon, hold",
            Self::DaemonLaunch => "daemon, launch and run-out",
            Self::DaemonAfter => "daemon, at rest or let down",
            Self::DaemonSealing => "daemon, a trial being sealed",
            Self::RecoverReading => "recover, before it writes",
            Self::RecoverSealing => "recover, a trial file half written",
        }
    }
}

/// What one session found.
#[derive(Debug, Default)]
pub struct Told {
    pub kills: Vec<(Moment, Killed, Cost)>,
    pub n_files_checked: u64,
    pub n_sealed_again: u64,
    pub n_earlier_compared: u64,
    pub faults: Vec<String>,
    /// Earlier trial files that were not as before.
    pub touched: Vec<String>,
}

impl Told {
    /// Everything that is not as it should be.
    pub fn complaints(&self) -> impl Iterator<Item = &String> {
        let details = self.kills.iter().flat_map(|(_, _, cost)| &cost.details);
        self.faults.iter().chain(&self.touched).chain(details)
    }
}

#[derive(Debug, Default)]
struct Row {
    n_kills: u64,
    lost: u64,
    lost_beyond_lateness: u64,
    oldest_lost_ns: i64,
    late_ns: i64,
}

#[derive(Debug, Default)]
pub struct Tally {
    rows: BTreeMap<Moment, Row>,
    all: Told,
    n_sessions: u64,
    n_false_blocks: u64,
}

impl Tally {
    pub fn add(&mut self, told: Told) {
        self.n_sessions += 1;
        for (moment, killed, cost) in &told.kills {
            let row = self.rows.entry(*moment).or_default();
            row.n_kills += 1;
            row.lost += cost.lost;
            row.lost_beyond_lateness += cost.lost_beyond_lateness;
            row.oldest_lost_ns = row.oldest_lost_ns.max(cost.oldest_lost_ns);
            row.late_ns = row.late_ns.max(killed.late_ns);
            self.n_false_blocks += cost.false_blocks;
        }
        self.all.kills.extend(told.kills);
        self.all.n_files_checked += told.n_files_checked;
        self.all.n_sealed_again += told.n_sealed_again;
        self.all.n_earlier_compared += told.n_earlier_compared;
        self.all.faults.extend(told.faults);
        self.all.touched.extend(told.touched);
    }

    pub fn n_kills(&self) -> usize {
        self.all.kills.len()
    }

    pub fn is_sound(&self) -> bool {
        self.rows.values().all(|row| row.lost_beyond_lateness == 0)
            && self.n_false_blocks == 0
            && self.all.faults.is_empty()
            && self.all.touched.is_empty()
    }

    pub fn progress(&self) -> String {
        let lost: u64 = self.rows.values().map(|row| row.lost).sum();
        let Told { faults, touched, .. } = &self.all;
        format!("{} kills, {lost} samples lost, {} bad files, {} touched", self.n_kills(), faults.len(), touched.len())
    }

    pub fn table(&self) -> String {
        let mut out = String::from(
            "| killed | kills | samples lost beyond 100 ms | beyond 100 ms and the sentinel's lateness | oldest sample \
             lost, ms before the kill | sentinel's greatest lateness, ms |\n| --- | --- | --- | --- | --- | --- |\n",
        );
        let ms = |ns: i64| ns as f64 * 1e-6;
        let mut line = |what: &str, row: &Row| {
            let Row { n_kills, lost, lost_beyond_lateness, oldest_lost_ns, late_ns } = row;
            let (oldest, late) = (ms(*oldest_lost_ns), ms(*late_ns));
            let _ = writeln!(out, "| {what} | {n_kills} | {lost} | {lost_beyond_lateness} | {oldest:.1} | {late:.1} |");
        };
        let mut sum = Row::default();
        for (moment, row) in &self.rows {
            line(moment.words(), row);
            sum.n_kills += row.n_kills;
            sum.lost += row.lost;
            sum.lost_beyond_lateness += row.lost_beyond_lateness;
            sum.oldest_lost_ns = sum.oldest_lost_ns.max(row.oldest_lost_ns);
            sum.late_ns = sum.late_ns.max(row.late_ns);
        }
        line("**all**", &sum);
        let Told { n_files_checked, n_sealed_again, n_earlier_compared, faults, touched, .. } = &self.all;
        let _ = writeln!(
            out,
            "\nTrials: {}. Trial files checked: {n_files_checked}, of them sealed again and compared byte for byte: \
             {n_sealed_again}; that fail to open, or claim more or hold less than the journal: {}. Blocks in a journal \
             that the rig never sent: {}. Earlier trial files compared after a kill: {n_earlier_compared}; touched: {}.",
            self.n_sessions,
            faults.len(),
            self.n_false_blocks,
            touched.len()
        );
        for complaint in self.all.complaints() {
            let _ = writeln!(out, "- {complaint}");
        }
        out
    }
}
