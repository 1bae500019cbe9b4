//! The steps of live cord readings: a CSV with a row a step.

use tautrail::rig::CordBranch;

/// One step.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Step {
    pub(super) serial: String,
    pub(super) cycle: u32,
    pub(super) branch: CordBranch,
    /// What to do, for the person.
    pub(super) instruct: String,
    /// Of a hold: so long after the reading before it.
    pub(super) hold_s: f64,
}

impl Step {
    pub(super) fn instruction(&self) -> String {
        let Self { serial, cycle, branch, instruct, hold_s } = self;
        let head = format!("cord {serial}, cycle {cycle}, {}: {instruct}", branch.word());
        if *branch == CordBranch::Hold {
            format!("{head}; read {hold_s:.0} s after the reading before it")
        } else {
            format!("{head}; then Enter")
        }
    }
}

const HEADER: [&str; 5] = ["serial", "cycle", "branch", "do", "hold_s"];

/// The steps of a plan's text.
///
/// # Errors
/// What is wrong, with its line.
pub(super) fn steps(text: &str) -> Result<Vec<Step>, String> {
    let lines = text.lines().enumerate().map(|(index, line)| (index + 1, line.trim()));
    let mut lines = lines.filter(|(_, line)| !line.is_empty() && !line.starts_with('#'));
    let header: Vec<&str> = lines.next().map_or_else(Vec::new, |(_, line)| line.split(',').map(str::trim).collect());
    if header != HEADER {
        return Err(format!("the first row must be {}", HEADER.join(",")));
    }
    let mut steps: Vec<Step> = Vec::new();
    for (line, row) in lines {
        let step = step(row).map_err(|why| format!("line {line}: {why}"))?;
        if step.branch == CordBranch::Hold && steps.last().is_none_or(|before| before.serial != step.serial) {
            return Err(format!("line {line}: a hold must follow a reading of the same cord"));
        }
        steps.push(step);
    }
    if steps.is_empty() { Err("has no steps".into()) } else { Ok(steps) }
}

fn step(row: &str) -> Result<Step, String> {
    let fields: Vec<&str> = row.split(',').map(str::trim).collect();
    let &[serial, cycle, branch, instruct, hold_s] = &fields[..] else {
        return Err(format!("has {} cells, the header has {}", fields.len(), HEADER.len()));
    };
    let known = CordBranch::ALL.into_iter().find(|known| known.word() == branch);
    let branch = known.ok_or_else(|| format!("branch {branch:?} is not known: load, hold or unload"))?;
    if serial.is_empty() {
        return Err("has no serial: which cord is it?".into());
    }
    let hold = hold_s.parse().ok().filter(|hold_s: &f64| (0.0..=1e6).contains(hold_s));
    let hold_s = match branch {
        CordBranch::Hold => hold.ok_or_else(|| format!("hold_s {hold_s:?} is no time of a hold in seconds"))?,
        _ => 0.0,
    };
    let cycle = cycle.parse().map_err(|_| format!("cycle {cycle:?} is no whole number"))?;
    Ok(Step { serial: serial.to_owned(), cycle, branch, instruct: instruct.to_owned(), hold_s })
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_plan_is_read_and_what_is_wrong_in_it_told_with_its_line() {
        let head = "serial,cycle,branch,do,hold_s\n";
        let read = steps(&format!("# invented\n{head}7-01,4,load,hang 1 kg,\n7-01,4,hold,keep,30\n")).unwrap();
        assert_eq!(read[0].instruction(), "cord 7-01, cycle 4, load: hang 1 kg; then Enter");
        assert_eq!(read[1].instruction(), "cord 7-01, cycle 4, hold: keep; read 30 s after the reading before it");
        for (text, said) in [
            ("serial,branch\n", "the first row must be serial,cycle,branch,do,hold_s"),
            (head, "has no steps"),
            (&format!("{head}7-01,4,pull,x,\n"), "line 2: branch \"pull\" is not known: load, hold or unload"),
            (&format!("{head}7-01,4,load,x\n"), "line 2: has 4 cells, the header has 5"),
            (&format!("{head},4,load,x,\n"), "line 2: has no serial: which cord is it?"),
            (&format!("{head}7-01,-1,load,x,\n"), "line 2: cycle \"-1\" is no whole number"),
            (
                &format!("{head}7-01,4,load,x,\n7-01,4,hold,x,nan\n"),
                "line 3: hold_s \"nan\" is no time of a hold in seconds",
            ),
            (
                &format!("{head}7-01,4,load,x,\n7-02,4,hold,x,3\n"),
                "line 3: a hold must follow a reading of the same cord",
            ),
        ] {
            assert_eq!(steps(text), Err(said.to_owned()), "{text}");
        }
    }
}
