//! The kept trial files, opened by this program and by readers that share nothing with it: h5dump of HDF5 1.10, h5py,
//! xarray, and the rules by which a generic NeXus viewer finds its default plot.

#![allow(clippy::unwrap_used, clippy::expect_used, reason = "a test that cannot go on stops here")]
#![allow(dead_code, reason = "the support files serve several tests")]

#[path = "support/archive.rs"]
mod archive;
#[path = "support/journal.rs"]
mod journal_file;
#[path = "support/kept.rs"]
mod kept_file;
mod support;

use std::path::PathBuf;
use std::process::Command;
use std::sync::LazyLock;

use tautrail::archive::{Depth, verify};
use tautrail::trial::TrialFile;

/// Every version of the format that was ever released, and the raw digest its file was sealed with.
const KEPT: [(&str, &str); 1] = [("format-1.h5", "ca58173eeeab335b50e1d51fa121ac866e457d1fdf395522388312d51c2bd3fc")];

fn kept(name: &str) -> PathBuf {
    static UNPACKED: LazyLock<(tempfile::TempDir, Vec<PathBuf>)> = LazyLock::new(|| {
        let dir = tempfile::tempdir().unwrap();
        let paths = KEPT.iter().map(|(name, _)| kept_file::kept(name, dir.path())).collect();
        (dir, paths)
    });
    UNPACKED.1.iter().find(|path| path.ends_with(name)).unwrap().clone()
}

#[test]
fn a_trial_file_of_every_version_still_opens_and_verifies() {
    for (name, raw_sha256) in KEPT {
        let verified = verify(&kept(name), Depth::Everything).unwrap();
        assert_eq!(verified.findings, [""; 0], "{name}");
        assert_eq!(verified.raw_sha256, raw_sha256, "{name}");
        assert!(verified.derived_again && verified.n_samples > 1000 && verified.n_missing > 0, "{verified:?}");
        let trial = TrialFile::open(&kept(name)).unwrap();
        assert_eq!((trial.header().rig.as_str(), trial.header().series.as_str()), ("north-pier", ""));
        assert_eq!(trial.signal_names().unwrap(), ["accel", "anchor", "encoder", "line"]);
        let record = trial.device("winch-node").unwrap();
        assert!(!record.descriptions.is_empty() && !record.rejected.is_empty(), "{record:?}");
        assert_eq!(trial.host_clocks().unwrap().len(), 1);
        assert!(
            trial.texts().unwrap()[0].text.contains("INVENTED") || trial.texts().unwrap()[0].text.contains("invented")
        );
    }
}

#[test]
fn h5dump_of_hdf5_1_10_reads_every_dataset() {
    let dump = |args: &[&str]| {
        let output = Command::new("h5dump").args(args).output().unwrap_or_else(|error| {
            panic!("h5dump does not start ({error}); Debian: apt-get install --no-install-recommends hdf5-tools")
        });
        (output.status.success(), String::from_utf8_lossy(&[output.stdout, output.stderr].concat()).into_owned())
    };
    for (name, _) in KEPT {
        let path = kept(name);
        let path = path.to_str().unwrap();
        let (ok, said) = dump(&[path]);
        let complained = said.lines().find(|line| line.starts_with("h5dump error") || line.contains("unable to"));
        assert!(ok && complained.is_none(), "{name}: {complained:?}");
        let (ok, said) = dump(&["-d", "/signals/line/value", "-c", "3", path]);
        assert!(ok && said.contains("H5T_IEEE_F64LE") && said.contains("(0):"), "{said}");
        let (ok, said) = dump(&["-a", "/result/outcome", path]);
        assert!(ok && said.contains("H5T_CSET_UTF8"), "{said}");
    }
}

/// NeXus manual, "Find the plottable data", version 3 of the rules: `default` attributes lead from the root to an NXdata;
/// `signal` names the dependent dataset, `axes` one dataset for each of its dimensions, `AXISNAME_indices` where it applies;
/// `SIGNAL_errors`-style datasets and units as strings. From memory of the manual, not fetched here.
const NEXUS_PY: &str = r"
import sys, h5py
f = h5py.File(sys.argv[1])
at = f
classes = []
while True:
    classes.append(at.attrs['NX_class'])
    if at.attrs['NX_class'] == 'NXdata': break
    at = at[at.attrs['default']]
assert classes == ['NXroot', 'NXentry', 'NXdata'], classes
signal, axes = at[at.attrs['signal']], at.attrs['axes']
assert len(axes) == signal.ndim == 1
axis = at[axes[0]]
assert axis.shape == signal.shape and at.attrs[axes[0] + '_indices'] == 0
assert signal.attrs['units'] == 'N' and axis.attrs['units'] == 's'
assert at.attrs['role'] == 'release_line_tension'
def classed(name, o):
    if isinstance(o, h5py.Group): assert o.attrs['NX_class'] in ('NXentry', 'NXdata', 'NXcollection'), (name, o.attrs['NX_class'])
f.visititems(classed)
for group in f['signals'].values():
    value = group[group.attrs['signal']]
    assert [group[a].shape[0] for a in group.attrs['axes']] == list(value.shape), group.name
    if 'value_errors' in group: assert group['value_errors'].attrs['units'] == value.attrs['units']
print('ok')
";

#[test]
fn a_generic_nexus_viewer_starts_with_the_release_lines_tension() {
    for (name, _) in KEPT {
        assert_eq!(support::run_oracle(NEXUS_PY, &[kept(name).to_str().unwrap()]), "ok\n", "{name}");
    }
}

const XARRAY_PY: &str = r"
import sys, h5py, numpy as np, xarray as xr
path = sys.argv[1]
with h5py.File(path) as f:
    for name in f['signals']:
        data = xr.open_dataset(path, engine='h5netcdf', group='signals/' + name)
        value = data['value']
        assert value.dims == ('time',), value.dims
        assert np.array_equal(value.values, f['signals'][name]['value'][:]), name
        assert np.array_equal(data['time'].values, f['signals'][name]['time'][:]), name
        assert value.attrs['units'] == f['signals'][name]['value'].attrs['units'], value.attrs
        assert data['time'].attrs['units'] == 's', data['time'].attrs
        first, last = float(data.time[0]), float(data.time[-1])
        part = value.sel(time=slice(first + 0.3 * (last - first), last - 0.3 * (last - first)))
        assert 0 < part.sizes['time'] < value.sizes['time']
        data.close()
print('ok')
";

#[test]
fn xarray_sees_labelled_signals_with_units_over_time() {
    for (name, _) in KEPT {
        assert_eq!(support::run_oracle(XARRAY_PY, &[kept(name).to_str().unwrap()]), "ok\n", "{name}");
    }
}

#[test]
fn the_example_plots_a_trial_with_no_code_of_ours() {
    let dir = tempfile::tempdir().unwrap();
    let picture = dir.path().join("trial.png");
    let example = include_str!("../tools/examples/plot_trial.py");
    let args = [archive::shown(&archive::sealed_trial()), archive::shown(&picture)].map(str::to_owned);
    let said = support::run_oracle(example, &args.each_ref().map(String::as_str));
    assert!(said.contains("north-pier") && said.contains("launch_speed"), "{said}");
    let png = std::fs::read(&picture).unwrap();
    // PNG (ISO/IEC 15948), 5.2: the signature.
    assert!(png.starts_with(b"\x89PNG\r\n\x1a\n") && png.len() > 10_000, "{} bytes", png.len());
}
