//! `tautrail export` and `bundle`, held against readers that share nothing with them: Python's csv, a SQL engine (DuckDB),
//! tar and sha256sum.

#![allow(clippy::unwrap_used, clippy::expect_used, reason = "a test that cannot go on stops here")]
#![allow(dead_code, reason = "the support files serve several tests")]

#[path = "support/archive.rs"]
mod archive;
#[path = "support/journal.rs"]
mod journal_file;
mod support;

use std::fs;
use std::path::Path;
use std::process::Command;

use archive::{copied, json, sealed_trial, shown, tautrail, unlock};
use journal_file::TRIAL_ID;

/// Copies of the sealed trial with other headers: INVENTED DATA.
fn fleet() -> tempfile::TempDir {
    let dir = tempfile::tempdir().unwrap();
    let trials = [
        ("000001-aaaaaa", "north-pier", "2026-12-01T10:00:00Z", "set"),
        ("000002-bbbbbb", "north-pier", "2026-12-02T10:00:00Z", "set"),
        ("000003-cccccc", "../a b=ö'", "2026-12-02T11:00:00Z", "set"),
        ("000004-dddddd", "north-pier", "1970-01-01T00:00:09Z", "never set"),
    ];
    let mut args = Vec::new();
    for (id, rig, started, quality) in trials {
        let path = dir.path().join(format!("trial-{id}.h5"));
        fs::copy(sealed_trial(), &path).unwrap();
        unlock(&path);
        args.push([shown(&path), id, rig, started, quality].join("|"));
    }
    let script = "
import sys, h5py
for row in sys.argv[1:]:
    path, trial_id, rig, started, quality = row.split('|')
    with h5py.File(path, 'r+') as f:
        for name, value in dict(trial_id=trial_id, rig=rig, started=started, started_quality=quality).items():
            f.attrs.modify(name, value)
";
    support::run_oracle(script, &args.iter().map(String::as_str).collect::<Vec<_>>());
    dir
}

#[test]
fn a_sql_engine_queries_the_fleet_by_rig_and_date() {
    let dir = fleet();
    let out = dir.path().join("fleet");
    let (code, said) = tautrail(&["export", "--signals", shown(dir.path()), "--out", shown(&out)]);
    assert_eq!(code, 0, "{said}");
    assert!(said.contains("4 of 4 trials exported, 24 files"), "{said}");
    let script = r#"
import sys, duckdb, h5py, numpy as np
fleet, trial = sys.argv[1:]
def table(name): return f"read_parquet('{fleet}/{name}/*/*/*.parquet', hive_partitioning = true)"
def ask(query): return duckdb.sql(query).fetchall()
print(ask(f"SELECT rig, CAST(date AS VARCHAR), count(*) FROM {table('trials')} GROUP BY ALL ORDER BY 1, 2 NULLS LAST"))
print(ask(f"SELECT trial_id, held, n_amendments FROM {table('trials')} WHERE started >= TIMESTAMPTZ '2026-12-02 10:30:00+00' "))
with h5py.File(trial) as f:
    speed = f['result/launch_speed']
    stored = (speed[()], speed.attrs['standard_uncertainty'], speed.attrs['units'])
    line = f['signals/line']
    time, value = line['time'][:], line['value'][:]
    n_events = len(f['events/time'])
asked = ask(f"SELECT value, standard_uncertainty, unit FROM {table('results')} WHERE name = 'launch_speed'")
assert asked == [stored] * 4, asked
rows = duckdb.sql(f"SELECT time_s, value FROM {table('signals')} WHERE trial_id = '000001-aaaaaa' AND signal = 'line' ORDER BY time_s").fetchnumpy()
assert np.array_equal(rows['time_s'], time) and np.array_equal(rows['value'], value), 'samples differ'
print(ask(f"SELECT count(DISTINCT signal) FROM {table('signals')} WHERE standard_uncertainty IS NOT NULL"))
print(ask(f"SELECT count(*) = {n_events} FROM {table('events')} WHERE trial_id = '000002-bbbbbb'"))
print(ask(f"SELECT DISTINCT name, unit, said_in FROM {table('conditions')} ORDER BY name"))
"#;
    let said = support::run_oracle(script, &[shown(&out), shown(&sealed_trial())]);
    let expected = "\
[(\"../a b=ö'\", '2026-12-02', 1), ('north-pier', '2026-12-01', 1), ('north-pier', '2026-12-02', 1), ('north-pier', None, 1)]
[('000003-cccccc', False, 0)]
[(3,)]
[(True,)]
[('air_density', 'kg/m^3', 'sealed'), ('head_wind', 'm/s', 'sealed')]
";
    assert_eq!(said, expected);
    // Again, with an amendment: the same files, replaced; the example asks them.
    let first = dir.path().join("trial-000001-aaaaaa.h5");
    let more = ["--person", "A", "--reason", "b", "--condition", "head_wind=5 m/s"];
    assert_eq!(tautrail(&[&["amend", shown(&first)], &more[..]].concat()).0, 0);
    assert_eq!(tautrail(&["export", shown(dir.path()), "--out", shown(&out)]).0, 0);
    let example = include_str!("../tools/examples/query_fleet.py");
    let said = support::run_oracle(example, &[shown(&out)]);
    assert_eq!(said.lines().count(), 4, "{said}");
    assert!(said.lines().nth(1).unwrap().starts_with("north-pier 2026-12-01 1 1"), "{said}");
    let script = "import sys, duckdb\nprint(duckdb.sql(f\"SELECT value, said_in FROM read_parquet('{sys.argv[1]}/conditions/*/*/*.parquet') WHERE name = 'head_wind' AND trial_id LIKE '%aaaaaa'\").fetchall())";
    assert_eq!(support::run_oracle(script, &[shown(&out)]), "[(5.0, 'amendment 0001')]\n");
}

