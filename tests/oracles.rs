//! The reference libraries themselves: that they are the pinned ones.

mod support;

#[test]
fn the_oracles_are_the_pinned_versions() {
    let versions = support::run_oracle(
        "import h5py, numpy, scipy; print(f'h5py=={h5py.__version__}\\nnumpy=={numpy.__version__}\\nscipy=={scipy.__version__}')",
        &[],
    );
    let wanted = include_str!("../tools/oracles/requirements.txt");
    for line in versions.lines() {
        assert!(wanted.lines().any(|pin| pin == line), "{line} is not what requirements.txt pins");
    }
    assert_eq!(versions.lines().count(), 3);
}
