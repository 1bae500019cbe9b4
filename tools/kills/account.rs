//! What the rig says it sent, what the journal holds, what the trial files claim.

use std::collections::{BTreeMap, BTreeSet};
use std::path::Path;
use std::sync::Arc;

use firmware_protocol::{Message, decode};
use tautrail::archive::{Depth, verify};
use tautrail::journal::{Body, Item, JournalReader, RealDisk, journals};
use tautrail::link::LinkWhat;
use tautrail::trial::TrialFile;
use virtual_rig::truth::Truth;

use super::process::Killed;

/// Sent this long before a kill, a sample is promised to be in the journal.
const PROMISE_NS: i64 = 100_000_000;
/// Bytes stale at a port's opening are cleared for so long.
const OPENING_NS: i64 = 100_000_000;

/// Sequence, first index, samples, checksum.
type BlockId = (u32, u64, u16, u32);

/// One device between a port's opening and its end.
#[derive(Debug)]
struct Spell {
    device: usize,
    up_ns: i64,
    partial: Vec<u8>,
    blocks: Vec<Kept>,
}

/// A block in the journal, whole with this record.
#[derive(Debug, Clone, Copy)]
struct Kept {
    seq: u64,
    block: BlockId,
}

/// A journal, read by its documented format, frames cut and checked by the wire protocol's own rules.
#[derive(Debug, Default)]
pub struct Read {
    /// Per opening of a segment, by its time.
    lives: Vec<(i64, Vec<Spell>)>,
}

pub fn read(archive: &Path) -> Read {
    let (disk, dir) = (Arc::new(RealDisk), archive.join("journal"));
    let mut read = Read::default();
    for id in journals(&*disk, &dir).expect("the journals") {
        let Ok(reader) = JournalReader::open(Arc::clone(&disk) as _, &dir, &id) else { continue };
        for item in reader.records() {
            match item.expect("the journal reads") {
                Item::Opening { host_ns, .. } => read.lives.push((host_ns, Vec::new())),
                Item::Record(record) => read.take(record.seq, record.host_ns, record.device.0.into(), record.body),
                Item::Damage(_) => {} // told by what is missing
            }
        }
    }
    read
}

impl Read {
    fn take(&mut self, seq: u64, host_ns: i64, device: usize, body: Body) {
        let Some((_, spells)) = self.lives.last_mut() else { return };
        match body {
            Body::Link(LinkWhat::Up { .. }) => {
                spells.push(Spell { device, up_ns: host_ns, partial: Vec::new(), blocks: Vec::new() });
            }
            Body::Link(LinkWhat::Bytes(bytes)) => {
                if let Some(spell) = spells.iter_mut().rev().find(|spell| spell.device == device) {
                    spell.feed(seq, &bytes);
                }
            }
            _ => {}
        }
    }

    fn blocks_in(&self, device: usize, first_seq: u64, last_seq: u64) -> BTreeSet<BlockId> {
        let spells = self.lives.iter().flat_map(|(_, spells)| spells).filter(|spell| spell.device == device);
        let kept = spells.flat_map(|spell| &spell.blocks).filter(|kept| (first_seq..=last_seq).contains(&kept.seq));
        kept.map(|kept| kept.block).collect()
    }
}

impl Spell {
    fn feed(&mut self, seq: u64, bytes: &[u8]) {
        for &byte in bytes {
            if byte != 0 {
                self.partial.push(byte);
                continue;
            }
            let mut frame = std::mem::take(&mut self.partial);
            if let Ok(frame) = decode(&mut frame)
                && let Message::Block(block) = frame.message
            {
                let block = (frame.header.sequence, block.first_index, block.n_samples, frame.crc);
                self.blocks.push(Kept { seq, block });
            }
        }
    }
}

/// What one kill cost.
#[derive(Debug, Clone, Default)]
pub struct Cost {
    /// The daemon had begun to record.
    pub recorded: bool,
    /// Samples older than the promise that are not in the journal.
    pub lost: u64,
    /// The same, the machine's own lateness subtracted.
    pub lost_beyond_lateness: u64,
    /// How old the oldest sample was that is missing, at the kill.
    pub oldest_lost_ns: i64,
    /// Blocks in the journal that the rig never sent.
    pub false_blocks: u64,
    /// Of each block lost beyond the promise: whose it was and where it stood.
    pub details: Vec<String>,
}

/// Compares one life of the daemon with the rig's log.
pub fn cost(read: &Read, truth: &Truth, killed: &Killed) -> Cost {
    let mut cost = Cost::default();
    let lived = killed.spawned_ns..=killed.killed_ns;
    for (_, spells) in read.lives.iter().filter(|(opened_ns, _)| lived.contains(opened_ns)) {
        cost.recorded = true;
        for spell in spells {
            cost.add(spell, truth, killed);
        }
    }
    cost
}