#[test]
fn csv_has_units_in_its_header_and_every_digit() {
    let (dir, trial) = copied();
    let out = dir.path().join("out");
    let (code, said) = tautrail(&["export", "--to", "csv", "--signals", shown(&trial), "--out", shown(&out)]);
    assert_eq!(code, 0, "{said}");
    let script = r#"
import csv, sys, pathlib, h5py
folder, trial = pathlib.Path(sys.argv[1]), sys.argv[2]
for path in folder.iterdir():
    raw = path.read_bytes()
    # RFC 4180, section 2: every record ends with CRLF, all have as many fields as the header.
    rows = list(csv.reader(path.open(newline='', encoding='utf-8'), strict=True))
    assert raw.endswith(b'\r\n') and len({len(row) for row in rows}) == 1, path
with h5py.File(trial) as f:
    rows = list(csv.reader((folder / 'signal-line.csv').open(newline='')))
    assert rows[0] == ['time [s]', 'line [N]'], rows[0]
    assert [float(row[1]) for row in rows[1:]] == f['signals/line/value'][:].tolist()
    results = {row['name']: row for row in csv.DictReader((folder / 'results.csv').open(newline=''))}
    assert float(results['launch_speed']['value']) == f['result/launch_speed'][()] and results['launch_speed']['unit'] == 'm/s'
    events = list(csv.DictReader((folder / 'events.csv').open(newline='')))
    assert [row['text'] for row in events] == f['events/text'].asstr()[:].tolist() and 'time [s]' in events[0]
print(sorted(path.name for path in folder.iterdir())[:4], rows[1][0] != '')
"#;
    let folder = out.join(format!("trial-{TRIAL_ID}"));
    let said = support::run_oracle(script, &[shown(&folder), shown(&trial)]);
    assert_eq!(said, "['conditions.csv', 'events.csv', 'instants.csv', 'results.csv'] True\n");
}

#[test]
fn a_trial_that_cannot_be_exported_is_named_and_the_others_are() {
    let (dir, _trial) = copied();
    fs::write(dir.path().join("trial-000009-ffffff.h5"), b"cut short").unwrap();
    let out = dir.path().join("out");
    let (code, said) = tautrail(&["export", shown(dir.path()), "--out", shown(&out)]);
    assert_eq!(code, 1, "{said}");
    assert!(said.contains("NOT EXPORTED") && said.contains("000009-ffffff") && said.contains("1 of 2"), "{said}");
    let (code, said) = tautrail(&["export", "/no/such/file.h5", "--out", "/proc/nowhere"]);
    assert!(code == 1 && said.contains("/no/such/file.h5"), "{said}");
}

fn run(program: &str, args: &[&str], dir: &Path) -> (bool, String) {
    let output = Command::new(program).args(args).current_dir(dir).output().unwrap();
    (output.status.success(), String::from_utf8([output.stdout, output.stderr].concat()).unwrap())
}

