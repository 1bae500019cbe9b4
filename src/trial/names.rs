//! Names within a trial file, derived from names that came from outside.

/// A member name that HDF5 takes literally: `/` and a leading `.` mean paths to it, and so become `_`.
pub(super) fn member_name(name: &str) -> String {
    let mut safe: String = name.chars().map(|c| if c == '/' || c.is_control() { '_' } else { c }).collect();
    if safe.starts_with('.') {
        safe.replace_range(0..1, "_");
    }
    if safe.is_empty() { "_".to_owned() } else { safe }
}

/// [`member_name`], made different from every taken one by a suffix `~2`, `~3`, ….
pub(super) fn free_member_name(name: &str, taken: impl Fn(&str) -> bool) -> String {
    let wanted = member_name(name);
    if !taken(&wanted) {
        return wanted;
    }
    (2_u32..).map(|k| format!("{wanted}~{k}")).find(|candidate| !taken(candidate)).unwrap_or(wanted)
}

#[cfg(test)]
mod tests {
    use super::{free_member_name, member_name};

    #[test]
    fn no_name_from_outside_can_walk_the_file() {
        assert_eq!(member_name("../../rig"), "_._.._rig");
        assert_eq!(member_name("."), "_");
        assert_eq!(member_name(""), "_");
        assert_eq!(member_name("line"), "line");
        assert_eq!(member_name("a\0b"), "a_b");
    }

    #[test]
    fn a_taken_name_gets_the_first_free_suffix() {
        let taken = ["line", "line~2"];
        assert_eq!(free_member_name("line", |name| taken.contains(&name)), "line~3");
    }
}