impl Cost {
    fn add(&mut self, spell: &Spell, truth: &Truth, killed: &Killed) {
        let stream = &truth.devices[spell.device].streams[0];
        let sent: BTreeMap<BlockId, usize> = stream.blocks.iter().copied().zip(0..).collect();
        let places: BTreeSet<usize> = spell.blocks.iter().filter_map(|kept| sent.get(&kept.block).copied()).collect();
        self.false_blocks += (spell.blocks.len() - places.len()) as u64;
        let first = places.first().copied();
        for (place, (block, &taken_ns)) in stream.blocks.iter().zip(&stream.taken_host_ns).enumerate() {
            // Before the first block kept, the port was being opened and what stood in it was cleared: also the first
            // bytes of a block whose last ones came later.
            let begun_ns = place.checked_sub(1).map_or(i64::MIN, |before| stream.taken_host_ns[before]);
            let due = first.is_some_and(|first| place > first) || begun_ns > spell.up_ns + OPENING_NS;
            if !due || taken_ns > killed.killed_ns || places.contains(&place) {
                continue;
            }
            let age_ns = killed.killed_ns - taken_ns;
            self.oldest_lost_ns = self.oldest_lost_ns.max(age_ns);
            if age_ns >= PROMISE_NS {
                self.lost += u64::from(block.2);
                self.details.push(detail(&stream.taken_host_ns, place, &places, spell, killed));
            }
            if age_ns >= PROMISE_NS + killed.late_ns {
                self.lost_beyond_lateness += u64::from(block.2);
            }
        }
    }
}

fn detail(taken_ns: &[i64], place: usize, kept: &BTreeSet<usize>, spell: &Spell, killed: &Killed) -> String {
    let ms = |ns: i64| ns as f64 * 1e-6;
    format!(
        "device {}, block {place} of {} sent, kept {:?} to {:?}: {:.1} ms after the port's opening, {:.1} ms before the \
         kill, sentinel {:.1} ms late",
        spell.device,
        taken_ns.len(),
        kept.first(),
        kept.last(),
        ms(taken_ns[place] - spell.up_ns),
        ms(killed.killed_ns - taken_ns[place]),
        ms(killed.late_ns)
    )
}

/// What is wrong with a trial file, in sentences.
pub fn faults_of(path: &Path, read: &Read, truth: &Truth) -> Vec<String> {
    let name = path.file_name().unwrap_or_default().to_string_lossy().into_owned();
    let mut faults = match verify(path, Depth::Stored) {
        Ok(verified) => verified.findings,
        Err(error) => return vec![format!("{name} does not open: {error}")],
    };
    match TrialFile::open(path) {
        Ok(trial) => {
            for (device, sent) in truth.devices.iter().enumerate() {
                faults.extend(against_journal(&trial, device, sent.name, read, &sent.streams[0].blocks));
            }
        }
        Err(error) => faults.push(format!("does not open: {error}")),
    }
    faults.iter().map(|fault| format!("{name}: {fault}")).collect()
}

fn against_journal(trial: &TrialFile, device: usize, name: &str, read: &Read, sent: &[BlockId]) -> Option<String> {
    let header = trial.header();
    let journal = read.blocks_in(device, header.first_seq, header.last_seq);
    if !trial.device_names().ok()?.iter().any(|named| named == name) {
        return (!journal.is_empty()).then(|| format!("{name} is missing, the journal has {}", journal.len()));
    }
    let (Ok(rows), Ok(record)) = (trial.blocks(name), trial.device(name)) else {
        return Some(format!("the blocks of {name} do not read"));
    };
    let file: BTreeSet<BlockId> =
        rows.iter().map(|row| (row.sequence, row.first_index, row.n_samples as u16, row.crc)).collect();
    let sent: BTreeSet<BlockId> = sent.iter().copied().collect();
    let (claimed, left_out) = (file.difference(&journal).count(), journal.difference(&file).count());
    let strange = file.difference(&sent).count();
    let holes: u64 = rows
        .windows(2)
        .map(|pair| pair[1].first_index.saturating_sub(pair[0].first_index + u64::from(pair[0].n_samples)))
        .sum();
    // A range that begins in a hole tells of that hole too: its other edge is not in the file.
    let first_index = rows.first().map_or(0, |row| row.first_index);
    let told: u64 =
        record.gaps.iter().filter(|gap| gap.first_missing_index > first_index).map(|gap| gap.n_missing).sum();
    let sound = claimed + left_out + strange == 0 && holes == told && file.len() == rows.len();
    (!sound).then(|| {
        format!(
            "{name}: {claimed} blocks that the journal does not hold, {strange} that the rig never sent, {left_out} \
             left out; {holes} samples missing, {told} said to be"
        )
    })
}