#[test]
fn a_bundle_holds_everything_and_other_tools_prove_it() {
    let dir = tempfile::tempdir().unwrap();
    journal_file::nominal(dir.path(), 0.1, true);
    assert_eq!(tautrail(&["recover", shown(dir.path())]).0, 0);
    let trial = dir.path().join(format!("trial-{TRIAL_ID}.h5"));
    let who = ["--person", "A. Recorder", "--reason", "cord parted"];
    assert_eq!(tautrail(&[&["amend", shown(&trial), "--note", "left cord"], &who[..]].concat()).0, 0);
    assert_eq!(tautrail(&[&["hold", shown(&trial)], &who[..]].concat()).0, 0);
    let film = dir.path().join("film.mov");
    fs::write(&film, vec![7_u8; 300_000]).unwrap();
    fs::create_dir(dir.path().join("other")).unwrap();
    fs::write(dir.path().join("other/film.mov"), b"another film").unwrap();
    fs::write(dir.path().join("daemon.log"), "said\n").unwrap();
    let at = |name: &str| dir.path().join(name).to_str().unwrap().to_owned();
    let (film_2, log, out) = (at("other/film.mov"), at("daemon.log"), at("incident.tar"));
    let args = ["bundle", shown(&trial), "--out", &out, "--attach", shown(&film), "--attach", &film_2, "--log", &log];
    let bundled = json(&args);
    assert!(bundled["error"].is_null(), "{bundled}");
    let kinds: Vec<&str> =
        bundled["files"].as_array().unwrap().iter().map(|file| file["kind"].as_str().unwrap()).collect();
    assert_eq!(kinds, ["trial", "amendment", "hold", "journal", "log", "attachment", "attachment"]);
    assert_eq!(bundled["raw_sha256"], json(&["verify", shown(&trial)])["trials"][0]["raw_sha256"]);
    assert_eq!(run("sha256sum", &[&out], dir.path()).1[..64], *bundled["bundle_sha256"].as_str().unwrap());

    let unpacked = tempfile::tempdir().unwrap();
    let (ok, said) = run("tar", &["-xf", &out], unpacked.path());
    assert!(ok, "{said}");
    let folder = unpacked.path().join(format!("trial-{TRIAL_ID}-bundle"));
    let (ok, said) = run("sha256sum", &["--strict", "-c", "SHA256SUMS"], &folder);
    assert!(ok && said.matches(": OK").count() == 7, "{said}");
    assert_eq!(fs::read(folder.join("attachments/2-film.mov")).unwrap(), b"another film");
    let manifest: serde_json::Value = serde_json::from_slice(&fs::read(folder.join("manifest.json")).unwrap()).unwrap();
    assert_eq!(manifest["files"], bundled["files"]);
    // The journal in it seals to the very bytes of the trial in it.
    let again = tempfile::tempdir().unwrap();
    fs::rename(folder.join("journal"), again.path().join("journal")).unwrap();
    assert_eq!(tautrail(&["recover", shown(again.path())]).0, 0);
    let name = format!("trial-{TRIAL_ID}.h5");
    assert!(fs::read(again.path().join(&name)).unwrap() == fs::read(folder.join(&name)).unwrap());

    let (code, said) = tautrail(&args);
    assert!(code == 2 && said.contains("incident.tar can't be written"), "nothing is overwritten: {said}");
}

#[test]
fn a_bundle_says_what_is_missing_and_takes_a_damaged_trial_too() {
    let (dir, trial) = copied();
    let out = dir.path().join("a.tar");
    let (code, said) = tautrail(&["bundle", shown(&trial), "--out", shown(&out)]);
    assert!(code == 1 && said.contains("no journal of the trial is there any more"), "{said}");
    unlock(&trial);
    fs::write(&trial, b"cut short").unwrap();
    let out = dir.path().join("b.tar");
    let (code, said) = tautrail(&["bundle", shown(&trial), "--out", shown(&out)]);
    assert!(code == 1 && said.contains("the trial file can't be read") && out.exists(), "{said}");
    let out = dir.path().join("c.tar");
    let (code, said) = tautrail(&["bundle", shown(&trial), "--out", shown(&out), "--attach", "/no/such/film"]);
    assert!(code == 2 && said.contains("/no/such/film is no file") && !out.exists(), "{said}");
}
