//! Builds the C header's receiver for the target `requests`: undefined behaviour there ends the process.

fn main() {
    println!("cargo::rerun-if-changed=../../firmware-protocol/c/tautrail_protocol.h");
    cc::Build::new()
        .file("src/requests.c")
        .include("../../firmware-protocol/c")
        .std("c99")
        .warnings(true)
        .extra_warnings(true)
        .warnings_into_errors(true)
        .flag("-fsanitize=undefined")
        .flag("-fsanitize-undefined-trap-on-error")
        .compile("requests");
}
