//! The program as a user without rights: permissions do not bind root.

use std::os::unix::process::CommandExt;
use std::path::Path;
use std::process::Command;

/// The command for an ordinary user: as it is, or, where this is root, for nobody, from a copy of the program in `dir`, which
/// nobody must be able to enter.
pub fn as_nobody(command: Command, dir: &Path) -> Command {
    // SAFETY: takes no arguments and only reads the process's own identity.
    if unsafe { libc::geteuid() } != 0 {
        return command;
    }
    let program = dir.join("tautrail");
    std::fs::copy(command.get_program(), &program).expect("a copy of the program");
    let mut copy = Command::new(program);
    copy.args(command.get_args()).uid(65_534).gid(65_534);
    copy
}

pub fn set_mode(path: &Path, mode: u32) {
    use std::os::unix::fs::PermissionsExt;
    std::fs::set_permissions(path, std::fs::Permissions::from_mode(mode)).expect("its permissions");
}
