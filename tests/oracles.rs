//! The reference libraries themselves: that they are the pinned ones.

mod support;

#[test]
fn the_oracles_are_the_pinned_versions() {
    let wanted = include_str!("../tools/oracles/requirements.txt");
    let pins: Vec<&str> = wanted.lines().filter(|line| !line.starts_with('#') && !line.is_empty()).collect();
    let names: Vec<&str> = pins.iter().map(|pin| pin.split_once("==").expect("every library is pinned").0).collect();
    let script = "import sys, importlib.metadata as m\nfor name in sys.argv[1:]: print(f'{name}=={m.version(name)}')";
    let versions = support::run_oracle(script, &names);
    assert_eq!(versions.lines().collect::<Vec<_>>(), pins);
}
