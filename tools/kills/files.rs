//! Trial files that were seen: each must stay where it is, with the same bytes, until this tool itself takes it away.

use std::collections::BTreeMap;
use std::path::{Path, PathBuf};

#[derive(Debug, Default)]
pub struct Files {
    there: BTreeMap<PathBuf, Vec<u8>>,
}

/// What a comparison found.
#[derive(Debug, Default, PartialEq, Eq)]
pub struct Compared {
    pub n_files: u64,
    /// Sentences about files that are gone or altered.
    pub touched: Vec<String>,
}

impl Files {
    /// From now on it must be there as it is now, or as it was when it was noted first.
    pub fn note(&mut self, path: &Path) {
        self.there.entry(path.to_owned()).or_insert_with(|| std::fs::read(path).expect("a trial file"));
    }

    pub fn take_away(&mut self, path: &Path) {
        std::fs::remove_file(path).expect("the trial file goes");
        self.there.remove(path);
    }

    pub fn compare(&self) -> Compared {
        let mut compared = Compared::default();
        for (path, bytes) in &self.there {
            compared.n_files += 1;
            match std::fs::read(path) {
                Ok(found) if found == *bytes => {}
                Ok(_) => compared.touched.push(format!("{} is altered", path.display())),
                Err(error) => compared.touched.push(format!("{} is gone: {error}", path.display())),
            }
        }
        compared
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_file_that_is_gone_or_altered_is_told_and_one_taken_away_is_not() {
        let dir = tempfile::tempdir().unwrap();
        let paths = ["kept.h5", "altered.h5", "deleted.h5", "taken.h5"].map(|name| dir.path().join(name));
        let mut files = Files::default();
        for path in &paths {
            std::fs::write(path, "sealed").unwrap();
            files.note(path);
        }
        assert_eq!(files.compare(), Compared { n_files: 4, touched: Vec::new() });
        std::fs::write(&paths[1], "sealed!").unwrap();
        std::fs::remove_file(&paths[2]).unwrap();
        files.take_away(&paths[3]);
        files.note(&paths[1]); // noted again: it is still to be as it was
        let Compared { n_files, touched } = files.compare();
        assert_eq!((n_files, touched.len()), (3, 2), "{touched:?}");
        assert!(
            touched[0].contains("altered.h5 is altered") && touched[1].contains("deleted.h5 is gone"),
            "{touched:?}"
        );
    }
}
