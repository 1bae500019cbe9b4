//! The C header writes and reads the same bytes: compiled by the host's compiler with every warning an error.

use std::path::PathBuf;
use std::process::Command;

#[test]
fn the_c_header_passes_the_vectors() {
    let home = PathBuf::from(env!("CARGO_MANIFEST_DIR"));
    let program = PathBuf::from(env!("CARGO_TARGET_TMPDIR")).join("vectors_test");
    let compiled = Command::new("gcc")
        .args(["-Wall", "-Wextra", "-Werror", "-pedantic", "-std=c99", "-O1"])
        .arg(home.join("c/vectors_test.c"))
        .arg("-o")
        .arg(&program)
        .output()
        .unwrap_or_else(|error| panic!("gcc cannot be started ({error}): install a C compiler"));
    assert!(compiled.status.success(), "{}", String::from_utf8_lossy(&compiled.stderr));
    let ran = Command::new(&program).arg(home.join("vectors")).output();
    let ran = ran.unwrap_or_else(|error| panic!("the compiled test cannot be started: {error}"));
    assert!(ran.status.success(), "{}", String::from_utf8_lossy(&ran.stderr));
}
